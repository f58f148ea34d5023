/** The aeroplane on the map: dragged, turned by a knob ahead of its nose, or moved by keys. */

import { el } from "./dom.js";
import { bearing, place } from "./format.js";

const L = /** @type {any} */ (globalThis).L;
const KNOB_PX = 74; // from the aeroplane to the knob
const STEP_PX = 8; // one press of an arrow key
const LEAP_PX = 40; // with Shift

/**
 * @typedef {object} Hands what the page does with a move; `done` on release
 * @property {(latitude: number, longitude: number, done: boolean) => void} onMove
 * @property {(track: number, done: boolean) => void} onTurn
 */

export class Aeroplane {
  /**
   * @param {any} map
   * @param {Hands} hands
   */
  constructor(map, hands) {
    this.map = map;
    this.hands = hands;
    /** @type {number | null} */
    this.track = 0;
    this.image = el("img", { src: "/static/icons/aeroplane.svg", alt: "", draggable: "false" });
    this.stem = el("span", { class: "stem" });
    this.body = marker(map, "aeroplane", 56, el("div", { class: "turning" }, this.stem, this.image));
    this.knob = marker(map, "knob", 44, el("span", {}));
    this.listen();
  }

  listen() {
    const { body, knob, map } = this;
    body.on("drag", () => { this.placeKnob(); this.told(false); });
    body.on("dragend", () => this.told(true));
    knob.on("drag", () => this.turnTo(this.aim(), false));
    knob.on("dragend", () => { this.placeKnob(); this.turnTo(this.aim(), true); });
    map.on("zoomend viewreset", () => this.placeKnob());
    byKeys(body.getElement(), (event) => this.walk(event), () => this.told(true));
    byKeys(knob.getElement(), (event) => this.twist(event), () => this.turnTo(this.track ?? 0, true));
  }

  /**
   * @param {number} latitude
   * @param {number} longitude
   * @param {number | null} track [deg] null for any heading
   */
  set(latitude, longitude, track) {
    this.track = track;
    this.body.setLatLng([latitude, longitude]);
    this.placeKnob();
    this.describe();
  }

  /** Track under the knob [deg]: the map is conformal, so the angle on the screen is the track. */
  aim() {
    const from = this.map.latLngToLayerPoint(this.body.getLatLng());
    const to = this.map.latLngToLayerPoint(this.knob.getLatLng());
    const degrees = Math.round((Math.atan2(to.x - from.x, from.y - to.y) * 180) / Math.PI);
    return (degrees + 360) % 360;
  }

  placeKnob() {
    const shown = this.track === null ? 0 : this.track;
    const turn = (shown * Math.PI) / 180;
    const from = this.map.latLngToLayerPoint(this.body.getLatLng());
    const to = from.add([KNOB_PX * Math.sin(turn), -KNOB_PX * Math.cos(turn)]);
    this.knob.setLatLng(this.map.layerPointToLatLng(to));
    const turning = /** @type {HTMLElement} */ (this.image.parentElement);
    turning.style.transform = `rotate(${shown}deg)`;
    turning.classList.toggle("any", this.track === null);
    this.knob.getElement().hidden = this.track === null;
  }

  /**
   * @param {number} track
   * @param {boolean} done
   */
  turnTo(track, done) {
    this.track = track;
    const turning = /** @type {HTMLElement} */ (this.image.parentElement);
    turning.style.transform = `rotate(${track}deg)`;
    if (done) this.placeKnob();
    this.describe();
    this.hands.onTurn(track, done);
  }

  /** @param {boolean} done */
  told(done) {
    const { lat, lng } = this.body.getLatLng().wrap();
    this.describe();
    this.hands.onMove(lat, lng, done);
  }

  /**
   * @param {KeyboardEvent} event
   * @returns {boolean} whether it was a key that moves
   */
  walk(event) {
    const way = { ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, -1], ArrowDown: [0, 1] }[event.key];
    if (!way) return false;
    const step = event.shiftKey ? LEAP_PX : STEP_PX;
    const from = this.map.latLngToLayerPoint(this.body.getLatLng());
    this.body.setLatLng(this.map.layerPointToLatLng(from.add([way[0] * step, way[1] * step])));
    this.placeKnob();
    this.told(false);
    return true;
  }

  /**
   * @param {KeyboardEvent} event
   * @returns {boolean} whether it was a key that turns
   */
  twist(event) {
    const sense = { ArrowLeft: -1, ArrowDown: -1, ArrowRight: 1, ArrowUp: 1 }[event.key];
    if (!sense) return false;
    const step = event.shiftKey ? 1 : 5;
    this.turnTo(((this.track ?? 0) + sense * step + 360) % 360, false);
    this.placeKnob();
    return true;
  }

  /** Say where it is to those who do not see it. */
  describe() {
    const { lat, lng } = this.body.getLatLng().wrap();
    const body = this.body.getElement();
    body.setAttribute("role", "application");
    body.setAttribute("aria-roledescription", "movable aeroplane");
    body.setAttribute("aria-label",
      `Aeroplane at ${place(lat, lng)}. Arrow keys move it, with Shift in longer steps.`);
    const knob = this.knob.getElement();
    const words = {
      role: "slider", "aria-label": "Track at failure", "aria-valuemin": "0", "aria-valuemax": "359",
      "aria-valuenow": String(this.track ?? 0), "aria-valuetext": bearing(this.track),
    };
    for (const [name, value] of Object.entries(words)) knob.setAttribute(name, value);
  }
}

/**
 * Keys count as a move while they are held, and as a release when they are let go.
 *
 * @param {HTMLElement} node
 * @param {(event: KeyboardEvent) => boolean} onKey
 * @param {() => void} onRelease
 */
function byKeys(node, onKey, onRelease) {
  let held = false;
  node.addEventListener("keydown", (event) => {
    if (!onKey(event)) return;
    held = true;
    event.preventDefault();
    event.stopPropagation();
  });
  const release = () => {
    if (held) onRelease();
    held = false;
  };
  node.addEventListener("keyup", release);
  node.addEventListener("blur", release);
}

/**
 * @param {any} map
 * @param {string} className
 * @param {number} size_px
 * @param {HTMLElement} inner
 */
function marker(map, className, size_px, inner) {
  const icon = L.divIcon({ className, html: inner, iconSize: [size_px, size_px] });
  const options = { icon, draggable: true, keyboard: true, pane: "aeroplane", zIndexOffset: 0 };
  return L.marker(map.getCenter(), options).addTo(map);
}
