/** Landing sites on the map: lines of runways and areas, one sign and one name a place. */

import { el, sign } from "./dom.js";
import { signPlace, siteLines } from "./geometry.js";
import { layLabels } from "./labels.js";

const L = /** @type {any} */ (globalThis).L;
const RUNWAY = / \d\d[LCR]?\/\d\d[LCR]?$/; // end of a runway's name
const PAUSE_MS = 60;

export class SiteSigns {
  /**
   * @param {any} map
   * @param {any} collection landing sites
   * @param {any} renderer
   */
  constructor(map, collection, renderer) {
    this.map = map;
    this.renderer = renderer;
    /** @type {Map<string, {node: HTMLElement, kind: string, ids: string[]}>} by name */
    this.places = new Map();
    for (const feature of collection.features) this.add(feature);
    map.on("zoomend moveend resize", () => this.lay());
    this.lay();
  }

  /** @param {any} feature */
  add({ geometry, properties }) {
    const at = signPlace(geometry);
    if (!at) return;
    this.draw(geometry);
    const id = String(properties.id);
    const name = String(properties.name ?? id).replace(RUNWAY, "");
    const known = this.places.get(name);
    if (known) {
      known.ids.push(id);
      return;
    }
    const kind = signName(properties.kind);
    const node = el("div", { class: "site" }, sign(`${kind}-out`, "sign"), el("span", { class: "label" }, name));
    const icon = L.divIcon({ className: "site-icon", html: node, iconSize: [0, 0] });
    L.marker(at, { icon, pane: "sites", interactive: false, keyboard: false }).addTo(this.map);
    this.places.set(name, { node, kind, ids: [id] });
  }

  /** @param {any} geometry */
  draw(geometry) {
    const name = geometry.type.endsWith("LineString") ? "runway" : "area";
    for (const track of siteLines(geometry)) {
      for (const className of [`${name}-case`, name]) {
        L.polyline(track, { pane: "outline", renderer: this.renderer, className, interactive: false })
          .addTo(this.map);
      }
    }
  }

  /**
   * Fill the signs of the places in modelled range; the others stay hollow.
   *
   * @param {{id: string, in_range: boolean}[]} reach sites of the last answer
   */
  mark(reach) {
    const within = new Set(reach.filter((site) => site.in_range).map((site) => String(site.id)));
    let changed = false;
    for (const { node, kind, ids } of this.places.values()) {
      const filled = ids.some((id) => within.has(id));
      if (filled === node.classList.contains("within")) continue;
      changed = true;
      node.classList.toggle("within", filled);
      node.querySelector("use")?.setAttribute(
        "href", `/static/icons/signs.svg#${kind}-${filled ? "in" : "out"}`);
    }
    if (changed) this.lay();
  }

  /** Lay the names anew, once the map stands still. */
  lay() {
    clearTimeout(this.laying);
    const nodes = [...this.places.values()].map((place) => place.node);
    this.laying = setTimeout(() => layLabels(nodes, this.map.getContainer()), PAUSE_MS);
  }
}

/** @param {string} kind of a site */
function signName(kind) {
  return ["aerodrome", "strip", "field", "water"].includes(kind) ? kind : "field";
}
