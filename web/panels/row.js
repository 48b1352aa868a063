// @ts-check
/* The wedge row: every strike of the series, height its level, length its T60, on one scale.
 * One tab stop, a listbox; only the slots near the view are in the document. */

import { button, el, figure, rem, setAttr, setText, svg } from '../dom.js';
import { dress, known, level, NARROW, pair, parts, PM } from '../format.js';
import { decimal, t } from '../lang.js';
import { isAside } from '../store.js';
import { clockText, reasonWords } from '../sentences.js';
import { slotsInView, slotsPerLine, unfoldedSlot, wedgeHeight, wedgeLength, wedgePoints } from '../plot/geometry.js';

const UNFOLDED_PITCH = 21;
const UNFOLDED_HEIGHT = 50;
const TEN_GAP = 14;
const WANTED_MAX = 20;

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  const values = el('span', { class: 'values' });
  const hint = el('span', { class: 'hint' });
  const fold = button('', { key: 'a', onclick: () => store.announce('toggle-fold', null), kind: 'plain' });
  const axis = svg('svg', { class: 'axis', 'aria-hidden': 'true' });
  const list = svg('svg', { role: 'listbox', 'aria-label': t('rowLabel'), 'aria-orientation': 'horizontal' });
  const scroll = el('div', { class: 'scroll' }, list);
  const wantedCount = el('b');
  const wanted = el('div', { class: 'wanted' }, wantedCount, el('span', { text: t('more') }));
  const newer = el('button', { type: 'button', class: 'newer plain', onclick: () => store.select(null) });
  element.setAttribute('aria-label', t('row'));
  element.append(el('div', { class: 'line-above' }, values, hint), el('div', { class: 'stage' }, axis, scroll, wanted), newer);
  hint.append(el('span', { class: 'text' }), ' ', fold);
  const hintText = /** @type {HTMLElement} */ (hint.firstElementChild);

  /** @type {Map<number, {node: Element, key: string}>} */
  const slots = new Map();
  let lastNewest = 0;
  let isAtEnd = true;
  let unseen = 0;
  let selectedShown = 0;
  let layoutKey = '';

  function layout() {
    const unit = rem() / 16;
    const isNarrow = innerWidth < 600;
    if (store.isWide) {
      const s = Math.min(innerHeight / 900, innerWidth / 600);
      return { isUnfolded: false, pitch: 72 * s, H: 116 * s, top: 8 * s, foot: 20 * s, unit: s, hasNumber: false };
    }
    if (store.isUnfolded) return { isUnfolded: true, pitch: UNFOLDED_PITCH * unit, H: 28 * unit, top: 4, foot: 18 * unit, unit, hasNumber: false };
    return { isUnfolded: false, pitch: (isNarrow ? 46 : 58) * unit, H: (isNarrow ? 56 : 66) * unit, top: 8 * unit, foot: 40 * unit, unit, hasNumber: true };
  }

  function paint() {
    const L = layout();
    const perLine = slotsPerLine(scroll.clientWidth - 30, L.pitch, TEN_GAP);
    const ids = store.row;
    const more = L.isUnfolded ? 0 : wantedSlots(store, ids.length, scroll.clientWidth / L.pitch);
    const total = ids.length + more;
    const key = JSON.stringify([L, perLine]);
    const isNewLayout = key !== layoutKey;
    if (isNewLayout) {
      layoutKey = key;
      for (const { node } of slots.values()) node.remove();
      slots.clear();
      paintAxis(axis, L);
    }
    const width = L.isUnfolded ? scroll.clientWidth : total * L.pitch + 8;
    const height = L.isUnfolded ? Math.ceil(ids.length / perLine) * UNFOLDED_HEIGHT * L.unit : L.top + L.H + L.foot;
    setAttr(list, 'width', Math.round(width));
    setAttr(list, 'height', Math.round(height));
    list.classList.toggle('is-empty', !ids.length);
    const newestId = ids.at(-1) ?? 0;
    if (store.isWide || (isNewLayout && store.isFollowing)) { // the wide view always shows the newest
      isAtEnd = true;
      showEnd(L, ids.length, more);
    }
    if (newestId !== lastNewest) {
      if (!isAtEnd) unseen += ids.filter((id) => id > lastNewest).length;
      const isGrown = lastNewest > 0 && newestId > lastNewest;
      lastNewest = newestId;
      if (isAtEnd) showEnd(L, ids.length, more);
      paintSlots(L, perLine, ids, more, isGrown ? newestId : 0);
    } else {
      paintSlots(L, perLine, ids, more, 0);
    }
    if (store.selected !== selectedShown) {
      selectedShown = store.selected ?? 0;
      showSelected(L, perLine);
    }
    newer.hidden = !unseen || store.isFollowing;
    setText(newer, t('newerWaiting', { count: unseen }));
    paintLine();
    setText(wantedCount, String(store.wanted() ?? ''));
    wanted.hidden = store.wanted() === null;
  }

  /** @param {ReturnType<layout>} L @param {number} count @param {number} more */
  function showEnd(L, count, more) {
    if (L.isUnfolded) scroll.scrollTop = scroll.scrollHeight;
    else scroll.scrollLeft = Math.max(0, (count + Math.min(more, Math.floor(scroll.clientWidth / L.pitch / 4))) * L.pitch + 8 - scroll.clientWidth);
    unseen = 0;
  }

  /** @param {ReturnType<layout>} L @param {number} perLine */
  function showSelected(L, perLine) {
    const i = store.row.indexOf(store.selected ?? -1);
    if (i < 0) return;
    if (store.isFollowing) {
      isAtEnd = true;
      showEnd(L, store.row.length, L.isUnfolded ? 0 : wantedSlots(store, store.row.length, scroll.clientWidth / L.pitch));
      return;
    }
    if (L.isUnfolded) {
      const y = unfoldedSlot(i, perLine, L.pitch, UNFOLDED_HEIGHT * L.unit, TEN_GAP).y;
      if (y < scroll.scrollTop || y + UNFOLDED_HEIGHT > scroll.scrollTop + scroll.clientHeight) scroll.scrollTop = y - 40;
      return;
    }
    const x = i * L.pitch;
    if (x < scroll.scrollLeft) scroll.scrollLeft = x - L.pitch;
    else if (x + L.pitch > scroll.scrollLeft + scroll.clientWidth) scroll.scrollLeft = x + 2 * L.pitch - scroll.clientWidth;
  }

  /** @param {ReturnType<layout>} L @param {number} perLine @param {number[]} ids @param {number} more
   * @param {number} arriving */
  function paintSlots(L, perLine, ids, more, arriving) {
    const lineHeight = UNFOLDED_HEIGHT * L.unit;
    const seen = L.isUnfolded
      ? { from: Math.max(0, Math.floor(scroll.scrollTop / lineHeight) - 1) * perLine, to: (Math.ceil((scroll.scrollTop + scroll.clientHeight) / lineHeight) + 1) * perLine }
      : slotsInView(scroll.scrollLeft, scroll.clientWidth, L.pitch, ids.length + more);
    const wantedKeys = new Set();
    const medianT60 = store.medianT60();
    for (let i = seen.from; i < Math.min(seen.to, ids.length + more); i++) {
      const id = ids[i] ?? -(i - ids.length + 1);
      wantedKeys.add(id);
      const strike = id > 0 ? store.strikes.get(id) : null;
      const at = L.isUnfolded ? unfoldedSlot(i, perLine, L.pitch, lineHeight, TEN_GAP) : { x: i * L.pitch, y: 0 };
      if (L.isUnfolded) at.x += 30 * L.unit;
      const isSelected = id === store.selected;
      const mode = strike ? store.leadMode(strike) : null;
      const key = `${at.x} ${at.y} ${strike?.revision} ${strike?.verdict} ${strike?.odd} ${strike ? isAside(strike) : ''} ${isSelected} ${id === store.pinned} ${mode?.t60_s} ${store.scale?.t60} ${medianT60} ${id > 0 ? '' : (ids.at(-1) ?? 0)}`;
      const old = slots.get(id);
      if (old?.key === key) continue;
      const node = id > 0 ? slot(store, strike, at, L, isSelected, medianT60) : futureSlot((ids.at(-1) ?? 0) - id, at, L, store, ids);
      setAttr(node, 'aria-setsize', id > 0 ? ids.length : null);
      setAttr(node, 'aria-posinset', id > 0 ? i + 1 : null);
      if (id > 0 && L.isUnfolded && i % perLine === 0) node.append(svg('text', { x: -24 * L.unit, y: L.top + L.H, text: dress(String(id)) }));
      if (id === arriving) node.classList.add('arriving');
      const hadFocus = old?.node === document.activeElement || old?.node.contains(document.activeElement);
      if (old) old.node.replaceWith(node);
      else list.append(node);
      if (hadFocus) /** @type {SVGElement} */ (node).focus({ preventScroll: true });
      slots.set(id, { node, key });
    }
    for (const [id, { node }] of slots) {
      if (wantedKeys.has(id) || node === document.activeElement) continue;
      node.remove();
      slots.delete(id);
    }
    if (!list.querySelector('[tabindex="0"]')) setAttr(/** @type {Element} */ (list.querySelector('[role=option]') ?? list), 'tabindex', 0);
    else setAttr(list, 'tabindex', null);
    setAttr(list, 'role', ids.length ? 'listbox' : 'img');
    setAttr(list, 'aria-label', ids.length ? t('rowLabel') : t('noStrikes'));
  }

  function paintLine() {
    const id = store.hovered ?? (element.contains(document.activeElement) || !store.isFollowing ? store.selected : null);
    const strike = store.strikes.get(id ?? -1);
    setText(hintText, t(store.bench?.series ? 'rowSeries' : 'rowHead'));
    setText(/** @type {Node} */ (fold.firstElementChild), t(store.isUnfolded ? 'fold' : 'unfold'));
    const key = strike ? `${strike.id} ${strike.revision} ${store.leadLabel(strike)} ${store.unit}` : '';
    if (values.dataset.key === key) return;
    values.dataset.key = key;
    values.replaceChildren(...(strike ? valueSpans(store, strike) : []));
  }

  scroll.addEventListener('scroll', () => {
    isAtEnd = store.isUnfolded ? scroll.scrollTop + scroll.clientHeight >= scroll.scrollHeight - 10
      : scroll.scrollLeft + scroll.clientWidth >= scroll.scrollWidth - layout().pitch * 2;
    if (isAtEnd) unseen = 0;
    store.touch('row');
  });
  list.addEventListener('pointerover', (event) => {
    store.hovered = idOf(event.target);
    store.touch('row');
  });
  list.addEventListener('pointerleave', () => {
    store.hovered = null;
    store.touch('row');
  });
  list.addEventListener('click', (event) => {
    const id = idOf(event.target);
    if (id) store.select(id);
  });
  list.addEventListener('focusin', (event) => {
    const id = idOf(event.target);
    if (id && id !== store.selected && /** @type {Element} */ (event.target).matches(':focus-visible')) store.select(id);
    store.touch('row');
  });
  store.addEventListener('focus-selected', () => {
    const node = slots.get(store.selected ?? -1)?.node;
    if (node) /** @type {SVGElement} */ (node).focus({ preventScroll: true });
  });
  element.addEventListener('focusout', () => store.touch('row'));
  new ResizeObserver(() => store.touch('row')).observe(scroll);
  addEventListener('resize', () => store.touch('row'));
  return store.watch(['row', 'strikes', 'selection', 'bench', 'prefs'], paint);
}

