/** Numbers in words: every one leaves here with its unit. Knows no DOM. */

const UNKNOWN = "not known";

/**
 * @param {number | null | undefined} value
 * @param {number} [digits] decimals
 * @returns {string} grouped by thousands, or null where there is no number
 */
export function number(value, digits = 0) {
  if (typeof value !== "number" || !Number.isFinite(value)) return UNKNOWN;
  const text = value.toFixed(digits);
  const [whole, rest] = text.replace("-", "").split(".");
  const grouped = whole.replace(/\B(?=(\d{3})+$)/g, ",");
  const sign = Number(text) < 0 ? "\u2212" : "";
  return sign + grouped + (rest ? `.${rest}` : "");
}

/**
 * @param {string} unit
 * @param {number} digits
 * @param {string} [gap] between number and unit
 * @returns {(value: number | null | undefined) => string}
 */
function withUnit(unit, digits, gap = "\u00a0") {
  return (value) => {
    const text = number(value, digits);
    return text === UNKNOWN ? text : text + gap + unit;
  };
}

export const feet = withUnit("ft", 0);
export const knots = withUnit("kt", 0);
export const knotsEas = withUnit("kt EAS", 0);
export const feetPerMinute = withUnit("ft/min", 0);
export const kilograms = withUnit("kg", 0);
export const metres = withUnit("m", 0);
export const seconds = withUnit("s", 0);
export const ratio = withUnit(": 1", 1);

/** @param {number | null | undefined} value [nm] */
export function nauticalMiles(value) {
  return withUnit("nm", typeof value === "number" && Math.abs(value) >= 100 ? 0 : 1)(value);
}

/** @param {number | null | undefined} value [km2] */
export function squareKilometres(value) {
  return withUnit("km\u00b2", typeof value === "number" && value > 0 && value < 10 ? 2 : 0)(value);
}

/**
 * @param {number | null | undefined} value degrees from true north
 * @returns {string} three figures, as a bearing is spoken
 */
export function bearing(value) {
  if (typeof value !== "number" || !Number.isFinite(value)) return UNKNOWN;
  const whole = ((Math.round(value) % 360) + 360) % 360;
  return `${String(whole).padStart(3, "0")}\u00b0\u00a0true`;
}

/**
 * @param {number} latitude [deg]
 * @param {number} longitude [deg]
 */
export function place(latitude, longitude) {
  return `${angle(latitude, "N", "S")}, ${angle(longitude, "E", "W")}`;
}

/**
 * @param {number} value [deg]
 * @param {string} positive letter
 * @param {string} negative letter
 */
function angle(value, positive, negative) {
  return `${Math.abs(value).toFixed(4)}\u00b0\u00a0${value < 0 ? negative : positive}`;
}

/**
 * Degrees and whole minutes for the frame of the map.
 *
 * @param {number} minutes minutes of arc
 * @param {string} positive letter
 * @param {string} negative letter
 */
export function frameLabel(minutes, positive, negative) {
  const size = Math.abs(minutes);
  const rest = String(Math.round(size % 60)).padStart(2, "0");
  const letter = minutes === 0 ? "" : minutes < 0 ? negative : positive;
  return `${Math.floor(size / 60)}\u00b0${rest}\u2032${letter}`;
}

/** @param {number | null | undefined} surplus_ft height left over [ft], negative where short */
export function surplus(surplus_ft) {
  if (typeof surplus_ft !== "number") return "surplus not known";
  return surplus_ft < 0 ? `short by ${feet(-surplus_ft)}` : `surplus ${feet(surplus_ft)}`;
}

/** @param {string} word as in a record, `cruise_flap` */
export function plainWord(word) {
  const text = word.replaceAll("_", " ");
  return text.charAt(0).toUpperCase() + text.slice(1);
}
