/** The sheet under the map on a narrow screen: pulled up and down by its grip, or by keys. */

const HEIGHTS = /** @type {const} */ ([["low", 0.22], ["middle", 0.46], ["high", 0.72]]);

/**
 * @param {HTMLElement} sheet
 * @param {HTMLElement} grip
 * @param {() => void} onSettled the map has another size
 * @returns {() => void} raises the sheet to the middle where it lies lower
 */
export function pullable(sheet, grip, onSettled) {
  let at = 1;
  /** @type {{y: number, height: number, moved: boolean} | null} */
  let pull = null;
  const settle = (/** @type {number} */ index) => {
    at = Math.min(Math.max(index, 0), HEIGHTS.length - 1);
    const [name, share] = HEIGHTS[at];
    sheet.style.setProperty("--sheet", `${Math.round(share * 100)}dvh`);
    grip.setAttribute("aria-label", `Sheet height: ${name}. Press to change.`);
    onSettled();
  };
  grip.addEventListener("pointerdown", (event) => {
    pull = { y: event.clientY, height: sheet.offsetHeight, moved: false };
    grip.setPointerCapture(event.pointerId);
  });
  grip.addEventListener("pointermove", (event) => {
    if (!pull || Math.abs(event.clientY - pull.y) < 6) return;
    pull.moved = true;
    sheet.style.setProperty("--sheet", `${pull.height + pull.y - event.clientY}px`);
  });
  grip.addEventListener("pointerup", () => {
    if (pull?.moved) settle(nearest(sheet.offsetHeight / window.innerHeight));
  });
  grip.addEventListener("pointercancel", () => { pull = null; });
  grip.addEventListener("click", () => {
    if (!pull?.moved) settle((at + 1) % HEIGHTS.length);
    pull = null;
  });
  grip.addEventListener("keydown", (event) => {
    const step = { ArrowUp: 1, ArrowDown: -1 }[event.key];
    if (!step) return;
    event.preventDefault();
    settle(at + step);
  });
  return () => { if (at === 0) settle(1); };
}

/** @param {number} share of the screen's height */
function nearest(share) {
  const gaps = HEIGHTS.map(([, height]) => Math.abs(height - share));
  return gaps.indexOf(Math.min(...gaps));
}