/** How many dotted slots follow. @param {import('../store.js').Store} store @param {number} count
 * @param {number} fit slots that the view takes */
function wantedSlots(store, count, fit) {
  const wanted = store.wanted();
  if (wanted !== null) return Math.min(WANTED_MAX, wanted);
  return count ? 0 : Math.max(1, Math.min(8, Math.floor(fit)));
}

/** @param {EventTarget|null} target */
function idOf(target) {
  const node = target instanceof Element ? target.closest('[data-id]') : null;
  return node ? Number(node.getAttribute('data-id')) : null;
}

/** @param {Element} axis @param {any} L */
function paintAxis(axis, L) {
  axis.replaceChildren();
  if (L.isUnfolded || L.unit * 16 === 0) {
    setAttr(axis, 'height', 0);
    return;
  }
  setAttr(axis, 'height', L.top + L.H + L.foot);
  for (const db of [0, -20, -40, -60]) {
    const y = L.top + L.H * (-db / 60);
    axis.append(svg('text', { x: 34 * L.unit, y: y + 4 * L.unit, 'text-anchor': 'end', text: dress(String(db)) }));
  }
}

/** @param {import('../store.js').Store} store @param {any} strike @param {{x: number, y: number}} at
 * @param {any} L @param {boolean} isSelected @param {number|null} medianT60 */
