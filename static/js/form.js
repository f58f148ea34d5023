/** The inputs of the sheet: shows the state, and tells what was changed. */

import { byId, el } from "./dom.js";
import { plainWord } from "./format.js";
import { MARGINS, REACTION_HIGH_S, REACTION_LOW_S, changedCount, defaultOf } from "./margins.js";
import { readWinds, showWinds } from "./winds.js";

/** @typedef {import("./state.js").State} State */

const WIND_LEVELS_MAX = 50; // of the service
const NUMBERS = ["latitude_deg", "longitude_deg", "altitude_ft", "isa_offset_c", "qnh_hpa"];

export class Form {
  /**
   * @param {any} catalog
   * @param {(patch: Partial<State>) => void} onChange
   */
  constructor(catalog, onChange) {
    this.catalog = catalog;
    this.onChange = onChange;
    this.form = /** @type {HTMLFormElement} */ (byId("inputs"));
    this.winds = byId("winds");
    byId("margin-fields").replaceChildren(...MARGINS.map((margin) => this.marginField(margin)));
    this.form.addEventListener("change", () => this.tell());
    this.form.addEventListener("submit", (event) => {
      event.preventDefault();
      this.tell();
    });
    byId("usual").addEventListener("click", () => onChange({ margins: {} }));
    byId("more-wind").addEventListener("click", () => this.addWind());
  }

  /**
   * @param {string} name
   * @returns {any} input or select
   */
  input(name) {
    return this.form.elements.namedItem(name);
  }

  /** @param {string} id */
  record(id) {
    return this.catalog.aircraft.find((/** @type {any} */ record) => record.id === id);
  }

  /** @param {State} state */
  show(state) {
    this.state = state;
    const record = this.record(state.aircraft);
    const records = this.catalog.aircraft.map((/** @type {any} */ one) => [one.id, one.name]);
    if (!record) records.push([state.aircraft, `${state.aircraft} (not in this folder)`]);
    options(this.input("aircraft"), records, state.aircraft);
    for (const name of ["propeller", "configuration"]) {
      const words = record?.[name] ?? [];
      const chosen = state[/** @type {"propeller"} */ (name)] ?? words[0] ?? "";
      options(this.input(name), words.map((/** @type {string} */ word) => [word, plainWord(word)]), chosen);
    }
    this.input("speed_policy").value = state.speed_policy;
    this.input("mass_kg").value = state.mass_kg ?? record?.mass_max_kg ?? "";
    byId("mass-range").textContent = record ? `${record.mass_min_kg} to ${record.mass_max_kg} kg` : "";
    for (const name of NUMBERS) this.input(name).value = state[/** @type {"qnh_hpa"} */ (name)];
    this.showTrack(state.track_deg);
    showWinds(this.winds, state.wind, () => this.tell());
    byId("more-wind").hidden = state.wind.length >= WIND_LEVELS_MAX;
    for (const { key } of MARGINS) this.input(key).value = state.margins[key] ?? "";
  }

  /** @param {number | null} track */
  showTrack(track) {
    const field = this.input("track_deg");
    this.input("any_track").checked = track === null;
    field.disabled = track === null;
    field.value = track === null ? "" : String(track);
  }

  /**
   * Only what a move of the aeroplane changes: the fields under the hand stay as they are.
   *
   * @param {State} state
   */
  follow(state) {
    this.state = state;
    this.input("latitude_deg").value = state.latitude_deg.toFixed(4);
    this.input("longitude_deg").value = state.longitude_deg.toFixed(4);
    this.showTrack(state.track_deg);
  }

