/** The place asked about: why it is in or out of range, and the terrain section to it. */

import { el, leaderRow, svg } from "./dom.js";
import { bearing, feet, nauticalMiles, number, place } from "./format.js";
import { plot } from "./profile.js";

const WIDTH = 360;
const HEIGHT = 190;
const LETTER = 5.4; // mean width of a bold letter, a little generous
const FRAME = { left: 46, right: WIDTH - 12, top: 26, bottom: HEIGHT - 34 };

/**
 * @param {HTMLElement} box
 * @param {any} section answer of `POST /api/section`
 * @param {string | null} name of the site there
 * @param {() => void} onClose
 */
export function showSection(box, section, name, onClose) {
  const { reason, within_range: within, by } = section;
  const close = el("button", { type: "button", class: "quiet" }, "Put away");
  close.addEventListener("click", onClose);
  const bent = by === "bent" && section.path_profile;
  const last = section.profile[section.profile.length - 1];
  const turned = last?.along_nm > section.distance_nm + 0.02;
  box.replaceChildren(
    el("h2", {}, name ?? place(section.to[1], section.to[0])),
    el("p", { class: "verdict" }, within ? String(reason.text)
      : reason.code === "no_room" ? "Within modelled range, but no room to lose height" : "Out of modelled range"),
    within ? "" : el("p", { class: "reason" }, String(reason.text)),
    bent ? drawing(section.path_profile, null, "Section along the path", true)
      : drawing(section.profile, within ? null : reason.ridge,
        turned ? "Section along the first turn and the straight line after it" : "Section along the straight line",
        turned),
    el("dl", { class: "leaders" }, ...rows(section)),
    el("p", { class: "end" }, close));
  box.hidden = false;
}

/** @param {any} section */
function rows(section) {
  const bends = section.path?.properties.bends ?? [];
  const ways = { straight: "one straight glide", bent: `a path with ${plural(bends.length, "later bend")}` };
  const way = ways[/** @type {"straight" | "bent"} */ (section.by)];
  return [
    leaderRow("Bearing", bearing(section.bearing_deg)),
    leaderRow("Distance", nauticalMiles(section.distance_nm)),
    way ? leaderRow("Reached by", way) : null,
    section.path ? leaderRow("Length of the path", nauticalMiles(section.path.properties.length_nm)) : null,
    leaderRow("Ground there", feet(section.ground_ft)),
    ...arrival(section),
    section.surplus_ft === null ? null
      : leaderRow(section.surplus_ft < 0 ? "Height shortfall" : "Height surplus", feet(Math.abs(section.surplus_ft))),
  ].filter((row) => row !== null);
}

/**
 * What the surplus is made of: it is counted from the highest point of the cell, trees included.
 *
 * @param {any} section
 */
function arrival({ arrival_altitude_ft: altitude, surplus_ft: surplus, inputs }) {
  if (altitude === null) return [];
  const kept = Math.max(inputs.margins.arrival_height_ft, inputs.margins.clearance_ft);
  return [
    surplus === null ? null : leaderRow("Highest point counted there", feet(altitude - surplus - kept)),
    surplus === null ? null : leaderRow("Height kept above it", feet(kept)),
    leaderRow("Altitude on arrival", feet(altitude)),
  ];
}

/**
 * @param {number} count
 * @param {string} word
 */
function plural(count, word) {
  return count === 1 ? `1 ${word}` : `${count} ${word}s`;
}

/**
 * @param {any[]} profile
 * @param {any} ridge
 * @param {string} title
 * @param {boolean} flown whether the distance is that along the path, not from the aeroplane
 */
function drawing(profile, ridge, title, flown) {
  if (profile.length < 2) return el("p", { class: "aside" }, "Too near for a section.");
  const lines = plot(profile, FRAME);
  const mark = ridge ? ridgeMark(lines, ridge) : [];
  const picture = svg("svg", { class: "section", viewBox: `0 0 ${WIDTH} ${HEIGHT}`, role: "img",
    "aria-label": `${title}: ground, ground with clearance, and glide, heights in feet over nautical miles` },
  svg("defs", {}, svg("pattern", { id: "hatch", width: 8, height: 8, patternUnits: "userSpaceOnUse" },
    svg("path", { class: "hatch", d: "M-2 2 2-2M0 8 8 0M6 10 10 6" }))),
  ...lines.voids.map(({ x, width }) => svg("rect", { fill: "url(#hatch)", x, y: FRAME.top,
    width: Math.max(width, 1), height: FRAME.bottom - FRAME.top })),
  ...axes(lines, flown ? "nm flown" : "nm from the aeroplane"),
  svg("path", { class: "ground", d: lines.ground }),
  svg("path", { class: "surface", d: lines.surface }),
  svg("path", { class: "required", d: lines.required }),
  svg("path", { class: "glide", d: lines.glide }),
  ...mark);
  return el("figure", {}, picture, key(title));
}

/**
 * @param {import("./profile.js").Plot} lines
 * @param {string} measure what is measured to the right
 */
function axes(lines, measure) {
  const up = lines.up.flatMap(({ at, value }) => [
    svg("path", { class: "grid", d: `M${FRAME.left} ${at}H${FRAME.right}` }),
    svg("text", { x: FRAME.left - 6, y: at + 4, "text-anchor": "end" }, number(value))]);
  const digits = lines.across.some(({ value }) => value % 1) ? 1 : 0;
  const across = lines.across.map(({ at, value }) =>
    svg("text", { x: at, y: FRAME.bottom + 15, "text-anchor": "middle" }, number(value, digits)));
  return [...up, ...across,
    svg("text", { x: FRAME.left - 6, y: FRAME.top - 13, "text-anchor": "end" }, "ft"),
    svg("text", { x: FRAME.right, y: HEIGHT - 4, "text-anchor": "end" }, measure),
    svg("path", { class: "base", d: `M${FRAME.left} ${FRAME.bottom}H${FRAME.right}` })];
}

/**
 * @param {import("./profile.js").Plot} lines
 * @param {any} ridge
 */
function ridgeMark(lines, ridge) {
  const x = lines.toX(ridge.distance_nm);
  const y = Math.max(lines.toY(ridge.elevation_ft), FRAME.top + 8);
  const words = `ridge ${feet(ridge.elevation_ft)}, short by ${feet(ridge.short_ft)}`;
  const width = words.length * LETTER;
  const start = Math.min(Math.max(x - width / 2, FRAME.left), FRAME.right - width);
  return [
    svg("path", { class: "mark", d: `M${x} ${y}V${FRAME.top - 8}` }),
    svg("text", { class: "strong", x: start, y: FRAME.top - 13 }, words)];
}

/** @param {string} title */
function key(title) {
  const item = (/** @type {string} */ name, /** @type {string} */ words) => el("span", {},
    svg("svg", { class: "section key", viewBox: "0 0 26 10", "aria-hidden": "true" },
      svg("path", { class: name, d: "M1 5H25" })), words);
  return el("figcaption", {}, el("em", {}, title),
    item("glide", "glide"), item("surface", "ground"), item("required", "with clearance"));
}