function slot(store, strike, at, L, isSelected, medianT60) {
  const u = L.unit;
  const base = L.top + L.H;
  const x = 4 * u;
  const isPinned = strike.id === store.pinned;
  const g = svg('g', {
    class: `slot${isSelected ? ' selected' : ''}`, role: 'option', 'data-id': strike.id, tabindex: isSelected ? 0 : -1,
    'aria-selected': String(isSelected), 'aria-label': optionName(store, strike), transform: `translate(${at.x} ${at.y})`,
  });
  g.append(svg('rect', { class: 'hit', x: 0, y: 0, width: L.pitch, height: base + L.foot }));
  if (!L.isUnfolded) {
    for (const db of [0, -20, -40]) g.append(svg('line', { class: 'grid-line', x1: 0, x2: L.pitch, y1: L.top + L.H * (-db / 60), y2: L.top + L.H * (-db / 60) }));
  }
  g.append(svg('line', { class: 'base', x1: 0, x2: L.pitch, y1: base, y2: base }));
  drawWedge(g, store, strike, { x, base, L });
  if (medianT60 && store.scale && !L.isUnfolded) {
    const end = x + (wedgeLength(medianT60, L.pitch, store.scale).length ?? 0);
    g.append(svg('line', { class: 'tick', x1: end, x2: end, y1: base, y2: base + 6 * u }));
  }
  drawFoot(g, strike, { x, base, L, isPinned });
  if (isSelected) g.append(svg('rect', { class: 'select-bar', x: 0, y: base + L.foot - 3, width: L.pitch, height: 3 }));
  if (isPinned) g.append(svg('rect', { class: 'pin-bar', x: 0, y: 0, width: L.pitch, height: 3 }));
  return g;
}

