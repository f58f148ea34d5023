/** The map: relief, outlines, landing sites, the path to a place. */

import { el } from "./dom.js";
import { featureOf, line, outside, polygons } from "./geometry.js";
import { SiteSigns } from "./signs.js";

const L = /** @type {any} */ (globalThis).L;
const PANES = /** @type {const} */ ([
  ["ground", 150], ["shade", 350], ["outline", 410], ["way", 420], ["sites", 600], ["aeroplane", 650],
]);
const SLIVER = 0.001; // of a tile: the boxes of the catalogue are rounded, and off them there is no tile
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
      [pane, L.svg({ pane, padding: 0.3 })]));
    const grounds = boxes(catalog.terrain);
    const corners = grounds.map((box) => [[box.south, box.west], [box.north, box.east]]);
    const style = { pane: "ground", className: "ground", interactive: false };
    for (const pair of corners) L.rectangle(pair, style).addTo(this.map);
    this.home = corners[1]; // the first file, on this turn of the globe
    relief(grounds).addTo(this.map);
    this.answer = L.layerGroup().addTo(this.map);
    this.way = L.layerGroup().addTo(this.map);
    this.signs = new SiteSigns(this.map, catalog.sites, this.renderers.outline);
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
   * Show what `view` says, or the whole outline, or where there is none the first terrain.
   *
   * @param {import("./state.js").View | null} view
   */
  show(view) {
    if (view) this.map.setView([view.latitude, view.longitude], view.zoom, { animate: false });
    else if (this.extent ?? this.home) {
      this.map.fitBounds(this.extent ?? this.home, { padding: [34, 34], maxZoom: 13, animate: false });
    }
  }

  /** What the map shows now. */
  view() {
    const { lat, lng } = this.map.getCenter();
    return { latitude: lat, longitude: lng, zoom: this.map.getZoom() };
  }

  /**
   * @param {HTMLElement} nearer
   * @param {HTMLElement} wider
   * @param {HTMLElement} whole
   */
  tools(nearer, wider, whole) {
    nearer.addEventListener("click", () => this.map.zoomIn());
    wider.addEventListener("click", () => this.map.zoomOut());
    whole.addEventListener("click", () => this.show(null));
    window.addEventListener("beforeprint", () => {
      this.resized();
      this.show(null);
    });
    new ResizeObserver(() => this.resized()).observe(this.map.getContainer());
  }

  /** Its box has another size. */
  resized() {
    this.map.invalidateSize({ pan: false });
  }

  /** @param {any} section answer of `POST /api/section`, or null for none */
  drawWay(section) {
    this.way.clearLayers();
    if (!section) return;
    const profile = section.profile.map((/** @type {any} */ point) => point.position);
    const path = section.path?.geometry.coordinates;
    if (!path) {
      L.polyline(line(profile), this.style("way", "bearing-case")).addTo(this.way);
      L.polyline(line(profile), this.style("way", "bearing-line")).addTo(this.way);
    }
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

/**
 * Where the catalogue says that there is terrain [deg], on this turn of the globe and its neighbours.
 *
 * @param {{bbox: number[]}[]} terrain
 */
function boxes(terrain) {
  return terrain.flatMap(({ bbox: [west, south, east, north] }) => [-360, 0, 360].map((turn) =>
    ({ west: west + turn, east: (east < west ? east + 360 : east) + turn, south, north })));
}

/**
 * Relief tiles, asked for only where there is terrain.
 *
 * @param {{west: number, south: number, east: number, north: number}[]} places
 */
function relief(places) {
  const Relief = L.TileLayer.extend({
    createTile(/** @type {any} */ coords, /** @type {any} */ done) {
      const size = this.getTileSize();
      const corner = coords.scaleBy(size);
      const { lat: north, lng: west } = this._map.unproject(corner, coords.z);
      const { lat: south, lng: east } = this._map.unproject(corner.add(size), coords.z);
      const enough = (/** @type {number} */ shared, /** @type {number} */ tile, /** @type {number} */ box) =>
        shared > Math.min(tile * SLIVER, box / 2);
      const known = places.some((box) =>
        enough(Math.min(box.east, east) - Math.max(box.west, west), east - west, box.east - box.west)
        && enough(Math.min(box.north, north) - Math.max(box.south, south), north - south, box.north - box.south));
      if (known) return L.TileLayer.prototype.createTile.call(this, coords, done);
      setTimeout(done, 0, null, null);
      return el("div", { class: "no-tile" });
    },
  });
  return new Relief(RELIEF, { maxNativeZoom: 13, minZoom: 3, className: "relief", keepBuffer: 1 });
}
