/** The numbers behind the picture, the ranges by bearing, the sites, the data and the limits. */

import { el, leaderRow, svg } from "./dom.js";
import {
  bearing, feet, feetPerMinute, kilograms, knotsEas, metres, nauticalMiles, number, ratio,
  seconds, squareKilometres, surplus,
} from "./format.js";
import { featureOf } from "./geometry.js";
import { ticks } from "./profile.js";

/** @param {any} answer */
export function areas(answer) {
  return {
    all: featureOf(answer, "footprint").properties.area_km2,
    direct: featureOf(answer, "straight").properties.area_km2,
  };
}

/**
 * @param {any} answer
 * @returns {{bearing_deg: number, distance_nm: number} | null} the farthest of the ranges
 */
export function farthest(answer) {
  const [first, ...rest] = answer.ranges;
  const best = rest.reduce((/** @type {any} */ one, /** @type {any} */ other) =>
    (other.distance_nm > one.distance_nm ? other : one), first);
  return best && best.distance_nm > 0 ? best : null;
}

/**
 * @param {HTMLElement} list
 * @param {any} answer
 */
export function showFigures(list, answer) {
  const { glide, inputs } = answer;
  const { all, direct } = areas(answer);
  const far = farthest(answer);
  const flown = Math.round(glide.speed_eas_kt) === Math.round(glide.best_glide_eas_kt)
    ? null : leaderRow("Speed flown", knotsEas(glide.speed_eas_kt));
  list.replaceChildren(...[
    leaderRow(`Best-glide speed at ${kilograms(inputs.mass_kg)}`, knotsEas(glide.best_glide_eas_kt)),
    flown,
    leaderRow("Glide ratio of the record", ratio(glide.ratio_record)),
    leaderRow("Glide ratio with margins", ratio(glide.ratio_used)),
    leaderRow("Sink at that speed, with margins", feetPerMinute(glide.sink_fpm)),
    leaderRow(`180\u00b0 turn at ${number(inputs.margins.bank_deg)}\u00b0 bank loses`, feet(glide.turn_180_loss_ft)),
    typeof inputs.margins.reaction_s === "number" && inputs.track_deg !== null
      ? leaderRow("Straight on before it", seconds(inputs.margins.reaction_s)) : null,
    leaderRow("Area by any path", squareKilometres(all)),
    leaderRow("Area by one straight glide", squareKilometres(direct)),
    far ? leaderRow("Farthest point", `${nauticalMiles(far.distance_nm)} on ${bearing(far.bearing_deg)}`) : null,
    leaderRow("Cell of the solution", metres(answer.cell_m)),
  ].filter((row) => row !== null));
}

/**
 * Ranges by bearing: a small polar sketch, north up, and the same as a table.
 *
 * @param {HTMLElement} box
 * @param {any} answer
 */
export function showRanges(box, answer) {
  const open = box.querySelector("details")?.hasAttribute("open") ?? false;
  const far = farthest(answer);
  if (!far) {
    box.replaceChildren();
    return;
  }
  const half = Math.ceil(answer.ranges.length / 2);
  const cells = (/** @type {any} */ range) => (range ? [
    el("th", { scope: "row" }, bearing(range.bearing_deg)),
    el("td", {}, nauticalMiles(range.distance_nm))] : []);
  const body = el("tbody", {}, ...answer.ranges.slice(0, half).map((/** @type {any} */ range, /** @type {number} */ row) =>
    el("tr", {}, ...cells(range), ...cells(answer.ranges[row + half]))));
  const heads = ["Bearing", "Range", "Bearing", "Range"].map((word) => el("th", { scope: "col" }, word));
  box.replaceChildren(
    el("figure", { class: "rose" }, rose(answer.ranges, far),
      el("figcaption", {}, el("em", {}, "Range by bearing, true north up"))),
    el("details", { open }, el("summary", {}, "The same as a table"), el("table", {},
      el("caption", { class: "unseen" }, "Range by bearing"),
      el("thead", {}, el("tr", {}, ...heads)),
      body)));
}

const ROSE_PX = 86;

