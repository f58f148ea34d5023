/** Start: what the service holds, then the page. */

import { byId } from "./dom.js";
import { Page } from "./page.js";
import { ServiceError, silence } from "./problem.js";
import { ask } from "./service.js";
import { startState } from "./state.js";
import * as status from "./status.js";

/** @param {any} catalog */
function credit(catalog) {
  const sources = catalog.terrain.map((/** @type {any} */ file) =>
    [file.source ?? file.file, file.date].filter(Boolean).join(", "));
  byId("credit").textContent = `Terrain: ${[...new Set(sources)].join("; ")}. Map drawn with Leaflet.`;
}

/** Remember whether the hand is on the keys, so that focus is shown to those who need it. */
function watchHand() {
  const set = (/** @type {string} */ hand) => () => { document.documentElement.dataset.hand = hand; };
  addEventListener("keydown", set("keys"), true);
  addEventListener("pointerdown", set("pointer"), true);
}

watchHand();
try {
  const [catalog, start] = await Promise.all([ask("/api/catalog"), ask("/api/start")]);
  credit(catalog);
  new Page(catalog, startState(start)).start();
} catch (error) {
  status.headline("The page cannot start.");
  status.showFault(error instanceof ServiceError ? error.fault : silence(), () => location.reload());
  if (!(error instanceof ServiceError)) throw error;
}
