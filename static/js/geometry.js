/** GeoJSON turned into what the map draws. Only reorders coordinates; measures nothing. No DOM. */

/** @typedef {[number, number]} LatLng */

const WORLD = /** @type {LatLng[]} */ ([[-85, -540], [-85, 540], [85, 540], [85, -540]]);

/**
 * @param {any} geometry Polygon, MultiPolygon or null
 * @returns {LatLng[][][]} polygons, each of rings of latitude, longitude
 */
export function polygons(geometry) {
  if (!geometry) return [];
  const parts = geometry.type === "Polygon" ? [geometry.coordinates] : geometry.coordinates;
  return parts.map((/** @type {number[][][]} */ part) => part.map(line));
}

/**
 * @param {number[][]} coordinates longitude, latitude
 * @returns {LatLng[]}
 */
export function line(coordinates) {
  return coordinates.map(([longitude, latitude]) => [latitude, longitude]);
}

/**
 * The rings of all that lies outside the polygons, for an even-odd fill.
 *
 * @param {LatLng[][][]} inside
 * @returns {LatLng[][]}
 */
export function outside(inside) {
  return [WORLD, ...inside.flat()];
}

/**
 * The lines of a site (a runway is a line from threshold to threshold).
 *
 * @param {any} geometry
 * @returns {LatLng[][]} empty for a point
 */
export function siteLines(geometry) {
  switch (geometry?.type) {
    case "LineString": return [line(geometry.coordinates)];
    case "MultiLineString": case "Polygon": return geometry.coordinates.map(line);
    case "MultiPolygon": return geometry.coordinates.flat().map(line);
    default: return [];
  }
}

/**
 * Where the sign of a site is put: its point, or the middle of its box.
 *
 * @param {any} geometry
 * @returns {LatLng | null}
 */
export function signPlace(geometry) {
  if (geometry?.type === "Point") return line([geometry.coordinates])[0];
  const all = siteLines(geometry).flat();
  if (all.length === 0) return null;
  const middle = (/** @type {number[]} */ values) => (Math.min(...values) + Math.max(...values)) / 2;
  return [middle(all.map((point) => point[0])), middle(all.map((point) => point[1]))];
}

/**
 * @param {any} collection
 * @param {string} kind
 * @returns {any} the feature of that kind
 */
export function featureOf(collection, kind) {
  return collection.features.find((/** @type {any} */ feature) => feature.properties.kind === kind);
}
