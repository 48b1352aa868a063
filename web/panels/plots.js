// @ts-check
/* The plots of the selected strike: decay with its residual, spectrum around the lead mode or wide,
 * trace. The bench does the physics; this fetches, draws, zooms, and shows the numbers as a table. */

import { get } from '../api.js';
import { button, el, setAttr, setText } from '../dom.js';
import { level, significant } from '../format.js';
import { decimal, t } from '../lang.js';
import { forgetColours, loadCurves, makeCurve } from '../plot/curve.js';
import { compareSpec, decaySpec, nearSpec, tableOf, traceSpec, valueText, wideSpec } from '../plot/specs.js';

const FETCH_EVERY_MS = 700; // while strikes come quickly
const TABLE_ROWS = 60;
const KEPT_PLOTS = 12;

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  element.setAttribute('aria-label', t('plots'));
  const decay = figureOf('decay', t('decayHead'), 14);
  const spectrum = figureOf('spectrum', t('spectrumHead'), 16);
  const trace = figureOf('trace', t('traceHead'), 16);
  const all = [decay, spectrum, trace];
  const swap = button(t('wideSpectrum'), { onclick: () => { isWideSpectrum = !isWideSpectrum; draw(); } });
  spectrum.acts.before(swap);
  element.append(...all.map((f) => f.node));
  let isWideSpectrum = false;
  /** @type {any} */
  let uPlot;
  /** @type {Map<number, any>} */
  const plots = new Map();
  let fetchedAt = -Infinity;
  let timer = 0;
  let wantedId = 0;
  let trouble = '';
  let drawn = '';
  /** @type {ReturnType<typeof figureOf>|null} */
  let focused = null;

  /** @param {string} name @param {string} title @param {number} rightPad */
  function figureOf(name, title, rightPad) {
    const sub = el('span', { class: 'sub' });
    const caption = el('figcaption');
    const main = el('div', { class: 'curve main', tabindex: 0, role: 'group', 'aria-label': `${title}. ${t('plotKeys')}`, 'data-arrows': '' });
    const residual = name === 'decay' ? el('div', { class: 'curve residual', 'aria-hidden': 'true' }) : null;
    const note = el('p', { class: 'note' });
    const wrap = el('div', { class: 'table-wrap', tabindex: 0, role: 'region', 'aria-label': `${title}, ${t('table')}` });
    const tableButton = button(t('table'), { key: '', onclick: () => toggleTable(self) });
    const save = (/** @type {string} */ kind) => button(kind, { onclick: () => saveAs(self, kind), label: `${t('save')} ${title} ${kind}` });
    const acts = el('span', { class: 'plot-acts' }, tableButton, save('PNG'), save('SVG'), save('CSV'));
    const node = el('figure', { class: `${name}-figure` }, el('div', { class: 'head' }, el('h2', { text: title }), sub, acts), note, main, residual, wrap, caption);
    wrap.hidden = true;
    const self = { name, title, node, sub, caption, main, residual, note, wrap, acts, tableButton, rightPad, isTable: false, /** @type {any} */ curve: null, /** @type {any} */ rest: null, /** @type {any} */ spec: null, cursor: /** @type {number|null} */ (null) };
    node.addEventListener('focusin', () => { focused = self; });
    main.addEventListener('pointerenter', () => { focused = self; });
    main.addEventListener('keydown', (event) => keyOn(self, /** @type {KeyboardEvent} */ (event)));
    main.addEventListener('blur', () => self.curve?.leave());
    return self;
  }

  /** @param {ReturnType<typeof figureOf>} f @param {KeyboardEvent} event */
  function keyOn(f, event) {
    const way = event.key === 'ArrowLeft' ? -1 : event.key === 'ArrowRight' ? 1 : 0;
    if (!way || event.altKey || event.ctrlKey || event.metaKey) return;
    event.preventDefault();
    if (event.shiftKey) f.curve?.pan(way * 0.2);
    else f.curve?.step(way * 0.01);
  }

  /** @param {ReturnType<typeof figureOf>} f */
  function toggleTable(f) {
    f.isTable = !f.isTable;
    drawn = '';
    draw();
  }

  /** @param {ReturnType<typeof figureOf>} f @param {string} kind */
  async function saveAs(f, kind) {
    const { saveCsv, savePng, saveSvg } = await import('../plot/save.js');
    if (!f.spec) return;
    const name = `wane-${f.name}-${store.selected ?? ''}`;
    const probe = el('span', { class: 'probe' });
    document.body.append(probe);
    const paint = (/** @type {string} */ colour) => {
      probe.style.color = `var(--${colour})`;
      return getComputedStyle(probe).color;
    };
    const spec = { ...f.spec, xRange: f.curve?.view() ?? f.spec.xRange };
    if (kind === 'PNG' && f.curve?.canvas()) savePng(f.curve.canvas(), paint('paper'), name);
    if (kind === 'SVG') saveSvg(spec, name, paint, `${f.title}, ${t('strikeNo', { id: store.selected ?? '' })}: ${f.spec.caption}`);
    if (kind === 'CSV') saveCsv(spec, name);
    probe.remove();
  }

  /** Numbers of the selected strike (and of the pinned one), fetched no more often than they can be
   * looked at. */
  function want() {
    const strike = store.selectedStrike();
    if (document.body.classList.contains('wide')) return;
    const ids = [strike?.id, store.pinned].filter((id) => id && !plots.has(id));
    wantedId = strike?.id ?? 0;
    if (ids.length) {
      clearTimeout(timer);
      timer = window.setTimeout(() => fetchPlots(ids), Math.max(0, FETCH_EVERY_MS - (performance.now() - fetchedAt)));
    }
    draw();
  }

  /** @param {number[]} ids */
  async function fetchPlots(ids) {
    fetchedAt = performance.now();
    for (const id of ids) {
      try {
        const plot = await get(`/strikes/${id}/plot?width=${plotWidth()}`);
        plots.set(id, plot);
        if (plots.size > KEPT_PLOTS) plots.delete(plots.keys().next().value ?? 0);
        trouble = '';
      } catch (cause) {
        const status = /** @type {any} */ (cause).status;
        if (id === wantedId) trouble = status === 404 || status === 409 || status === 410 ? t('noSamples') : t('plotTrouble', { text: /** @type {Error} */ (cause).message });
        plots.delete(id);
      }
    }
    drawn = '';
    draw();
  }

  const plotWidth = () => Math.min(4000, Math.max(200, Math.round((trace.main.clientWidth || 400) * (devicePixelRatio || 1))));

  function draw() {
    const strike = store.selectedStrike();
    const plot = strike ? plots.get(strike.id) : null;
    const pinned = store.pinned && store.pinned !== strike?.id ? store.strikes.get(store.pinned) : null;
    const other = pinned ? plots.get(pinned.id) : null;
    const lead = strike ? store.leadLabel(strike) : null;
    const key = JSON.stringify([strike?.id, strike?.revision, Boolean(plot), other ? pinned.id : 0, lead, isWideSpectrum, uPlot === undefined ? 0 : uPlot ? 1 : 2, all.map((f) => f.isTable), trouble, store.prefs.theme]);
    if (key === drawn) return;
    drawn = key;
    setText(/** @type {Node} */ (swap.firstElementChild), isWideSpectrum ? t('aroundLead') : t('wideSpectrum'));
    if (!strike || !plot) {
      const text = strike ? trouble || t('drawing') : t('noPlot');
      if (strike && !trouble && decay.curve) return; // the last curves stand until the new ones are here
      for (const f of all) showNote(f, text);
      return;
    }
    const d = decimal();
    const hasFit = strike.verdict !== 'rejected' || strike.modes?.length;
    show(decay, other ? compareSpec(plot, other, strike, pinned, lead, t, d) : hasFit ? decaySpec(plot, strike, lead, t, d) : null);
    const near = nearSpec(plot, strike, t, d);
    swap.hidden = !near;
    const later = (/** @type {() => void} */ paint) => setTimeout(() => { if (drawn === key) paint(); }); // a task each: none is long
    later(() => show(spectrum, (isWideSpectrum ? null : near) ?? wideSpec(plot, strike, t, d)));
    later(() => show(trace, traceSpec(plot, strike, t, d, store.leadMode(strike))));
  }

  /** @param {ReturnType<typeof figureOf>} f @param {string} text */
  function showNote(f, text) {
    setText(f.note, text);
    f.note.hidden = false;
    f.main.hidden = true;
    if (f.residual) f.residual.hidden = true;
    f.wrap.hidden = true;
    setText(f.caption, '');
    setText(f.sub, '');
    f.curve?.destroy();
    f.rest?.destroy();
    f.curve = f.rest = null;
  }

  /** @param {ReturnType<typeof figureOf>} f @param {import('../plot/specs.js').Spec|null} spec */
  function show(f, spec) {
    f.spec = spec;
    if (!spec) return showNote(f, t('noModes'));
    setText(f.sub, spec.sub);
    setText(f.caption, spec.caption);
    f.caption.title = spec.caption;
    setText(/** @type {Node} */ (f.tableButton.firstElementChild), f.isTable ? t('curve') : t('table'));
    const isDrawn = Boolean(uPlot) && !f.isTable;
    f.main.hidden = !isDrawn;
    if (f.residual) f.residual.hidden = !isDrawn || !spec.residual;
    f.note.hidden = isDrawn || f.isTable;
    setText(f.note, uPlot === null ? t('noCurves') : t('drawing'));
    f.wrap.hidden = !f.isTable;
    if (f.isTable) f.wrap.replaceChildren(tableFor(spec));
    if (!isDrawn) return;
    f.curve ??= makeCurve(uPlot, f.main, {
      decimal: decimal(), rightPad: f.rightPad + (f.name === 'decay' ? 12 : 0), onZoom: (range) => zoomed(f, range),
      onCursor: (x) => { f.cursor = x; setText(f.caption, x === null ? f.spec.caption : valueText(f.spec, x, decimal(), t)); },
    });
    f.curve.set(spec);
    setAttr(f.main, 'aria-label', `${f.title}. ${spec.caption} ${t('plotKeys')}`);
    if (f.residual && spec.residual) {
      f.rest ??= makeCurve(uPlot, f.residual, { decimal: decimal(), rightPad: f.rightPad + 12 });
      f.rest.set({ ...spec.residual, view: spec.view });
    }
  }

  let zoomTimer = 0;
  /** The trace is thinned by the bench: nearer, it is fetched anew. The residual follows the decay.
   * @param {ReturnType<typeof figureOf>} f @param {[number, number]} range */
  function zoomed(f, range) {
    if (f === decay && f.rest && f.spec?.residual) f.rest.set({ ...f.spec.residual, xRange: range, view: undefined });
    if (f !== trace) return;
    const id = store.selected;
    clearTimeout(zoomTimer);
    zoomTimer = window.setTimeout(async () => {
      try {
        const whole = plots.get(id ?? 0);
        const isWhole = whole && range[0] <= whole.from_s && range[1] >= whole.to_s;
        const plot = isWhole ? whole : await get(`/strikes/${id}/plot?width=${plotWidth()}&from=${range[0].toFixed(7)}&to=${range[1].toFixed(7)}`);
        const strike = store.selectedStrike();
        if (strike?.id !== id || !whole || !f.curve) return;
        const spec = traceSpec({ ...plot, window_s: whole.window_s }, strike, t, decimal());
        f.spec = { ...spec, view: undefined, xRange: /** @type {[number, number]} */ ([whole.from_s, whole.to_s]) };
        f.curve.set(f.spec, true);
      } catch { /* the thinned trace stays */ }
    }, 150);
  }

  store.addEventListener('toggle-table', () => toggleTable(focused ?? decay));
  store.addEventListener('zoom', (event) => (focused ?? decay).curve?.zoom(/** @type {CustomEvent} */ (event).detail));
  store.addEventListener('changed', (event) => plots.delete(/** @type {CustomEvent} */ (event).detail.id));
  matchMedia('(prefers-color-scheme: dark)').addEventListener('change', () => { forgetColours(); drawn = ''; draw(); });
  let theme = store.prefs.theme;
  store.watch(['prefs'], () => {
    if (theme !== store.prefs.theme) forgetColours();
    theme = store.prefs.theme;
  });
  loadCurves().then((found) => {
    uPlot = found;
    drawn = '';
    draw();
  });
  return store.watch(['selection', 'strikes', 'prefs'], want);
}

/** @param {import('../plot/specs.js').Spec} spec */
function tableFor(spec) {
  const { head, rows, step } = tableOf(spec, TABLE_ROWS);
  const d = decimal();
  return el('table', { class: 'figures' }, el('caption', { class: 'sub', text: step > 1 ? t('thinned', { n: step }) : t('points', { count: rows.length }) }),
    el('thead', {}, el('tr', {}, ...head.map((h) => el('th', { scope: 'col', text: h })))),
    el('tbody', {}, ...rows.map(([x, ...ys]) => el('tr', {}, el('th', { scope: 'row', text: significant(x, spec.xDigits, d) }), ...ys.map((y) => el('td', { text: level(y, d, spec.yDigits) }))))));
}
