// @ts-check
/* Small helpers to build elements. Text goes in as text, never as markup. */

const SVG = 'http://www.w3.org/2000/svg';

/** @param {string} tag @param {Record<string, any>} props attributes; on…: listeners; text: content
 * @param {(Node|string|null|undefined)[]} children @returns {HTMLElement} */
export function el(tag, props = {}, ...children) {
  const node = document.createElement(tag);
  apply(node, props);
  for (const child of children) if (child !== null && child !== undefined) node.append(child);
  return node;
}

/** @param {string} tag @param {Record<string, any>} props @param {(Node|string)[]} children */
export function svg(tag, props = {}, ...children) {
  const node = document.createElementNS(SVG, tag);
  apply(node, props);
  node.append(...children);
  return node;
}

/** @param {Element} node @param {Record<string, any>} props */
function apply(node, props) {
  for (const [key, value] of Object.entries(props)) {
    if (value === null || value === undefined || value === false) continue;
    if (key === 'text') node.textContent = value;
    else if (key.startsWith('on')) node.addEventListener(key.slice(2), value);
    else node.setAttribute(key, value === true ? '' : String(value));
  }
}

/** One of the shapes that stand for a verdict or a state: good, doubtful, rejected, ringing, aside.
 * @param {string} name @param {string} extra further classes */
export function mark(name, extra = '') {
  const colour = name === 'aside' ? 'aside-mark' : name;
  return svg('svg', { class: `mark ${colour} ${extra}`, 'aria-hidden': 'true', focusable: 'false', viewBox: '0 0 16 16' },
    svg('use', { href: `#mark-${name}` }));
}

/** Writes only what changed. @param {Node} node @param {string} text */
export function setText(node, text) {
  if (node.textContent !== text) node.textContent = text;
}

/** @param {Element} node @param {string} name @param {string|number|null} value null: removes it */
export function setAttr(node, name, value) {
  if (value === null) {
    if (node.hasAttribute(name)) node.removeAttribute(name);
  } else if (node.getAttribute(name) !== String(value)) {
    node.setAttribute(name, String(value));
  }
}

/** A button with an optional key shown beside its word. @param {string} text
 * @param {{onclick: (event: Event) => void, key?: string, kind?: string, label?: string}} options */
export function button(text, { onclick, key = '', kind = 'plain', label = '' }) {
  return el('button', { type: 'button', class: kind, onclick, 'aria-label': label || null },
    el('span', { class: 'word', text }), key ? el('kbd', { text: key, 'aria-hidden': 'true' }) : null);
}

/** Value and waning digits of a table figure. @param {{sure: string, wane: string}} parts */
export function figure(parts) {
  const node = el('span', {}, parts.sure);
  if (parts.wane) node.append(el('span', { class: 'wane-part', text: parts.wane }));
  return node;
}

/** Is the person writing into something? @param {EventTarget|null} target */
export function isField(target) {
  return target instanceof HTMLElement && (target.matches('input, select, textarea') || target.isContentEditable);
}

/** Number of rem in pixels. */
export function rem() {
  return parseFloat(getComputedStyle(document.documentElement).fontSize) || 16;
}
