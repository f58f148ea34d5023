/** The rows of the wind: altitude, direction it blows from, speed. */

import { el } from "./dom.js";

/** @typedef {import("./state.js").WindLevel} WindLevel */

const PARTS = /** @type {const} */ ([
  ["altitude_ft", "At", "ft", 500], ["from_deg", "From", "\u00b0 true", 5], ["speed_kt", "Speed", "kt", 1],
]);

/**
 * @param {HTMLElement} box
 * @param {WindLevel[]} levels
 * @param {() => void} onRemove
 */
export function showWinds(box, levels, onRemove) {
  const rows = [...box.querySelectorAll(".wind")].map((line) => line.getAttribute("data-level"));
  if (levels.length > 0 && rows.join() === levels.map((_, index) => index).join()) {
    fillRows(box, levels); // the rows stay, and with them the focus
    return;
  }
  if (levels.length === 0) {
    box.replaceChildren(el("p", { class: "aside" }, "Calm at every level."));
    return;
  }
  box.replaceChildren(...levels.map((_, index) => row(index, onRemove)));
  fillRows(box, levels);
}

/**
 * @param {HTMLElement} box
 * @param {WindLevel[]} levels
 */
function fillRows(box, levels) {
  levels.forEach((level, index) => {
    for (const [key] of PARTS) {
      const field = /** @type {HTMLInputElement | null} */ (box.querySelector(`[name="wind-${index}-${key}"]`));
      if (field) field.value = String(level[key]);
    }
  });
}

/**
 * @param {number} index
 * @param {() => void} onRemove
 */
function row(index, onRemove) {
  const fields = PARTS.map(([key, name, unit, step]) => el("label", { class: "field" },
    el("span", { class: "name" }, index === 0 && key === "altitude_ft" ? "Wind at" : name),
    el("span", { class: "box" },
      el("input", { type: "number", name: `wind-${index}-${key}`, step }),
      el("span", { class: "unit" }, unit))));
  const remove = el("button", { type: "button", class: "quiet remove",
    "aria-label": `Remove wind level ${index + 1}` }, "\u00d7");
  const line = el("div", { class: "wind", role: "group", "data-level": index, "aria-label": `Wind level ${index + 1}` },
    ...fields, remove);
  remove.addEventListener("click", () => {
    line.remove();
    onRemove();
  });
  return line;
}

/**
 * @param {HTMLElement} box
 * @returns {{levels: WindLevel[], fields: HTMLInputElement[]}}
 */
export function readWinds(box) {
  const rows = [...box.querySelectorAll(".wind")];
  const fields = rows.map((line) => /** @type {HTMLInputElement[]} */ ([...line.querySelectorAll("input")]));
  const levels = fields.map(([altitude, from, speed]) => ({
    altitude_ft: Number(altitude.value), from_deg: Number(from.value), speed_kt: Number(speed.value),
  }));
  return { levels, fields: fields.flat() };
}
