/**
 * The frame round the map, as on a printed chart: bars of equal minutes, and their figures.
 * A minute of latitude is one nautical mile, so the sides of the frame are the map's scale.
 */

import { svg } from "./dom.js";
import { frameLabel } from "./format.js";

const BAR_PX = 7; // width of the frame
const LEAST_PX = 26; // shortest bar
const LABEL_PX = 90; // least distance between figures
const LEGEND_PX = 80; // the legend stands in the corner below
const STEPS = [1, 2, 5, 10, 20, 30, 60, 120, 300, 600]; // minutes of arc

/**
 * @param {any} map
 * @param {SVGElement} frame
 */
export function drawNeatline(map, frame) {
  let asked = 0;
  const redraw = () => {
    asked = 0;
    const { x: width, y: height } = map.getSize();
    frame.setAttribute("viewBox", `0 0 ${width} ${height}`);
    frame.replaceChildren(...bars(map, width, height));
  };
  const later = () => { if (!asked) asked = requestAnimationFrame(redraw); };
  map.on("move zoomend resize viewreset", later);
  later();
}

/**
 * @param {any} map
 * @param {number} width
 * @param {number} height
 * @returns {SVGElement[]}
 */
function bars(map, width, height) {
  const box = map.getBounds();
  const toX = (/** @type {number} */ minutes) => map.latLngToContainerPoint([box.getNorth(), minutes / 60]).x;
  const toY = (/** @type {number} */ minutes) => map.latLngToContainerPoint([minutes / 60, box.getWest()]).y;
  const across = marks(box.getWest() * 60, box.getEast() * 60, width);
  const up = marks(box.getSouth() * 60, box.getNorth() * 60, height);
  const drawn = [
    svg("path", { class: "ground", d: ring(width, height, 0, BAR_PX) }),
  ];
  for (const minutes of across.dark) {
    const [from, to] = [Math.max(toX(minutes), 0), Math.min(toX(minutes + across.step), width)];
    for (const y of [0, height - BAR_PX]) drawn.push(bar(from, y, to - from, BAR_PX));
  }
  for (const minutes of up.dark) {
    const [from, to] = [Math.max(toY(minutes + up.step), 0), Math.min(toY(minutes), height)];
    for (const x of [0, width - BAR_PX]) drawn.push(bar(x, from, BAR_PX, to - from));
  }
  drawn.push(svg("path", { class: "edge", d: ring(width, height, 0, BAR_PX) }));
  for (const minutes of across.labels) {
    const x = toX(minutes);
    if (x > 60 && x < width - 60) drawn.push(figure(x, BAR_PX + 13, "middle", frameLabel(minutes, "E", "W")));
  }
  for (const minutes of up.labels) {
    const y = toY(minutes);
    if (y > 40 && y < height - LEGEND_PX) drawn.push(figure(BAR_PX + 5, y + 4, "start", frameLabel(minutes, "N", "S")));
  }
  return drawn;
}

/**
 * @param {number} from [minutes of arc]
 * @param {number} to [minutes of arc]
 * @param {number} length [px]
 * @returns {{step: number, dark: number[], labels: number[]}} starts of the dark bars, figures
 */
export function marks(from, to, length) {
  const pixels = length / Math.max(to - from, 1e-6);
  const wide = (/** @type {number} */ least) => STEPS.find((step) => step * pixels >= least) ?? 600;
  const step = wide(LEAST_PX);
  const apart = wide(LABEL_PX);
  const dark = [];
  for (let start = Math.floor(from / (2 * step)) * 2 * step; start < to; start += 2 * step) dark.push(start);
  const labels = [];
  for (let at = Math.ceil(from / apart) * apart; at < to; at += apart) labels.push(at);
  return { step, dark, labels };
}

/**
 * @param {number} x
 * @param {number} y
 * @param {number} width
 * @param {number} height
 */
function bar(x, y, width, height) {
  return svg("rect", { class: "bar", x, y, width: Math.max(width, 0), height: Math.max(height, 0) });
}

/**
 * @param {number} x
 * @param {number} y
 * @param {string} anchor
 * @param {string} words
 */
function figure(x, y, anchor, words) {
  return svg("text", { x, y, "text-anchor": anchor }, words);
}

/**
 * @param {number} width
 * @param {number} height
 * @param {number} outer
 * @param {number} inner
 */
function ring(width, height, outer, inner) {
  const square = (/** @type {number} */ gap) =>
    `M${gap} ${gap}H${width - gap}V${height - gap}H${gap}Z`;
  return square(outer) + square(inner);
}
