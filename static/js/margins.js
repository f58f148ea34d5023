/** The margins: their words, their units, and which way is less safe. Knows no DOM. */

/**
 * @typedef {object} MarginWords
 * @property {string} key name in a request
 * @property {string} name
 * @property {string} unit
 * @property {number} step of the arrow keys
 * @property {string} note
 *
 * @typedef {Record<string, {default: number | null, less_safe: "above" | "below"}>} MarginTable
 */

/** @type {MarginWords[]} */
export const MARGINS = [
  { key: "ratio_factor", name: "Glide ratio", unit: "\u00d7 record", step: 0.05,
    note: "share of the record\u2019s ratio used" },
  { key: "wind_error_kt", name: "Wind error", unit: "kt", step: 1, note: "against every track" },
  { key: "reaction_s", name: "Reaction", unit: "s", step: 1, note: "straight on before the turn" },
  { key: "bank_deg", name: "Bank", unit: "\u00b0", step: 5, note: "in every turn" },
  { key: "clearance_ft", name: "Clearance", unit: "ft", step: 50, note: "above ground on the way" },
  { key: "arrival_height_ft", name: "Arrival height", unit: "ft", step: 100,
    note: "above the place on arrival" },
  { key: "downdraft_fpm", name: "Downdraft", unit: "ft/min", step: 50, note: "sinking air everywhere" },
  { key: "excess_speed_credit", name: "Excess speed", unit: "credit", step: 0.1,
    note: "share of its energy counted" },
];

export const REACTION_LOW_S = 4; // default below 1000 ft above ground
export const REACTION_HIGH_S = 10; // default above it
const TURN_RESERVE_FT = 200; // wanted on arrival above the height of a 180 degree turn

/**
 * The default of one margin; null where it depends on the height.
 *
 * @param {MarginTable} table the catalogue's `margins`
 * @param {string} key
 * @returns {number | null}
 */
export function defaultOf(table, key) {
  return table[key]?.default ?? null;
}

/**
 * Which margins are less safe than their default. That of the reaction depends on the height above
 * ground: only the answer to that very reaction knows, unless it is below both defaults.
 *
 * @param {Record<string, number>} chosen margins that differ from the default
 * @param {MarginTable} table the catalogue's `margins`
 * @param {any} answer the last footprint, or null
 * @returns {Set<string>} keys
 */
export function lessSafe(chosen, table, answer) {
  /** @type {Set<string>} */
  const found = new Set();
  for (const { key } of MARGINS) {
    const usual = key === "reaction_s" ? REACTION_LOW_S : defaultOf(table, key);
    const value = chosen[key];
    if (value === undefined || usual === null) continue;
    if (table[key].less_safe === "above" ? value > usual : value < usual) found.add(key);
  }
  const judged = answer?.inputs?.margins.reaction_s === chosen.reaction_s;
  if (judged && answer?.margins_below_default?.includes("reaction_s")) found.add("reaction_s");
  const turn_ft = answer?.glide.turn_180_loss_ft;
  const arrival = chosen.arrival_height_ft ?? defaultOf(table, "arrival_height_ft");
  if (arrival !== null && typeof turn_ft === "number" && arrival < turn_ft + TURN_RESERVE_FT) {
    found.add("arrival_height_ft");
  }
  return found;
}

/**
 * @param {Record<string, number>} chosen
 * @returns {number} how many margins are not at their default
 */
export function changedCount(chosen) {
  return MARGINS.filter((margin) => chosen[margin.key] !== undefined).length;
}
