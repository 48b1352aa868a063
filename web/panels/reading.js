// @ts-check
/* The reading: Q, f and T60 in figures for two metres. Digits wane where the uncertainty begins;
 * what is not known yet is an empty cell of its final width, so that nothing moves when it settles. */

import { el, setAttr, setText } from '../dom.js';
import { cells, dress, exponentOf, known, NARROW, pair, pairText, placesOf, PM, powerText, widerPlaces } from '../format.js';
import { decimal, t } from '../lang.js';
import { figuresOf, isAside } from '../store.js';
import { ageText, benchState, clockText } from '../sentences.js';
import { figureEm, glyphWidths } from '../plot/fit-size.js';

const FORMING_PAINT_MS = 100;
const TRACKING = -0.045;
const LEAST_SHARE = 0.111; // of the window's height: digits are 0.727 em high, and 8 % is promised
const TAIL_SCALE = 0.5;
const SAME_ONSET_S = 0.03; // a forming reading's onset is refined a little by the final one
const U_LENGTH = 3; // characters of a usual u, so that the size does not follow it

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  const part = el('h2', { class: 'isolate' });
  const sub = el('span', { class: 'sub' });
  const small = el('div', { class: 'small' });
  const q = figureNodes('figure-q');
  const f = figureNodes('figure one');
  const third = figureNodes('figure two');
  element.append(el('div', { class: 'title' }, part, ' ', sub), q.node, small);
  small.append(f.node, third.node);
  setText(q.label, t('q'));
  setText(f.label, t('f'));
  const heading = /** @type {HTMLElement} */ (document.getElementById('heading'));
  const sizes = new Map();
  const smallScales = new Map();
  let smallKey = '';
  let paintedAt = 0;
  let late = 0;
  /** Places of the strike at hand, so that its cells stand still. */
  let held = { series: /** @type {number|undefined} */ (undefined), onset: -1, places: /** @type {Record<string, import('../format.js').Places>} */ ({}) };

  function paint() {
    const { strike, isForming } = store.shown();
    const wait = FORMING_PAINT_MS - (performance.now() - paintedAt);
    clearTimeout(late);
    if (isForming && wait > 0) {
      late = window.setTimeout(() => store.touch('forming'), wait);
      return;
    }
    paintedAt = performance.now();
    paintTitle(strike, isForming);
    const mode = strike && strike.verdict !== 'rejected' || isForming ? store.leadMode(strike) : null;
    const at = { series: store.bench?.series?.id, onset: strike?.onset_s ?? -1 };
    const isSame = held.series === at.series && Math.abs(held.onset - at.onset) < SAME_ONSET_S;
    if (!isSame) held = { ...at, places: {} };
    const isDecay = store.prefs.figures === 'decay';
    setText(third.label, t(isDecay ? 'decay' : 't60'));
    const units = { q: '', f: 'Hz', t60: store.unit, decay: '/s' };
    const figures = Object.fromEntries((mode ? figuresOf(mode, store.unit) : []).map(([name, value, u]) => [name, pair(value, u, isForming ? 1 : 2)]));
    paintFigure(q, 'q', figures.q, units.q, strike, isForming);
    paintFigure(f, 'f', figures.f, units.f, strike, isForming);
    const name = isDecay ? 'decay' : 't60';
    paintFigure(third, name, figures[name], units[name], strike, isForming);
    fit(figures.q ?? null);
    fitSmall();
  }

  /** @param {any} strike @param {boolean} isForming */
  function paintTitle(strike, isForming) {
    const label = strike ? store.leadLabel(strike) : null;
    const state = benchState(store);
    const isOld = strike?.time && !isForming && ['lost', 'full', 'tabs', 'input-lost', 'log-full', 'no-input'].includes(state.key);
    setText(part, strike?.part || store.bench?.series?.part || strike?.input_part || t('reading'));
    const id = strike?.id ? t('strikeNo', { id: dress(String(strike.id)) }) : '';
    setText(sub, [
      label && strike.modes?.length > 1 ? t('modeOf', { label }) : '', strike?.specimen ?? (isForming ? store.bench?.series?.specimen : ''), id,
      strike?.time ? clockText(strike.time) : '', strike && isAside(strike) ? t('aside') : '',
      isOld ? t('ago', { span: ageText((Date.now() - Date.parse(strike.time)) / 1000) }) : '',
    ].filter(Boolean).join(' · '));
    setText(heading, id && !isForming ? t('heading', { id: strike.id, part: strike.part || t('reading') }) : t('headingNone'));
  }

  /** @param {ReturnType<typeof figureNodes>} nodes @param {string} name
   * @param {ReturnType<typeof pair>|undefined} figure @param {string} unit @param {any} strike
   * @param {boolean} isForming */
  function paintFigure(nodes, name, figure, unit, strike, isForming) {
    const isUnread = !strike || (isForming && !figure);
    if (figure && isForming) {
      const own = placesOf(figure.value);
      held.places[name] = /** @type {any} */ (widerPlaces(held.places[name] ?? expected(name, own), own));
    }
    const places = held.places[name] ?? null;
    const list = isUnread ? emptyCells(store.widest.get(name) ?? null) : cells(figure ?? null, { forming: isForming, places, decimal: decimal() });
    paintCells(nodes.digits, list, nodes === q && q.node.classList.contains('has-tail'));
    nodes.digits.classList.toggle('unsure', Boolean(figure && figure.u === null));
    const pm = figure?.u ? `${PM}${NARROW}${dress(figure.u, decimal())}` : '';
    setText(nodes.pm, pm + (unit && figure ? NARROW + unit : ''));
    const spoken = figure?.u ? `${nodes.label.textContent} ${dress(figure.value, decimal())} ${t('plusMinus')} ${dress(figure.u, decimal())} ${unit}`
      : `${nodes.label.textContent} ${figure ? dress(figure.value, decimal()) : t('notKnown')}`;
    setAttr(nodes.digits, 'aria-label', spoken.trim());
    setAttr(nodes.node, 'aria-hidden', isForming || isUnread ? 'true' : null);
  }

  /** Places that the final figure will likely have: the series', else of a strike like this one.
   * @param {string} name @param {import('../format.js').Places} own */
  function expected(name, own) {
    const wide = store.widest.get(name) ?? null;
    if (store.bench?.series || !wide) return wide ?? { int: own.int, dec: own.dec + 1 };
    return { int: own.int, dec: wide.int === own.int ? wide.dec : own.dec + 1 };
  }

  /** f and T60 shrink together until they fit; like Q, only ever shrinking. */
  function fitSmall() {
    const key = `${store.bench?.series?.id} ${store.isWide} ${innerWidth} ${innerHeight} ${store.prefs.figures}`;
    const text = `${key} ${small.textContent?.length} ${small.clientWidth}`;
    if (text === smallKey) return;
    smallKey = text;
    if (!smallScales.has(key)) small.style.removeProperty('--small-scale');
    const w = small.clientWidth;
    const ratio = store.isWide && innerWidth > innerHeight ? Math.min((0.565 * w) / f.digits.offsetWidth, (0.4 * w) / third.digits.offsetWidth)
      : (w - 1) / Math.max(...[f, third].flatMap((n) => [n.pm, n.digits]).map((n) => n.offsetLeft + n.offsetWidth - small.offsetLeft));
    const scale = Math.min(1, smallScales.get(key) ?? 1) * Math.min(1, ratio);
    const most = innerWidth * (innerWidth >= 1100 ? 0.42 : 0.6);
    if (!store.isWide && innerWidth >= 820 && scale < 0.92 && w / scale < most) { // the modes table gives up a column first
      document.documentElement.style.setProperty('--reading-w', `${Math.ceil(w / scale) + 2}px`);
      smallKey = '';
      return;
    }
    smallScales.set(key, Math.max(0.5, scale));
    small.style.setProperty('--small-scale', String(Math.max(0.5, scale)));
  }

  /** The size of Q is set once per series and window: it only ever shrinks.
   * @param {ReturnType<typeof pair>} figure */
  function fit(figure) {
    const family = getComputedStyle(document.documentElement).fontFamily;
    const glyph = glyphWidths(family, 560, decimal());
    const seen = widerPlaces(store.widest.get('q') ?? null, figure ? placesOf(figure.value) : null);
    const places = widerPlaces(seen, held.places.q ?? null) ?? { int: 4, dec: 1 };
    const height = innerHeight;
    const isWide = store.isWide;
    const isUpright = isWide && innerWidth <= innerHeight;
    const target = height * (isUpright ? 0.2 : isWide ? 0.311 : innerWidth < 600 ? 0.125 : 0.118);
    const least = isUpright ? 0 : height * (isWide ? 0.305 : LEAST_SHARE);
    const key = `${store.bench?.series?.id} ${isWide} ${innerWidth} ${height}`;
    const room = roomFor(isWide);
    const one = glyph.digit + TRACKING;
    const em = figureEm(places, glyph, TRACKING);
    let size = Math.min(target, sizes.get(key)?.size ?? target, room.width / (em + one));
    let hasTail = false;
    if (size < least) {
      const isAtEdge = room.most / em >= least; // no spare glyph, more room, the label line below
      hasTail = !isAtEdge;
      const needed = isAtEdge ? em : figureEm(places, glyph, TRACKING, TAIL_SCALE);
      size = Math.min(target, room.most / needed, Math.max(least, room.width / needed));
      size = Math.min(size, sizes.get(key)?.size ?? size);
      const reading = Math.ceil(needed * size) + 4;
      if (room.canWiden && reading > room.width) document.documentElement.style.setProperty('--reading-w', `${reading}px`);
    }
    sizes.set(key, { size });
    q.node.classList.toggle('has-tail', hasTail);
    q.node.classList.toggle('label-below', isWide && em * size > room.width);
    document.documentElement.style.setProperty('--q-size', `${Math.floor(size)}px`);
  }

  /** @param {boolean} isWide */
  function roomFor(isWide) {
    if (isWide) {
      const most = innerWidth * 0.934;
      const small = Math.min(innerHeight * 0.093, innerWidth * 0.07);
      const beside = small * (1 + 0.62 * (U_LENGTH + 2)) + innerWidth * 0.038;
      const isUpright = innerWidth <= innerHeight;
      return { width: isUpright ? most : most - beside, most, canWiden: false };
    }
    const width = element.clientWidth;
    const canWiden = innerWidth >= 820;
    const share = innerWidth >= 1100 ? innerWidth * 0.42 : innerWidth * 0.6;
    return { width, most: canWiden ? Math.max(width, share) : width, canWiden };
  }

  addEventListener('resize', () => {
    document.documentElement.style.removeProperty('--reading-w');
    store.touch('forming');
  });
  return store.watch(['strikes', 'forming', 'selection', 'prefs', 'bench', 'connection', 'clock'], paint);
}