/** @param {Element} g @param {import('../store.js').Store} store @param {any} strike
 * @param {{x: number, base: number, L: any}} place */
function drawWedge(g, store, strike, { x, base, L }) {
  const height = wedgeHeight(strike.peak_dbfs, L.H);
  const mode = store.leadMode(strike);
  const { length, isCut } = wedgeLength(mode?.t60_s, L.pitch, store.scale ?? (mode ? { t60: mode.t60_s, count: 0 } : null));
  const verdict = strike.verdict;
  if (length === null || verdict === 'rejected') {
    if (length !== null) g.append(svg('path', { class: 'w-rejected', d: `M${x} ${base - height}L${x + length} ${base}` }));
    const cls = verdict === 'rejected' ? 'w-post' : `w-post-${verdict}`;
    g.append(svg('rect', { class: isAside(strike) ? `w-hollow hollow-${verdict}` : cls, x: x - 1, y: base - height, width: 3, height }));
  } else {
    const full = isCut && store.scale ? (mode.t60_s * 0.8 * L.pitch) / store.scale.t60 : length;
    g.append(svg('polygon', { class: isAside(strike) ? `w-hollow hollow-${verdict}` : `w-${verdict}`, points: wedgePoints(x, base, height, length, full) }));
    if (isCut) {
      const slope = height * (1 - (length - 12) / full);
      for (const dx of [18, 12]) g.append(svg('line', { class: 'w-slash', x1: x + length - dx, y1: base + 2, x2: x + length - dx + 7, y2: base - slope - 4 }));
    }
    if (strike.odd) g.append(svg('circle', { class: 'odd-ring', cx: x + length, cy: base, r: (L.isUnfolded ? 3.5 : 5.5) * L.unit }));
  }
  if (strike.peak_dbfs >= -0.05 || strike.reasons?.includes('clipped')) {
    g.append(svg('rect', { class: `w-cap-${verdict}`, x: x - 4, y: base - height - 4, width: 10 * L.unit, height: 2.5 }));
  }
}

/** @param {Element} g @param {any} strike @param {any} place */
function drawFoot(g, strike, { x, base, L, isPinned }) {
  const u = L.unit;
  const shape = isAside(strike) ? 'aside' : strike.verdict;
  if (!L.isUnfolded || strike.verdict !== 'good') {
    const s = (L.isUnfolded ? 7 : 9) * u;
    const y = base + (L.isUnfolded || !L.hasNumber ? 12 : 14) * u;
    g.append(svg('use', { class: `foot ${strike.verdict}`, href: `#mark-${shape}`, x: x - 1, y: y - s / 2, width: s, height: s }));
  }
  if (!L.hasNumber) return;
  g.append(svg('text', { class: 'number', x: x - 1, y: base + 33 * u, text: dress(String(strike.id)) }));
  const [word] = wordsOf(strike, isPinned);
  if (word) g.append(' ', svg('text', { class: isPinned ? 'pinned-word' : null, x: x + 12 * u, y: base + 18 * u, text: word }));
}

