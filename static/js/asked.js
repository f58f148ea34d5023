/** The place asked about: asks the service for the section to it, shows it, puts it away. */

import { byId } from "./dom.js";
import { signPlace } from "./geometry.js";
import { LatestQueue } from "./queue.js";
import { sectionRequest } from "./request.js";
import { showSection } from "./section.js";
import { ask } from "./service.js";
import * as status from "./status.js";

/** @typedef {import("./state.js").State} State */
/** @typedef {{state: State, look: boolean}} Question look: bring the answer into view */

export class Asked {
  /**
   * @param {any} catalog
   * @param {import("./chart.js").Chart} chart
   * @param {{onError: (error: unknown) => void, onClose: () => void, onShow: () => void}} hands
   */
  constructor(catalog, chart, hands) {
    this.sites = catalog.sites.features;
    this.chart = chart;
    this.hands = hands;
    this.queue = new LatestQueue(
      (/** @type {Question} */ question, signal) => ask("/api/section", sectionRequest(question.state), signal),
      (question, section) => this.show(question, section),
      (_question, error) => hands.onError(error));
  }

  /** @param {Question} question whose state names the place */
  ask(question) {
    status.working("Asking about that place");
    this.queue.push(question, true);
  }

  /** What is shown belongs to inputs that no longer stand. */
  stop() {
    this.queue.stop();
    byId("asked").classList.add("stale");
  }

  /**
   * @param {string} id of a site
   * @returns {[number, number] | null} longitude, latitude of its sign
   */
  placeOf(id) {
    const site = this.sites.find((/** @type {any} */ one) => String(one.properties.id) === id);
    const at = signPlace(site?.geometry);
    return at ? [at[1], at[0]] : null;
  }

  /**
   * @param {[number, number] | null} to
   * @returns {string | null} name of the site whose sign stands there
   */
  nameAt(to) {
    const site = this.sites.find((/** @type {any} */ one) => {
      const at = signPlace(one.geometry);
      return at && to && near(at[0], to[1]) && near(at[1], to[0]);
    });
    return site ? String(site.properties.name) : null;
  }

  /**
   * @param {Question} question
   * @param {any} section
   */
  show({ state, look }, section) {
    status.idle();
    this.chart.drawWay(section);
    byId("hint").hidden = true;
    const box = byId("asked");
    box.classList.remove("stale");
    showSection(box, section, this.nameAt(state.to), this.hands.onClose);
    if (!look) return;
    this.hands.onShow();
    box.scrollIntoView({ block: "nearest" });
  }

  clear() {
    this.chart.drawWay(null);
    byId("asked").hidden = true;
    byId("hint").hidden = false;
  }
}

/**
 * @param {number} one [deg]
 * @param {number} other [deg], perhaps rounded in the address
 */
function near(one, other) {
  return Math.abs(one - other) < 1e-5;
}
