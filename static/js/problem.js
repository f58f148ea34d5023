/** Errors in words that say what to do, from problem+json. Knows no DOM. */

/**
 * @typedef {object} Fault
 * @property {string} title
 * @property {string} detail
 * @property {{name: string | null, text: string}[]} fields name of the field and what is wrong
 * @property {boolean} retry whether asking again may help
 */

/** Names of the page's fields by the place in the request that the service points to. */
const NAMES = new Map([
  ["/position", "Position"], ["/position/0", "Longitude"], ["/position/1", "Latitude"],
  ["/altitude_ft", "True altitude"], ["/track_deg", "Track"], ["/aircraft", "Aeroplane"],
  ["/mass_kg", "Mass"], ["/propeller", "Propeller"], ["/configuration", "Configuration"],
  ["/speed_policy", "Speed flown"], ["/isa_offset_c", "ISA deviation"], ["/qnh_hpa", "QNH"],
  ["/to", "Place asked about"], ["/margins/ratio_factor", "Glide ratio margin"],
  ["/margins/wind_error_kt", "Wind error margin"], ["/margins/reaction_s", "Reaction"],
  ["/margins/bank_deg", "Bank"], ["/margins/clearance_ft", "Clearance"],
  ["/margins/arrival_height_ft", "Arrival height"], ["/margins/downdraft_fpm", "Downdraft"],
  ["/margins/excess_speed_credit", "Excess speed credit"],
]);

const UNITS = new Map([
  ["ft", "\u00a0ft"], ["kt", "\u00a0kt"], ["kg", "\u00a0kg"], ["deg", "\u00b0"], ["c", "\u00a0\u00b0C"],
  ["hpa", "\u00a0hPa"], ["s", "\u00a0s"], ["fpm", "\u00a0ft/min"],
]);

/**
 * @param {string} pointer RFC 6901
 * @returns {string} the name that the page gives to that field
 */
export function fieldName(pointer) {
  const level = /^\/wind\/(\d+)\/(altitude_ft|from_deg|speed_kt)$/.exec(pointer);
  if (level) {
    const word = { altitude_ft: "altitude", from_deg: "direction", speed_kt: "speed" }[level[2]];
    return `Wind level ${Number(level[1]) + 1}, ${word}`;
  }
  return NAMES.get(pointer) ?? pointer.replace(/^\//, "").replaceAll("/", " ").replaceAll("_", " ");
}

/** A refusal of the service, or its silence. */
export class ServiceError extends Error {
  /** @param {Fault} fault */
  constructor(fault) {
    super(fault.detail);
    this.fault = fault;
  }
}

/**
 * @param {number} status
 * @param {any} body parsed problem+json, or null
 * @param {string | null} retryAfter header
 * @returns {Fault}
 */
export function faultOf(status, body, retryAfter) {
  const busy = status === 503;
  const wait = retryAfter ? ` Ask again in ${retryAfter} s.` : " Ask again in a moment.";
  const fields = (Array.isArray(body?.errors) ? body.errors : []).map((/** @type {any} */ entry) => ({
    name: String(entry.pointer ?? ""),
    text: [entry.detail === body.detail ? "" : sentence(entry.detail),
      entry.allowed ? `Allowed is ${sentence(withUnit(entry.allowed, entry.pointer))}` : ""]
      .filter(Boolean).join(" "),
  }));
  const detail = sentence(body?.detail ?? `It answered with status ${status}.`);
  const repeats = detail.startsWith("/") && fields.length > 0; // the field's own words follow
  return {
    title: String(body?.title ?? "The service could not answer"),
    detail: (repeats ? "" : detail) + (busy ? wait : ""),
    fields,
    retry: busy || status >= 500,
  };
}

/**
 * @param {unknown} allowed bare numbers get the unit in which the field's name ends
 * @param {unknown} pointer
 */
function withUnit(allowed, pointer) {
  const unit = UNITS.get(String(pointer).split("_").pop() ?? "");
  return unit && /\d$/.test(String(allowed)) ? `${allowed}${unit}` : String(allowed);
}

/** @returns {Fault} for a service that does not answer at all */
export function silence() {
  return {
    title: "The service does not answer",
    detail: "Check that it is running and that this computer can reach it, then ask again.",
    fields: [],
    retry: true,
  };
}

/** @param {unknown} text */
function sentence(text) {
  const words = String(text ?? "").trim();
  return words === "" || /[.!?]$/.test(words) ? words : `${words}.`;
}