/** Words beside the verdict; the first is drawn. @param {any} strike @param {boolean} isPinned
 * @returns {string[]} */
function wordsOf(strike, isPinned) {
  return [isPinned ? t('pinned') : '', isAside(strike) ? t('aside') : '', strike.odd ? t('odd') : ''].filter(Boolean);
}

/** A strike that is still wanted. @param {number} number @param {{x: number, y: number}} at
 * @param {any} L @param {import('../store.js').Store} store @param {number[]} ids */
function futureSlot(number, at, L, store, ids) {
  const base = L.top + L.H;
  const peaks = ids.slice(-9).map((id) => store.strikes.get(id)?.peak_dbfs).filter(known).sort((a, b) => a - b);
  const height = wedgeHeight(peaks.length ? peaks[peaks.length >> 1] : -12, L.H);
  const t60 = store.medianT60();
  const length = (t60 && wedgeLength(t60, L.pitch, store.scale).length) || L.pitch * 0.8;
  const x = 4 * L.unit;
  const g = svg('g', { class: 'future', transform: `translate(${at.x} ${at.y})`, 'aria-hidden': 'true' },
    svg('line', { class: 'base', x1: 0, x2: L.pitch, y1: base, y2: base }),
    svg('polygon', { class: 'w-dotted', points: wedgePoints(x, base, height, length) }));
  if (L.hasNumber && ids.length) g.append(svg('text', { x: x - 1, y: base + 33 * L.unit, text: dress(String(number)) }));
  return g;
}

/** "Strike 7 odd, good. Q 1279.1 plus or minus 6.0. T60 3.190 seconds." */
/** @param {import('../store.js').Store} store @param {any} strike */
export function optionName(store, strike) {
  const mode = strike.verdict === 'rejected' ? null : store.leadMode(strike);
  const q = mode && pair(mode.q, mode.q_u);
  const t60 = mode && pair(mode.t60_s, mode.t60_u_s);
  const d = decimal();
  const figures = q ? t('speakQ', { value: dress(q.value, d), u: q.u ? dress(q.u, d) : t('notKnown') }) + (t60 ? t('speakT60', { value: dress(t60.value, d), unit: t('s') }) : '') : reasonWords(strike) || t('noFigures');
  const words = wordsOf(strike, strike.id === store.pinned); // after the number, as they are drawn
  return t('option', { id: dress(String(strike.id)), words: words.length ? ` ${words.join(', ')}` : '', verdict: t(strike.verdict), figures });
}

/** The one line above the row. @param {import('../store.js').Store} store @param {any} strike */
function valueSpans(store, strike) {
  const d = decimal();
  const mode = strike.verdict === 'rejected' ? null : store.leadMode(strike);
  const k = store.unit === 'ms' ? 1000 : 1;
  const item = (/** @type {string} */ name, /** @type {number} */ value, /** @type {number} */ u, unit = '') => {
    const p = pair(value, u);
    return el('span', {}, `${name} `, figure(parts(p, d)), p?.u ? ` ${PM}${NARROW}${dress(p.u, d)}${unit ? NARROW + unit : ''}` : '');
  };
  const words = [t(strike.verdict), strike.odd ? t('odd') : '', isAside(strike) ? t('aside') : ''].filter(Boolean).join(', ');
  return [
    el('span', {}, el('b', { text: dress(String(strike.id)) })), el('span', { text: clockText(strike.time) }),
    el('span', { class: strike.verdict }, el('b', { class: strike.verdict, text: words })),
    ...(mode ? [item('Q', mode.q, mode.q_u), item('f', mode.f_hz, mode.f_u_hz, 'Hz'), item('T60', mode.t60_s * k, mode.t60_u_s * k, store.unit)] : [el('span', { text: reasonWords(strike) })]),
    el('span', { text: `${level(strike.peak_dbfs, d)}${NARROW}dBFS` }),
    strike.odd ? el('span', { text: t('spreads') }) : null,
  ].filter((x) => x !== null);
}

