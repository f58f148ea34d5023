/** What the page says while it works and when it cannot: progress, stop, errors, the headline. */

import { byId, el } from "./dom.js";
import { bearing, feet, metres, nauticalMiles, squareKilometres } from "./format.js";
import { areas, farthest } from "./numbers.js";
import { fieldName } from "./problem.js";

const PATIENCE_MS = 400; // progress is not shown for what is quicker

/** @type {ReturnType<typeof setInterval> | undefined} */
let clock;

/** @param {string} words what is being done */
export function working(words) {
  clearInterval(clock);
  const since = performance.now();
  const box = byId("work");
  clock = setInterval(() => {
    box.hidden = false;
    byId("worded").textContent = `${words}, ${Math.round((performance.now() - since) / 1000)} s`;
  }, PATIENCE_MS);
}

export function idle() {
  clearInterval(clock);
  byId("work").hidden = true;
}

/** @param {string} text */
export function headline(text) {
  byId("headline").replaceChildren(text);
}

/**
 * The answer in one or two sentences.
 *
 * @param {any} answer
 */
export function showHeadline(answer) {
  const { all, direct } = areas(answer);
  const far = farthest(answer);
  const { inputs } = answer;
  const from = `From ${feet(inputs.altitude_ft)}`;
  const track = inputs.track_deg === null ? "on any heading" : `tracking ${bearing(inputs.track_deg)}`;
  const line = byId("headline");
  if (!far || all === 0) {
    line.replaceChildren(`${from}, ${track}, these margins leave nothing within modelled range. `
      + "That does not mean that no landing is possible.");
    return;
  }
  line.replaceChildren(`${from}, ${track}, `, el("strong", {}, squareKilometres(all)),
    ` within modelled gliding range, ${squareKilometres(direct)} of it by one straight glide. `
    + `Farthest ${nauticalMiles(far.distance_nm)} on ${bearing(far.bearing_deg)}.`);
}

/**
 * Mark the outline as coarse, or as not there, in words: without it no ground is darkened.
 *
 * @param {any} answer or null
 */
export function showCoarse(answer) {
  const slip = byId("coarse");
  const coarse = answer?.detail === "coarse" || answer?.inputs?.detail === "coarse";
  slip.hidden = answer !== null && !coarse;
  if (!answer) slip.textContent = "No answer: the map does not show what is in range";
  if (coarse) slip.textContent = `Coarse outline while moving, ${metres(answer.cell_m)} cells`;
}

/** @param {any} answer whose margins may be less safe than their default, or null */
export function showBolds(answer) {
  const count = answer?.margins_below_default?.length ?? 0;
  const sentences = (answer?.limits ?? []).slice(0, count); // the limits begin with one for each
  const line = byId("bolds");
  line.hidden = sentences.length === 0;
  line.replaceChildren(el("strong", {}, sentences.join(" ")));
}

/**
 * @param {import("./problem.js").Fault | null} fault
 * @param {() => void} [onRetry]
 */
export function showFault(fault, onRetry) {
  const box = byId("fault");
  box.hidden = fault === null;
  if (!fault) {
    box.replaceChildren();
    return;
  }
  const items = fault.fields.map((field) =>
    el("li", {}, el("strong", {}, field.name ? fieldName(field.name) : "Request"), ": ", field.text));
  const again = fault.retry && onRetry ? el("button", { type: "button", class: "plain" }, "Ask again") : null;
  again?.addEventListener("click", () => onRetry?.());
  const detail = fault.detail ? el("p", {}, fault.detail) : "";
  box.replaceChildren(el("h2", {}, fault.title), detail, el("ul", {}, ...items), again ?? "");
  box.scrollIntoView({ block: "nearest" });
}
