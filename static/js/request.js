/** What the page asks of the service, made from its state. Knows no DOM. */

/** @typedef {import("./state.js").State} State */

/**
 * The body of `POST /api/footprint`. What is null in the state is left to the service's default.
 *
 * @param {State} state
 * @param {"fine" | "coarse"} detail
 * @returns {Record<string, unknown>}
 */
export function footprintRequest(state, detail) {
  /** @type {Record<string, unknown>} */
  const body = {
    position: [state.longitude_deg, state.latitude_deg],
    altitude_ft: state.altitude_ft,
    track_deg: state.track_deg,
    aircraft: state.aircraft,
    speed_policy: state.speed_policy,
    wind: state.wind,
    isa_offset_c: state.isa_offset_c,
    qnh_hpa: state.qnh_hpa,
    detail,
    margins: { ...state.margins },
  };
  if (state.mass_kg !== null) body.mass_kg = state.mass_kg;
  if (state.propeller !== null) body.propeller = state.propeller;
  if (state.configuration !== null) body.configuration = state.configuration;
  return body;
}

/**
 * The body of `POST /api/section` for the place that was asked about.
 *
 * @param {State} state
 * @returns {Record<string, unknown>}
 */
export function sectionRequest(state) {
  return { ...footprintRequest(state, "fine"), to: state.to };
}
