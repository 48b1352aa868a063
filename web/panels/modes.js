// @ts-check
/* All modes of the strike that is shown, the lead mode in bold; pressing one makes it lead. */

import { button, el, figure, setText } from '../dom.js';
import { dress, exponentOf, known, level, NARROW, pair, parts, powerText, significant } from '../format.js';
import { decimal, t } from '../lang.js';

/** Class of a mode's colour by its place in the list. @param {number} i */
export function modeClass(i) {
  return `m${Math.min(6, i + 1)}`;
}

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  const title = el('h2', { id: 'modes-title', text: t('modes') });
  const sub = el('span', { class: 'sub' });
  const toggle = button('', { key: 'd', onclick: () => store.setPref('figures', store.prefs.figures === 'decay' ? 't60' : 'decay') });
  const showRejected = button(t('showDimmed'), { onclick: () => { isShown = !isShown; paint(); } });
  const body = el('div');
  element.setAttribute('aria-labelledby', 'modes-title');
  element.append(el('div', { class: 'head' }, title, sub, showRejected, toggle), body);
  let isShown = false;
  let painted = '';
  let paintedAt = 0;
  let shownId = 0;

  function paint() {
    const { strike, isForming } = store.shown();
    if (isForming && performance.now() - paintedAt < 100) return;
    const modes = strike?.modes ?? [];
    const isRejected = strike?.verdict === 'rejected' && !isForming;
    if (strike && strike.id !== shownId) isShown = false;
    shownId = strike?.id ?? 0;
    const key = JSON.stringify([modes, isRejected, isShown, isForming, store.prefs.figures, store.unit, store.leadLabel(strike), strike?.tones]);
    if (key === painted) return;
    painted = key;
    paintedAt = performance.now();
    setText(/** @type {Node} */ (toggle.firstElementChild), t(store.prefs.figures === 'decay' ? 't60Again' : 'decayRate'));
    setText(sub, subText(strike));
    showRejected.hidden = !isRejected || !modes.length || isShown;
    const isListed = modes.length && (!isRejected || isShown);
    const focused = element.contains(document.activeElement) ? /** @type {HTMLElement} */ (document.activeElement).dataset.label : null;
    body.replaceChildren(isListed ? table(store, strike, isForming, isRejected) : el('p', { class: 'sub', text: strike && !isForming && !isRejected ? t('noModes') : '' }));
    body.className = '';
    for (const less of ['no-level', 'no-level no-t60']) { // gives up level, then T60, where it is too wide
      if (body.scrollWidth <= element.clientWidth) break;
      body.className = less;
    }
    if (focused) /** @type {HTMLElement|null} */ (body.querySelector(`[data-label="${CSS.escape(focused)}"]`))?.focus();
  }
  new ResizeObserver(() => {
    painted = '';
    store.touch('prefs');
  }).observe(element);
  return store.watch(['strikes', 'forming', 'selection', 'prefs'], paint);
}

/** @param {any} strike */
function subText(strike) {
  if (!strike) return '';
  const tones = (strike.tones ?? []).slice(0, 3).map((/** @type {any} */ tone) => significant(tone.f_hz, 3, decimal()) + NARROW + 'Hz');
  return [t('read', { count: strike.modes?.length ?? 0 }), tones.length ? t(strike.tones[0].f_hz < 1000 ? 'tonesLeft' : 'steadyLeft', { list: tones.join(', ') }) : ''].filter(Boolean).join('; ');
}

/** @param {import('../store.js').Store} store @param {any} strike @param {boolean} isForming
 * @param {boolean} isRejected */
function table(store, strike, isForming, isRejected) {
  const isDecay = store.prefs.figures === 'decay';
  const digits = isForming ? 1 : 2;
  const k = store.unit === 'ms' ? 1000 : 1;
  const head = (/** @type {string} */ text, cls = '') => el('th', { scope: 'col', class: cls, text });
  const third = isDecay ? [head(t('decay') + ', 1/s', 'give-t60'), head('±', 'u give-t60'), head('ζ', 'give-level'), head('±', 'u give-level')]
    : [head(`T60, ${store.unit}`, 'give-t60'), head('±', 'u give-t60'), head(t('levelHead'), 'give-level')];
  const lead = store.leadLabel(strike);
  const rows = strike.modes.map((/** @type {any} */ mode, /** @type {number} */ i) => {
    const isLead = mode.label === lead;
    const name = el('button', { type: 'button', 'data-label': mode.label, 'aria-pressed': String(isLead), onclick: () => store.setLead(mode.label) }, el('span', { class: `swatch ${modeClass(i)}` }), mode.label);
    const cellsOf = (/** @type {number} */ value, /** @type {number} */ u, cls = '') => {
      const p = pair(value, u, digits);
      return [el('td', { class: cls }, figure(parts(p, decimal()))), el('td', { class: `u ${cls}`, text: p?.u ? dress(p.u, decimal()) : '' })];
    };
    const last = isDecay ? [...cellsOf(mode.decay_per_s, mode.decay_u_per_s, 'give-t60'), ...zetaCells(mode, digits)]
      : [...cellsOf(mode.t60_s * k, mode.t60_u_s * k, 'give-t60'), el('td', { class: 'give-level', text: level(mode.level_dbfs, decimal()) })];
    return el('tr', { class: isLead ? 'lead' : '' }, el('th', { scope: 'row' }, name), ...cellsOf(mode.f_hz, mode.f_u_hz), ...cellsOf(mode.q, mode.q_u), ...last);
  });
  return el('table', { class: `figures${isRejected ? ' dim' : ''}` }, el('caption', { class: 'unseen', text: isRejected ? t('dimmed') : t('modes') }),
    el('thead', {}, el('tr', {}, head(t('mode')), head('f, Hz'), head('±', 'u'), head('Q'), head('±', 'u'), ...third)), el('tbody', {}, ...rows));
}

/** @param {any} mode @param {number} digits */
function zetaCells(mode, digits) {
  if (!known(mode.zeta)) return [el('td', { class: 'give-level', text: '–' }), el('td', { class: 'u give-level' })];
  const power = exponentOf(mode.zeta);
  const k = 10 ** -power;
  const p = pair(mode.zeta * k, known(mode.zeta_u) ? mode.zeta_u * k : null, digits);
  return [el('td', { class: 'give-level' }, figure(parts(p, decimal())), powerText(power)), el('td', { class: 'u give-level', text: p?.u ? dress(p.u, decimal()) : '' })];
}
