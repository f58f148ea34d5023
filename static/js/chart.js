/** The map: relief, outlines, landing sites, the path to a place. */

import { el, sign } from "./dom.js";
import { featureOf, line, outside, polygons, signPlace, siteLines } from "./geometry.js";
import { layLabels } from "./labels.js";

const L = /** @type {any} */ (globalThis).L;
const PANES = /** @type {const} */ ([
  ["shade", 350], ["outline", 410], ["way", 420], ["sites", 600], ["aeroplane", 650],
]);
const RELIEF = "/api/tiles/relief/{z}/{x}/{y}.png";

export class Chart {
  /**
   * @param {HTMLElement} element
   * @param {any} catalog
   * @param {(latitude: number, longitude: number) => void} onAsk a place was clicked
   */
  constructor(element, catalog, onAsk) {
    this.map = L.map(element, {
      zoomControl: false, attributionControl: false, doubleClickZoom: false,
      zoomSnap: 0.25, zoomDelta: 0.5, minZoom: 3, maxZoom: 15, maxBoundsViscosity: 0.8,
    });
    this.map.setView([0, 0], 9);
    for (const [name, level] of PANES) this.map.createPane(name).style.zIndex = String(level);
    this.renderers = Object.fromEntries(["shade", "outline", "way"].map((pane) =>
      [pane, L.svg({ pane, padding: 0.6 })]));
    relief(catalog.terrain).addTo(this.map);
    this.answer = L.layerGroup().addTo(this.map);
    this.way = L.layerGroup().addTo(this.map);
    this.runways = L.layerGroup().addTo(this.map);
    /** @type {Map<string, HTMLElement>} */
    this.signs = new Map();
    this.sites(catalog.sites);
    this.map.on("click", (/** @type {any} */ event) => {
      const { lat, lng } = event.latlng.wrap();
      onAsk(lat, lng);
    });
    element.addEventListener("keydown", (event) => {
      if (event.key !== "Enter" || event.target !== element) return;
      const { lat, lng } = this.map.getCenter().wrap();
      onAsk(lat, lng);
    });
  }

  /**
   * @param {string} pane
   * @param {string} className
   */
  style(pane, className) {
    return { pane, renderer: this.renderers[pane], className, interactive: false, smoothFactor: 0.5 };
  }

  /** @param {any} answer a footprint, or null for none */
  draw(answer) {
    this.answer.clearLayers();
    this.extent = null;
    if (!answer) return;
    const all = polygons(featureOf(answer, "footprint").geometry);
    const direct = polygons(featureOf(answer, "straight").geometry);
    L.polygon(outside(all), this.style("shade", "shade")).addTo(this.answer);
    if (all.length === 0) return;
    const edge = L.polygon(all, this.style("outline", "any-case")).addTo(this.answer);
    L.polygon(all, this.style("outline", "any")).addTo(this.answer);
    L.polygon(direct, this.style("outline", "direct")).addTo(this.answer);
    this.extent = edge.getBounds();
  }

  /**
   * Show the whole outline, or what `view` says.
   *
   * @param {import("./state.js").View | null} view
   */
  show(view) {
    if (view) this.map.setView([view.latitude, view.longitude], view.zoom);
    else if (this.extent) this.map.fitBounds(this.extent, { padding: [34, 34], maxZoom: 13 });
  }

  /** What the map shows now. */
  view() {
    const { lat, lng } = this.map.getCenter();
    return { latitude: lat, longitude: lng, zoom: this.map.getZoom() };
  }

  /** Its box has another size. */
  resized() {
    this.map.invalidateSize({ pan: false });
  }

  /** @param {any} collection landing sites */
  sites(collection) {
    const named = new Set();
    for (const { geometry, properties } of collection.features) {
      const at = signPlace(geometry);
      if (!at) continue;
      for (const track of siteLines(geometry)) {
        L.polyline(track, this.style("outline", "runway-case")).addTo(this.runways);
        L.polyline(track, this.style("outline", "runway")).addTo(this.runways);
      }
      const name = named.has(properties.name) ? "" : String(properties.name ?? "");
      named.add(properties.name);
      const inner = el("div", { class: `site ${properties.kind}` },
        sign(`${signName(properties.kind)}-out`, "sign"), name ? el("span", { class: "label" }, name) : null);
      const icon = L.divIcon({ className: "site-icon", html: inner, iconSize: [0, 0] });
      L.marker(at, { icon, pane: "sites", interactive: false, keyboard: false }).addTo(this.map);
      this.signs.set(String(properties.id), inner);
    }
    this.map.on("zoomend moveend resize", () => this.lay());
    this.lay();
  }

  /** Lay the names anew, once the map stands still. */
  lay() {
    clearTimeout(this.laying);
    this.laying = setTimeout(() => layLabels([...this.signs.values()], this.map.getContainer()), 60);
  }

  /** @param {{id: string, in_range: boolean}[]} reach sites of the last answer */
  mark(reach) {
    const within = new Set(reach.filter((site) => site.in_range).map((site) => String(site.id)));
    for (const [id, node] of this.signs) {
      const kind = signName(node.classList[1]);
      node.classList.toggle("within", within.has(id));
      node.querySelector("use")?.setAttribute(
        "href", `/static/icons/signs.svg#${kind}-${within.has(id) ? "in" : "out"}`);
    }
    this.lay();
  }

  /** @param {any} section answer of `POST /api/section`, or null for none */
  drawWay(section) {
    this.way.clearLayers();
    if (!section) return;
    const profile = section.profile.map((/** @type {any} */ point) => point.position);
    const path = section.path?.geometry.coordinates;
    if (!path) L.polyline(line(profile), this.style("way", "bearing-line")).addTo(this.way);
    if (path) {
      L.polyline(line(path), this.style("way", "way-case")).addTo(this.way);
      L.polyline(line(path), this.style("way", "way")).addTo(this.way);
      for (const bend of section.path.properties.bends) this.dot(bend.position, "bend");
    }
    const { ridge } = section.reason;
    if (ridge) this.dot(ridge.position, "ridge");
    this.dot(section.to, section.within_range ? "target within" : "target");
  }

  /**
   * @param {[number, number]} position
   * @param {string} className
   */
  dot(position, className) {
    const radius = className.startsWith("target") ? 8 : 5;
    L.circleMarker(line([position])[0], { ...this.style("way", className), radius }).addTo(this.way);
  }
}

/** @param {string} kind of a site */
function signName(kind) {
  return ["aerodrome", "strip", "field", "water"].includes(kind) ? kind : "field";
}

/**
 * Relief tiles, asked for only where the catalogue says that there is terrain.
 *
 * @param {{bbox: number[]}[]} terrain
 */
function relief(terrain) {
  const boxes = terrain.map(({ bbox: [west, south, east, north] }) => L.latLngBounds([south, west], [north, east]));
  const Relief = L.TileLayer.extend({
    createTile(/** @type {any} */ coords, /** @type {any} */ done) {
      const size = this.getTileSize();
      const corner = coords.scaleBy(size);
      const box = L.latLngBounds(
        this._map.unproject(corner, coords.z), this._map.unproject(corner.add(size), coords.z));
      if (boxes.some((known) => known.overlaps(box))) {
        return L.TileLayer.prototype.createTile.call(this, coords, done);
      }
      setTimeout(done, 0, null, null);
      return el("div", { class: "no-tile" });
    },
  });
  return new Relief(RELIEF, { maxNativeZoom: 13, minZoom: 3, className: "relief", keepBuffer: 1 });
}
