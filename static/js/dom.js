/** Small helpers that make elements. Text goes in as text only. */

const SVG = "http://www.w3.org/2000/svg";

/**
 * @param {string} tag
 * @param {Record<string, string | number | boolean | null>} [attributes] false and null are left out
 * @param {...(Node | string | null)} children
 * @returns {HTMLElement}
 */
export function el(tag, attributes = {}, ...children) {
  return /** @type {HTMLElement} */ (fill(document.createElement(tag), attributes, children));
}

/**
 * @param {string} tag
 * @param {Record<string, string | number | boolean | null>} [attributes]
 * @param {...(Node | string | null)} children
 * @returns {SVGElement}
 */
export function svg(tag, attributes = {}, ...children) {
  return /** @type {SVGElement} */ (fill(document.createElementNS(SVG, tag), attributes, children));
}

/**
 * @param {Element} node
 * @param {Record<string, string | number | boolean | null>} attributes
 * @param {(Node | string | null)[]} children
 */
function fill(node, attributes, children) {
  for (const [name, value] of Object.entries(attributes)) {
    if (value === true) node.setAttribute(name, "");
    else if (value !== false && value !== null) node.setAttribute(name, String(value));
  }
  node.append(...children.filter((child) => child !== null));
  return node;
}

/**
 * @param {string} id
 * @returns {HTMLElement}
 */
export function byId(id) {
  const node = document.getElementById(id);
  if (!node) throw new Error(`the page lacks #${id}`);
  return node;
}

/**
 * A drawing from the page's own sheet of signs.
 *
 * @param {string} name
 * @param {string} className
 */
export function sign(name, className) {
  return svg("svg", { class: className, viewBox: "0 0 24 24", "aria-hidden": "true" },
    svg("use", { href: `/static/icons/signs.svg#${name}` }));
}

/**
 * A row of a printed table: words, dotted leader, figure.
 *
 * @param {string} name
 * @param {string} value
 * @param {boolean} [strong]
 */
export function leaderRow(name, value, strong = false) {
  return el("div", { class: "leader" },
    el("dt", {}, name),
    el("dd", {}, strong ? el("strong", {}, value) : value));
}