  /** Read every field; say in words which is no number, and tell the rest. */
  tell() {
    const state = /** @type {State} */ (this.state);
    const chosen = this.input("aircraft").value;
    const sameRecord = chosen === state.aircraft;
    const record = this.record(chosen);
    const wind = readWinds(this.winds);
    const values = NUMBERS.map((name) => this.input(name));
    const track = this.input("any_track").checked ? null : this.input("track_deg");
    if (track && state.track_deg === null && track.value === "") track.value = "0";
    const odd = [...values, track, ...wind.fields].filter((field) => field && !isNumber(field));
    const masses = this.input("mass_kg");
    this.complain(odd);
    if (odd.length > 0) return;
    const mass = isNumber(masses) ? Number(masses.value) : null;
    this.onChange({
      ...Object.fromEntries(values.map((field) => [field.name, Number(field.value)])),
      track_deg: track === null ? null : Number(track.value),
      aircraft: chosen,
      speed_policy: this.input("speed_policy").value,
      mass_kg: sameRecord && mass !== record?.mass_max_kg ? mass : null,
      propeller: sameRecord ? chosenWord(this.input("propeller")) : null,
      configuration: sameRecord ? chosenWord(this.input("configuration")) : null,
      wind: wind.levels,
      margins: this.margins(),
    });
  }

  margins() {
    /** @type {Record<string, number>} */
    const found = {};
    for (const { key } of MARGINS) {
      const field = this.input(key);
      if (isNumber(field) && Number(field.value) !== defaultOf(this.catalog.margins, key)) {
        found[key] = Number(field.value);
      }
    }
    return found;
  }

  addWind() {
    const state = /** @type {State} */ (this.state);
    const last = state.wind[state.wind.length - 1];
    const next = last
      ? { ...last, altitude_ft: last.altitude_ft + 3000 }
      : { altitude_ft: 3000, from_deg: 270, speed_kt: 10 };
    this.onChange({ wind: [...state.wind, next] });
  }

  /** @param {any[]} fields that hold no number */
  complain(fields) {
    for (const field of this.form.querySelectorAll("[aria-invalid]")) field.removeAttribute("aria-invalid");
    for (const note of this.form.querySelectorAll(".wrong")) note.remove();
    for (const field of fields) {
      field.setAttribute("aria-invalid", "true");
      field.closest(".field")?.append(el("span", { class: "wrong", role: "alert" }, "Enter a number here."));
    }
  }

  /** @param {string[]} pointers places in the request that the service refused */
  blame(pointers) {
    this.complain([]);
    for (const pointer of pointers) {
      const parts = pointer.split("/").slice(1);
      const name = parts[0] === "position"
        ? ["longitude_deg", "latitude_deg"][Number(parts[1] ?? 0)]
        : parts[0] === "wind" ? `wind-${parts[1]}-${parts[2]}` : parts[parts.length - 1];
      if (name && this.input(name)?.setAttribute) this.input(name).setAttribute("aria-invalid", "true");
    }
  }

  /**
   * @param {State} state
   * @param {Set<string>} bold margins less safe than their default
   */
  showBold(state, bold) {
    for (const { key } of MARGINS) this.input(key).closest(".field").classList.toggle("bold", bold.has(key));
    const count = changedCount(state.margins);
    byId("margin-state").textContent = count === 0 ? "all at default" : `${count} changed`;
  }

  /** @param {import("./margins.js").MarginWords} margin */
  marginField(margin) {
    const usual = defaultOf(this.catalog.margins, margin.key);
    const hint = usual === null ? `${REACTION_LOW_S} or ${REACTION_HIGH_S}` : String(usual);
    const note = usual === null
      ? `${margin.note}; ${REACTION_LOW_S} s below 1000 ft above ground, ${REACTION_HIGH_S} s above` : margin.note;
    return el("label", { class: "field margin" },
      el("span", { class: "name" }, margin.name),
      el("span", { class: "box" },
        el("input", { type: "number", name: margin.key, step: margin.step, placeholder: hint }),
        el("span", { class: "unit" }, margin.unit)),
      el("span", { class: "note" }, note));
  }
}

/** @param {any} field */
function isNumber(field) {
  return field.value.trim() !== "" && Number.isFinite(Number(field.value));
}

/** @param {HTMLSelectElement} select */
const chosenWord = (select) => (select.selectedIndex > 0 ? select.value : null);

/**
 * @param {HTMLSelectElement} select
 * @param {[string, string][]} pairs value and words
 * @param {string} chosen
 */
function options(select, pairs, chosen) {
  select.replaceChildren(...pairs.map(([value, words]) => el("option", { value }, words)));
  select.value = chosen;
}
