/** Names of sites, laid so that none covers another: right, left, below, above, or left out. */

const SIDES = ["right", "left", "below", "above"];

const KEPT_FREE = ".tools, #legend, #credit, .aeroplane, .knob"; // on the map, over the names
const FRAME_PX = { side: 62, end: 26 }; // left for the figures of the frame

/**
 * @param {HTMLElement[]} nodes signs with their labels, the most important first
 * @param {HTMLElement} container
 */
export function layLabels(nodes, container) {
  const frame = container.getBoundingClientRect();
  /** @type {DOMRect[]} */
  const taken = nodes.map((node) => /** @type {Element} */ (node.querySelector(".sign")).getBoundingClientRect());
  for (const other of document.querySelectorAll(KEPT_FREE)) taken.push(other.getBoundingClientRect());
  nodes.forEach((node, index) => {
    const label = node.querySelector(".label");
    if (!label) return;
    label.classList.remove("away");
    const free = SIDES.some((side) => {
      node.dataset.side = side;
      const box = label.getBoundingClientRect();
      return within(box, frame) && !taken.some((other, at) => at !== index && meet(box, other));
    });
    if (free) taken.push(label.getBoundingClientRect());
    else label.classList.add("away");
  });
}

/**
 * @param {DOMRect} box
 * @param {DOMRect} frame
 */
function within(box, frame) {
  return box.left > frame.left + FRAME_PX.side && box.right < frame.right - 10
    && box.top > frame.top + FRAME_PX.end && box.bottom < frame.bottom - 10;
}

/**
 * @param {DOMRect} one
 * @param {DOMRect} other
 */
function meet(one, other) {
  return one.left < other.right && other.left < one.right
    && one.top < other.bottom && other.top < one.bottom;
}
