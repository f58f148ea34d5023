/**
 * The state of the page, and the same state written in the address. Knows no DOM.
 *
 * @typedef {{altitude_ft: number, from_deg: number, speed_kt: number}} WindLevel
 * @typedef {{latitude: number, longitude: number, zoom: number}} View
 * @typedef {object} State
 * @property {number} latitude_deg
 * @property {number} longitude_deg
 * @property {number} altitude_ft true height above mean sea level
 * @property {number | null} track_deg true track at failure, null for any heading
 * @property {string} aircraft record id
 * @property {number | null} mass_kg null for the record's maximum
 * @property {string | null} propeller null for the record's first state
 * @property {string | null} configuration null for the record's first
 * @property {string} speed_policy
 * @property {WindLevel[]} wind empty for calm
 * @property {number} isa_offset_c
 * @property {number} qnh_hpa
 * @property {Record<string, number>} margins only those that differ from the default
 * @property {[number, number] | null} to place asked about: longitude, latitude
 * @property {View | null} view what the map shows, null to fit the answer
 */

const PLACES = 5; // decimals of a degree, about one metre

/** Names in the address and the state's plain numbers behind them. */
const NUMBERS = /** @type {const} */ ([
  ["lat", "latitude_deg"], ["lon", "longitude_deg"], ["alt_ft", "altitude_ft"],
  ["isa_c", "isa_offset_c"], ["qnh_hpa", "qnh_hpa"], ["mass_kg", "mass_kg"],
]);
const WORDS = /** @type {const} */ ([
  ["aircraft", "aircraft"], ["propeller", "propeller"], ["configuration", "configuration"],
  ["speed", "speed_policy"],
]);

/**
 * The state that the page starts with: the request that the service starts with, defaults filled.
 *
 * @param {any} start a footprint request
 * @returns {State}
 */
export function startState(start) {
  return tidy({
    latitude_deg: start.position[1],
    longitude_deg: start.position[0],
    altitude_ft: start.altitude_ft,
    track_deg: start.track_deg ?? null,
    aircraft: String(start.aircraft),
    mass_kg: start.mass_kg ?? null,
    propeller: start.propeller ?? null,
    configuration: start.configuration ?? null,
    speed_policy: start.speed_policy ?? "manual",
    wind: start.wind ?? [],
    isa_offset_c: start.isa_offset_c ?? 0,
    qnh_hpa: start.qnh_hpa ?? 1013.25,
    margins: start.margins ?? {},
    to: null,
    view: null,
  });
}

/**
 * The same state with places as exact as the address keeps them.
 *
 * @param {State} state
 * @returns {State}
 */
export function tidy(state) {
  const { latitude_deg, longitude_deg, to } = state;
  return {
    ...state,
    latitude_deg: round(latitude_deg),
    longitude_deg: round(longitude_deg),
    to: to && [round(to[0]), round(to[1])],
  };
}

/** @param {number} value */
function round(value) {
  return Number(value.toFixed(PLACES));
}

/**
 * Write the whole state as the part of the address after `#`.
 *
 * @param {State} state
 * @returns {string}
 */
export function toAddress(state) {
  const query = new URLSearchParams();
  for (const [name, key] of NUMBERS) {
    if (state[key] !== null) query.set(name, String(round(/** @type {number} */ (state[key]))));
  }
  for (const [name, key] of WORDS) if (state[key]) query.set(name, /** @type {string} */ (state[key]));
  query.set("track", state.track_deg === null ? "any" : String(state.track_deg));
  query.set("wind", state.wind.map(levelText).join("_") || "calm");
  for (const [key, value] of Object.entries(state.margins)) query.set(`m.${key}`, String(value));
  if (state.to) query.set("to", `${round(state.to[1])}_${round(state.to[0])}`);
  const { view } = state;
  if (view) query.set("view", [round(view.latitude), round(view.longitude), view.zoom].join("_"));
  return query.toString();
}

/** @param {WindLevel} level */
function levelText(level) {
  return `${level.altitude_ft}ft${level.from_deg}at${level.speed_kt}`;
}

/**
 * Read a state back; what the address lacks or garbles stays as in `base`.
 *
 * @param {string} text address part, with or without `#`
 * @param {State} base
 * @returns {State}
 */
export function fromAddress(text, base) {
  const query = new URLSearchParams(text.replace(/^#/, ""));
  const state = { ...base, margins: query.size ? {} : base.margins, wind: base.wind.map((level) => ({ ...level })) };
  for (const [name, key] of NUMBERS) {
    const value = finite(query.get(name));
    if (value !== null) state[key] = value;
  }
  for (const [name, key] of WORDS) {
    const value = query.get(name);
    if (value) state[key] = value;
  }
  state.track_deg = readTrack(query.get("track"), base.track_deg);
  state.wind = readWind(query.get("wind")) ?? state.wind;
  for (const [name, value] of query) {
    const number = finite(value);
    if (name.startsWith("m.") && number !== null) state.margins[name.slice(2)] = number;
  }
  const to = (query.get("to") ?? "").split("_").map(finite);
  if (to.length === 2 && to[0] !== null && to[1] !== null) state.to = [to[1], to[0]];
  state.view = readView(query.get("view"));
  return state;
}

/**
 * @param {string | null} text
 * @param {number | null} base
 */
function readTrack(text, base) {
  return text === "any" ? null : finite(text) ?? base;
}

/** @param {string | null} text */
function readWind(text) {
  if (text === null) return null;
  if (text === "calm") return [];
  const levels = text.split("_").map((part) => {
    const [altitude_ft, from_deg, speed_kt] = part.split(/ft|at/).map(finite);
    return { altitude_ft, from_deg, speed_kt };
  });
  const whole = levels.every((level) => Object.values(level).every((value) => typeof value === "number"));
  return whole ? /** @type {WindLevel[]} */ (levels) : null;
}

/** @param {string | null} text */
function readView(text) {
  const [latitude, longitude, zoom] = (text ?? "").split("_").map(finite);
  if (typeof latitude !== "number" || typeof longitude !== "number" || typeof zoom !== "number") {
    return null;
  }
  return { latitude, longitude, zoom };
}

/**
 * @param {string | null} text
 * @returns {number | null} the number, or null where there is none
 */
function finite(text) {
  if (text === null || text.trim() === "") return null;
  const value = Number(text);
  return Number.isFinite(value) ? value : null;
}
