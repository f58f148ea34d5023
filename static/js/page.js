/** The page: ties state, address, map, sheet and service together. */

import { writeAddress } from "./address.js";
import { Aeroplane } from "./aeroplane.js";
import { Asked } from "./asked.js";
import { Chart } from "./chart.js";
import { byId } from "./dom.js";
import { Form } from "./form.js";
import { lessSafe } from "./margins.js";
import { drawNeatline } from "./neatline.js";
import { showBasis, showFigures, showRanges, showSites } from "./numbers.js";
import { ServiceError } from "./problem.js";
import { pullable } from "./pull.js";
import { LatestQueue } from "./queue.js";
import { footprintRequest } from "./request.js";
import { ask } from "./service.js";
import { fromAddress, tidy, toAddress } from "./state.js";
import * as status from "./status.js";

/** @typedef {import("./state.js").State} State @typedef {{state: State, detail: "fine" | "coarse"}} Job */

export class Page {
  /**
   * @param {any} catalog
   * @param {State} first what the page shows where the address says nothing
   */
  constructor(catalog, first) {
    this.catalog = catalog;
    this.first = first;
    this.state = fromAddress(location.hash, first);
    /** @type {any} */
    this.answer = null;
    const { latitude_deg: latitude, longitude_deg: longitude } = this.state;
    this.chart = new Chart(byId("map"), catalog, (north, east) => this.askAbout([east, north]));
    this.chart.show(this.state.view ?? { latitude, longitude, zoom: 10.5 });
    drawNeatline(this.chart.map, /** @type {any} */ (byId("frame")));
    this.aeroplane = new Aeroplane(this.chart.map, {
      onMove: (latitude_deg, longitude_deg, done) => this.moved({ latitude_deg, longitude_deg }, done),
      onTurn: (track_deg, done) => this.moved({ track_deg }, done),
    });
    this.form = new Form(catalog, (patch) => this.changed(patch));
    this.footprints = new LatestQueue(
      (/** @type {Job} */ job, signal) => ask("/api/footprint", footprintRequest(job.state, job.detail), signal),
      (job, answer) => this.answered(job, answer), (_job, error) => this.failed(error));
    const raise = pullable(byId("sheet"), byId("pull"), () => this.chart.resized());
    this.asked = new Asked(catalog, this.chart, {
      onError: (error) => this.refused(error), onClose: () => this.putAway(), onShow: raise });
    this.listen();
  }

  listen() {
    byId("stop").addEventListener("click", () => this.stop());
    this.chart.tools(byId("nearer"), byId("wider"), byId("whole"));
    this.chart.map.on("moveend", () => this.note());
    window.addEventListener("hashchange", () => this.restore());
  }

  start() {
    this.fitted = this.state.view !== null;
    this.showState();
    this.solve("fine");
  }

  /** The address was changed by hand or by the back key. */
  restore() {
    if (location.hash.slice(1) === toAddress(this.state)) return;
    this.state = fromAddress(location.hash, this.first);
    if (this.state.view) this.chart.show(this.state.view);
    if (!this.state.to) this.asked.clear();
    this.start();
  }

  /** Write the state into the address, once the first answer has set the view. */
  note() {
    if (!this.fitted) return;
    writeAddress(() => {
      this.state = { ...this.state, view: this.chart.view() };
      return this.state;
    });
  }

  showState() {
    this.form.show(this.state);
    this.aeroplane.set(this.state.latitude_deg, this.state.longitude_deg, this.state.track_deg);
    this.note();
  }

  /** @param {Partial<State>} patch from the sheet */
  changed(patch) {
    this.state = tidy({ ...this.state, ...patch });
    this.showState();
    this.solve("fine");
  }

  /**
   * @param {Partial<State>} patch from the hand on the aeroplane
   * @param {boolean} done
   */
  moved(patch, done) {
    this.state = tidy({ ...this.state, ...patch });
    this.form.follow(this.state);
    this.solve(done ? "fine" : "coarse");
    if (done) this.note();
  }

  /**
   * While moving, one coarse request at a time follows the hand; the fine one on release stops it.
   *
   * @param {"fine" | "coarse"} detail
   */
  solve(detail) {
    const fine = detail === "fine";
    byId("chart").classList.toggle("stale", fine);
    this.asked.stop();
    if (fine) status.working("Solving");
    else this.chart.drawWay(null);
    this.bolden();
    this.footprints.push({ state: this.state, detail }, fine);
  }

  stop() {
    const solving = this.footprints.busy;
    this.footprints.stop();
    this.asked.stop();
    status.idle();
    if (!solving) return;
    this.draw(null);
    status.headline("Stopped: there is no answer for these inputs. Press Solve to ask again.");
  }

  /**
   * @param {Job} job
   * @param {any} answer
   */
  answered(job, answer) {
    status.showFault(null);
    this.form.blame([]);
    this.draw(answer);
    if (job.detail === "coarse") return;
    status.idle();
    if (!this.fitted) this.chart.show(null);
    this.fitted = true;
    this.note();
    if (this.state.to) this.asked.ask({ state: this.state, look: false });
  }

  /** @param {any} answer or null for none */
  draw(answer) {
    this.answer = answer;
    byId("chart").classList.remove("stale");
    byId("chart").dataset.detail = answer?.detail ?? "none";
    this.chart.draw(answer);
    this.chart.signs.mark(answer?.sites ?? []);
    status.showCoarse(answer);
    for (const id of ["numbers", "sites", "basis"]) byId(id).hidden = answer === null;
    this.bolden();
    if (!answer) return this.asked.clear();
    status.showHeadline(answer);
    showFigures(byId("figures"), answer);
    showRanges(byId("ranges"), answer);
    if (answer.detail === "coarse") return;
    showSites(byId("site-lists"), answer.sites, (id) => this.askAbout(this.asked.placeOf(id)));
    showBasis(byId("sources"), byId("limits"), answer);
  }

  /** Margins less safe than default: the fields at once, the sentences with the answer. */
  bolden() {
    this.form.showBold(this.state, lessSafe(this.state.margins, this.catalog.margins, this.answer));
    status.showBolds(this.answer);
  }

  /** @param {unknown} error there is no footprint for this state */
  failed(error) {
    this.draw(null);
    status.headline("No answer for these inputs.");
    this.refused(error);
  }

  /** @param {unknown} error */
  refused(error) {
    status.idle();
    if (!(error instanceof ServiceError)) throw error;
    status.showFault(error.fault, () => this.solve("fine"));
    this.form.blame(error.fault.fields.map((field) => field.name ?? ""));
  }

  /** @param {[number, number] | null} to longitude, latitude */
  askAbout(to) {
    if (!to) return;
    this.state = tidy({ ...this.state, to });
    this.note();
    if (!this.footprints.busy) this.asked.ask({ state: this.state, look: true });
  }

  putAway() {
    this.state = { ...this.state, to: null };
    this.asked.clear();
    this.note();
  }
}
