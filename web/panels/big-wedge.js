// @ts-check
/* The big wedge under the reading: dotted at its predicted length, filled with the time that has
 * arrived, then in its verdict's colour and texture. */

import { setAttr, svg } from '../dom.js';
import { known } from '../format.js';
import { isAside } from '../store.js';

const BEYOND = 1.08; // the dotted tip lies a little past T60

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  const body = svg('polygon', {});
  const outline = svg('path', {});
  const post = svg('rect', { x: 0, y: 0 });
  const cap = svg('rect', { x: 0 });
  const front = svg('path', { class: 'w-front' });
  const base = svg('path', { class: 'base' });
  const root = svg('svg', { preserveAspectRatio: 'none' });
  root.append(body, outline, post, cap, front, base);
  element.append(root);
  const size = { width: 800, height: 26 };
  new ResizeObserver(([entry]) => {
    size.width = Math.max(50, entry.contentRect.width);
    size.height = Math.max(8, entry.contentRect.height);
    setAttr(root, 'viewBox', `0 0 ${size.width} ${size.height}`);
    store.touch('forming');
  }).observe(element);

  return store.watch(['strikes', 'forming', 'selection'], () => {
    const { strike, isForming } = store.shown();
    const { width: w, height: h } = size;
    const slope = `M0 0L${w} ${h}`;
    setAttr(base, 'd', `M0 ${h - 0.5}H${w}`);
    const part = isForming ? filled(store, strike) : 1;
    const isRejected = !isForming && strike?.verdict === 'rejected';
    const isPost = isRejected || (!isForming && strike && !strike.modes?.length);
    setAttr(body, 'points', isForming ? `0,${h} 0,0 ${w * part},${h * part} ${w * part},${h}` : `0,${h} 0,0 ${w},${h}`);
    const isHollow = strike && isAside(strike);
    setAttr(body, 'class', isForming ? 'w-ringing' : isHollow ? `w-hollow hollow-${strike.verdict}` : `w-${strike?.verdict ?? 'dotted'}`);
    body.toggleAttribute('hidden', !strike || isPost);
    setAttr(outline, 'd', isForming || !strike ? `M.5 ${h}V0L${w} ${h}` : slope);
    setAttr(outline, 'class', isRejected ? 'w-rejected' : 'w-dotted');
    outline.toggleAttribute('hidden', Boolean(strike && !isForming && !(isRejected && strike.modes?.length)));
    post.toggleAttribute('hidden', !isPost);
    setAttr(post, 'width', Math.max(4, w / 240));
    setAttr(post, 'height', h);
    setAttr(post, 'class', isRejected ? 'w-post' : `w-post-${strike?.verdict}`);
    const hasCap = !isForming && known(strike?.peak_dbfs) && strike.peak_dbfs >= -0.05;
    cap.toggleAttribute('hidden', !hasCap);
    setAttr(cap, 'width', w / 12);
    setAttr(cap, 'y', -Math.max(3, h / 16));
    setAttr(cap, 'height', Math.max(3, h / 16));
    setAttr(cap, 'class', `w-cap-${strike?.verdict}`);
    front.toggleAttribute('hidden', !isForming);
    setAttr(front, 'd', `M${w * part} ${Math.max(0, h * part - 6)}V${h}`);
  });
}

/** Share of the predicted length that has arrived, 0 … 1. @param {import('../store.js').Store} store
 * @param {any} forming */
function filled(store, forming) {
  const t60 = (store.bench?.series ? store.medianT60() : null) ?? store.leadMode(forming)?.t60_s;
  if (!known(forming.rang_s)) return 0;
  if (!known(t60) || t60 <= 0) return 0.02;
  return Math.min(1, forming.rang_s / (t60 * BEYOND));
}