/** @param {string} kind */
function figureNodes(kind) {
  const label = el('span', { class: 'label', 'aria-hidden': 'true' });
  const digits = el('span', { class: 'digits', role: 'img', 'aria-label': '–' });
  const pm = el('span', { class: 'pm', 'aria-hidden': 'true' });
  return { node: el('div', { class: kind }, label, digits, pm), label, digits, pm };
}

/** @param {import('../format.js').Places|null} places @returns {import('../format.js').Cell[]} */
function emptyCells(places) {
  return Array.from({ length: places ? places.int : 4 }, () => ({ ch: '0', kind: 'empty' }));
}

/** Repaints only the cells that changed. @param {HTMLElement} node
 * @param {import('../format.js').Cell[]} list @param {boolean} hasTail decimals are drawn small */
function paintCells(node, list, hasTail) {
  while (node.childElementCount > list.length) node.lastElementChild?.remove();
  let isTail = false;
  list.forEach((cell, i) => {
    let span = node.children[i];
    if (!span) node.append((span = el('span')));
    const kind = `cell ${cell.kind}${isTail && hasTail ? ' tail' : ''}`;
    if (span.className !== kind) span.className = kind;
    setText(span, cell.ch);
    if (cell.kind === 'point' || cell.ch === decimal()) isTail = true;
  });
}

/** zeta with its u in one power of ten: "3.466426 ± 0.000023 × 10⁻⁴". @param {any} mode */
export function zetaText(mode) {
  if (!known(mode?.zeta)) return '–';
  const power = exponentOf(mode.zeta);
  const k = 10 ** -power;
  return pairText(pair(mode.zeta * k, known(mode.zeta_u) ? mode.zeta_u * k : null), '', decimal()) + powerText(power);
}
