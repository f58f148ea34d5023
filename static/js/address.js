/** Keeps the address bar equal to the state, not oftener than the browser allows. */

import { toAddress } from "./state.js";

const PAUSE_MS = 200;

/** @type {ReturnType<typeof setTimeout> | undefined} */
let pending;

/** @param {() => import("./state.js").State} read the state at the time of writing */
export function writeAddress(read) {
  clearTimeout(pending);
  pending = setTimeout(() => history.replaceState(null, "", `#${toAddress(read())}`), PAUSE_MS);
}