/**
 * @param {{bearing_deg: number, distance_nm: number}[]} ranges
 * @param {{bearing_deg: number, distance_nm: number}} far
 */
function rose(ranges, far) {
  const scale = ROSE_PX / far.distance_nm;
  const spot = (/** @type {number} */ degrees, /** @type {number} */ radius) => {
    const turn = (degrees * Math.PI) / 180;
    return `${(radius * Math.sin(turn)).toFixed(1)} ${(-radius * Math.cos(turn)).toFixed(1)}`;
  };
  const rings = ticks(0, far.distance_nm, 3).filter((value) => value > 0);
  const outline = ranges.map((range) => spot(range.bearing_deg, range.distance_nm * scale)).join("L");
  const [x, y] = spot(far.bearing_deg, ROSE_PX).split(" ").map(Number);
  return svg("svg", { viewBox: "-150 -112 300 224", role: "img",
    "aria-label": `Range by bearing; farthest ${nauticalMiles(far.distance_nm)} on ${bearing(far.bearing_deg)}` },
  ...rings.map((value) => svg("circle", { class: "grid", r: value * scale })),
  ...[0, 90, 180, 270].map((degrees) => svg("path", { class: "grid", d: `M0 0L${spot(degrees, ROSE_PX + 6)}` })),
  svg("path", { class: "range", d: `M${outline}Z` }),
  svg("circle", { class: "here", r: 2.5 }),
  svg("circle", { class: "here", cx: x, cy: y, r: 3 }),
  ...rings.map((value) => svg("text", { class: "halo", x: 3, y: value * scale - 3 }, nauticalMiles(value))),
  svg("text", { x: 0, y: -ROSE_PX - 11, "text-anchor": "middle" }, "N"),
  svg("text", { class: "strong", x: x + (x < 0 ? -8 : 8), y: y + (y < 0 ? -4 : 12), "text-anchor": x < 0 ? "end" : "start" },
    nauticalMiles(far.distance_nm)));
}

/**
 * @param {HTMLElement} box
 * @param {any[]} reach sites of the answer
 * @param {(id: string) => void} onAsk
 */
export function showSites(box, reach, onAsk) {
  const within = reach.filter((site) => site.in_range);
  const tight = reach.filter((site) => !site.in_range && site.surplus_ft >= 0 && site.surplus_ft !== null);
  const without = reach.filter((site) => !site.in_range && !tight.includes(site));
  const near = (/** @type {any} */ one, /** @type {any} */ other) => one.distance_nm - other.distance_nm;
  within.sort((one, other) => (other.surplus_ft ?? 0) - (one.surplus_ft ?? 0));
  without.sort(near);
  const item = (/** @type {any} */ site) => {
    const button = el("button", { type: "button", class: "entry" },
      el("span", { class: "title" }, String(site.name)),
      el("span", { class: "figure" }, site.in_range || tight.includes(site) ? surplus(site.surplus_ft) : "out of range"),
      el("span", { class: "more" }, [`${nauticalMiles(site.distance_nm)} on ${bearing(site.bearing_deg)}`,
        site.note].filter(Boolean).join(". ")));
    button.addEventListener("click", () => onAsk(String(site.id)));
    return el("li", {}, button);
  };
  box.replaceChildren(
    el("h3", {}, `Within modelled range: ${within.length}`), el("ul", {}, ...within.map(item)),
    ...(tight.length ? [el("h3", {}, `Reached, with a reason against: ${tight.length}`),
      el("ul", {}, ...tight.map(item))] : []),
    el("h3", {}, `Not within it: ${without.length}`), el("ul", {}, ...without.map(item)));
}

/**
 * @param {HTMLElement} sources
 * @param {HTMLElement} limits
 * @param {any} answer
 */
export function showBasis(sources, limits, answer) {
  sources.replaceChildren(...answer.data.map((/** @type {any} */ file) => leaderRow(
    String(file.source ?? file.file), [file.date ?? "date not known", metres(file.cell_m),
      file.vertical_datum ?? "vertical datum not known"].join(", "))));
  limits.replaceChildren(...answer.limits.map((/** @type {string} */ sentence) => el("li", {}, sentence)));
}
