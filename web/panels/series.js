// @ts-check
/* The series: how many more strikes, statistics by mode, limits, what was odd, and comparison with a
 * pinned strike or another series. All figures are the bench's. */

import { get, send } from '../api.js';
import { button, el, mark, setText, svg } from '../dom.js';
import { count, dress, known, NARROW, pair, pairAny, pairText, significant } from '../format.js';
import { decimal, entry, t } from '../lang.js';
import { percentText } from '../sentences.js';
import { difference } from '../plot/specs.js';

const QUANTITIES = { f_hz: 'f', q: 'q', zeta: 'zeta', decay_per_s: 'decay', t60_s: 't60' };

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  element.setAttribute('aria-labelledby', 'series-title');
  const title = el('h2', { id: 'series-title', text: t('series') });
  const sub = el('span', { class: 'sub name' });
  const body = el('div');
  element.append(el('div', { class: 'head' }, title, sub), body);
  let painted = '';
  let isOpening = false;
  let isFetching = 0;
  /** @type {any} */
  let other = null;
  /** @type {any[]} */
  let sheets = [];

  function paint() {
    const series = store.bench?.series ?? null;
    if (series && !series.statistics && isFetching !== series.id) fetchStatistics(series.id);
    const strike = store.selectedStrike();
    const pinned = store.pinned ? store.strikes.get(store.pinned) : null;
    const key = JSON.stringify([series, strike?.id, strike?.revision, pinned?.id, pinned?.revision, store.leadLabel(strike), isOpening, other?.id, sheets.length, store.bench?.can_change]);
    if (key === painted || (isOpening && element.contains(document.activeElement) && painted)) return;
    painted = key;
    const s = series?.statistics;
    setText(title, series ? `${t('series')} ${series.id}` : t('series'));
    setText(sub, series ? [series.name, series.part, series.specimen, s ? t('seriesSub', { n: s.strikes, counted: s.counted }) : ''].filter(Boolean).join(' · ') : t('noSeries'));
    const focus = element.contains(document.activeElement) ? /** @type {HTMLElement} */ (document.activeElement).dataset.act : null;
    const blocks = [];
    if (pinned && strike && pinned.id !== strike.id) blocks.push(compareBlock(store, strike, pinned));
    if (s) blocks.push(...statisticsBlocks(series, s));
    if (other?.statistics && s) blocks.push(againstBlock(s, other));
    if (store.bench?.can_change !== false) blocks.push(controls(series));
    if (!series) blocks.push(el('p', { text: t('seriesHelp') }), el('p', { text: t('pinHelp') }));
    body.replaceChildren(...blocks);
    if (focus) /** @type {HTMLElement|null} */ (body.querySelector(`[data-act="${focus}"]`))?.focus();
  }

  /** @param {number} id */
  async function fetchStatistics(id) {
    isFetching = id;
    try {
      const series = await get(`/series/${id}`);
      if (store.bench?.series?.id === id && series.statistics) store.setBench({ ...store.bench, series });
    } catch { /* it comes with the next strike */ }
  }

  /** @param {any} series */
  function controls(series) {
    const box = el('div', { class: 'block' });
    if (series) {
      box.append(el('div', { class: 'buttons' },
        act('close', t('closeSeries'), async () => { await change('PATCH', `/series/${series.id}`, { close: true }); }),
        series.specimen ? act('next', t('nextSpecimen'), async () => { await change('PATCH', `/series/${series.id}`, { next_specimen: true }); }) : '',
        act('another', t('compareWith'), chooseOther),
        el('a', { href: `/api/v1/series/${series.id}/report`, target: '_blank', text: t('report') })));
      return box;
    }
    if (!isOpening) {
      box.append(act('open', t('openSeries'), openForm));
      return box;
    }
    const part = /** @type {HTMLInputElement} */ (el('input', { type: 'text', name: 'part', list: 'part-names', maxlength: 200, 'data-act': 'part' }));
    const specimen = /** @type {HTMLInputElement} */ (el('input', { type: 'text', name: 'specimen', maxlength: 200 }));
    const form = el('form', {}, el('label', {}, t('part'), part), el('label', {}, t('specimen'), specimen), el('datalist', { id: 'part-names' }, ...sheets.map((p) => el('option', { value: p.name }))), el('button', { type: 'submit', class: 'framed', text: t('open') }));
    form.addEventListener('submit', async (event) => {
      event.preventDefault();
      const wanted = Object.fromEntries([['part', part.value.trim()], ['specimen', specimen.value.trim()]].filter(([, v]) => v));
      const hasOpened = await change('POST', '/series', wanted);
      if (!hasOpened) return;
      isOpening = false;
      /** @type {HTMLElement} */ (document.activeElement)?.blur();
      store.touch('bench');
    });
    box.append(form);
    return box;
  }

  async function openForm() {
    isOpening = true;
    try {
      const answer = await get('/parts');
      sheets = Array.isArray(answer) ? answer : answer.parts ?? [];
    } catch {
      sheets = [];
    }
    painted = '';
    paint();
    /** @type {HTMLElement|null} */ (body.querySelector('[data-act="part"]'))?.focus();
  }

  /** The series before this one that has statistics of its own. */
  async function chooseOther() {
    try {
      const list = (await get('/series')).series ?? [];
      const before = list.find((/** @type {any} */ s) => s.id !== store.bench?.series?.id && (!store.bench?.series?.part || s.part === store.bench.series.part));
      other = before ? await get(`/series/${before.id}`) : null;
    } catch {
      other = null;
    }
    store.touch('bench');
  }

  /** @param {'POST'|'PATCH'} method @param {string} path @param {object} wanted */
  async function change(method, path, wanted) {
    try {
      const series = await send(method, path, wanted);
      store.setBench({ ...store.bench, series: series?.closed ? null : series });
      return true;
    } catch (cause) {
      store.announce('refused', cause instanceof Error ? cause.message : String(cause));
      setText(sub, t('changeRefused', { text: cause instanceof Error ? cause.message : String(cause) }));
      return false;
    }
  }

  /** @param {string} name @param {string} text @param {() => void} onclick */
  const act = (name, text, onclick) => el('button', { type: 'button', class: 'framed', 'data-act': name, text, onclick });

  store.addEventListener('series', (event) => {
    const series = /** @type {CustomEvent} */ (event).detail;
    if (series.id === store.bench?.series?.id) store.touch('bench');
  });
  return store.watch(['bench', 'selection', 'strikes'], paint);
}

/** @param {any} series @param {any} s its statistics */
function statisticsBlocks(series, s) {
  const blocks = [stopBlock(s), statisticsTable(s)];
  const lead = s.modes[0]?.q;
  const odd = s.odd ?? [];
  const sentences = [
    odd.length === 1 ? t('oddSentence', { list: dress(String(odd[0])) }) : odd.length ? t('oddSentences', { list: odd.map((/** @type {number} */ id) => dress(String(id))).join(', ') }) : '',
    odd.length && known(lead?.sd_without_odd) && known(lead?.sd) ? t('oddWithout', { from: significant(lead.sd, 2, decimal()), to: significant(lead.sd_without_odd, 2, decimal()) }) : '',
    lead?.limited_by === 'tapping' ? t('tappingLimits') : lead?.limited_by === 'noise' ? t('noiseLimits') : '',
  ].filter(Boolean);
  if (sentences.length) blocks.push(el('p', { text: sentences.join(' ') }));
  if (s.limits?.length) blocks.push(limitsBlock(series, s.limits));
  return blocks;
}

/** The figure that is wanted most: which mode, which quantity. @param {any} s */
export function wantedMost(s) {
  let found = null;
  for (const mode of s.modes ?? []) {
    for (const [key, name] of Object.entries(QUANTITIES)) {
      const stat = mode[key];
      if (!known(stat?.wanted)) continue;
      const reached = known(stat.half_width) && known(stat.mean) && stat.mean !== 0 ? stat.half_width / Math.abs(stat.mean) : null;
      const entryOf = { name, label: mode.label, wanted: stat.wanted, reached, more: stat.more, isLead: mode === s.modes[0] };
      if (!found || (stat.more ?? -1) > (found.more ?? -1)) found = entryOf;
    }
  }
  return found;
}

/** @param {any} s */
function stopBlock(s) {
  const most = wantedMost(s);
  const words = (/** @type {string} */ name) => ({ f: 'f', q: 'Q', zeta: 'ζ', decay: 'α', t60: 'T60' })[name] ?? name;
  const what = most ? words(most.name) + (most.isLead ? '' : ` ${most.label}`) : null;
  const percent = most ? percentText(most.wanted) : null;
  const reached = most && known(most.reached) ? percentText(most.reached) : null;
  let figure = known(s.more) ? count(s.more) : '–';
  let line = t('moreStrikes', { what, percent });
  let small = [reached ? t('now', { percent: reached }) : '', s.odd?.length && known(s.more_without_odd) && s.more_without_odd < s.more ? t('withoutOdd', { count: s.more_without_odd === 0 ? t('noneMore') : s.more_without_odd, list: s.odd.join(', ') }) : ''].filter(Boolean).join('; ');
  if (s.counted < 2) {
    figure = '–';
    line = t('secondStarts');
    small = t('goodSoFar', { count: s.counted });
  } else if (!known(s.more)) {
    line = t('nothingWanted');
    small = t('nothingWantedHelp');
  } else if (s.more_is_over) {
    line = t('orMore');
    small = t('mend');
  } else if (s.more === 0) {
    line = t('enoughShort', { what: what ?? 'Q', percent: reached ?? '–' });
    small = t('willNotChange');
  }
  return el('div', { class: 'stop' }, el('span', { class: 'count', text: figure }), el('div', {}, el('p', { text: line }), el('p', { class: 'sub', text: small })));
}

/** Mean at the place of its standard deviation's second digit. @param {any} stat */
function meanTexts(stat) {
  const d = decimal();
  if (!known(stat?.mean)) return { mean: '–', sd: '–' };
  const p = known(stat.sd) && stat.sd > 0 ? pairAny(stat.mean, stat.sd) : pair(stat.mean, stat.within_u);
  return { mean: p ? dress(p.value, d) : '–', sd: known(stat.sd) && stat.sd > 0 && p?.u ? dress(p.u, d) : '–' };
}

/** @param {any} s */
function statisticsTable(s) {
  const d = decimal();
  const head = (/** @type {string} */ text, title = '') => el('th', { scope: 'col', text, title: title || null });
  const rows = s.modes.map((/** @type {any} */ mode, /** @type {number} */ i) => {
    const f = meanTexts(mode.f_hz);
    const q = meanTexts(mode.q);
    return el('tr', { class: i === 0 ? 'lead' : '' }, el('th', { scope: 'row', text: mode.label }), el('td', { text: f.mean }), el('td', { text: f.sd }), el('td', { text: q.mean }), el('td', { text: q.sd }), el('td', { text: known(mode.q?.ratio) ? significant(mode.q.ratio, 2, d) : '–' }), el('td', { class: 'give-n', text: String(mode.n) }));
  });
  return el('div', { class: 'table-wrap', tabindex: 0, role: 'region', 'aria-label': t('series') }, el('table', { class: 'figures' }, el('caption', { class: 'unseen', text: t('series') }),
    el('thead', {}, el('tr', {}, head(t('mode')), head(t('meanF')), head(t('spread'), t('spreadTitle')), head(t('meanQ')), head(t('spread'), t('spreadTitle')), head(t('ratio'), t('ratioTitle')), el('th', { scope: 'col', class: 'give-n', text: t('n') }))), el('tbody', {}, ...rows)));
}

/** @param {any} series @param {any[]} limits */
function limitsBlock(series, limits) {
  return el('div', { class: 'block' }, el('h3', { text: t('limits') }), ' ', el('span', { class: 'sub isolate', text: t('limitsSub', { name: series.part }) }),
    ...limits.map(limitRow), el('p', { text: t('limitsNote') }));
}

/** @param {any} limit */
function limitRow(limit) {
  const isSplit = limit.of === 'split_hz';
  const isSpread = limit.of.startsWith('spread_');
  const name = isSplit ? 'split' : isSpread ? 'spread' : /** @type {Record<string, string>} */ (QUANTITIES)[limit.of] ?? limit.of;
  const quantity = entry('quantity')[name] ?? name;
  const what = isSplit ? quantity : t('of', { what: quantity, label: limit.label });
  const shape = { inside: 'good', outside: 'rejected', 'not-decided': 'doubtful' }[/** @type {'inside'} */ (limit.decision)] ?? 'ringing';
  const word = { inside: t('inside'), outside: t('outside'), 'not-decided': t('undecided') }[/** @type {'inside'} */ (limit.decision)] ?? '–';
  const k = isSpread ? 100 : 1;
  const spoken = pairText(known(limit.half_width) ? pairAny(limit.value * k, limit.half_width * k) : null, '', decimal());
  const more = known(limit.more) && limit.more > 0 ? t('wouldDecide', { count: limit.more }) : '';
  return el('div', { class: 'limit', title: `${what} ${spoken} ${more}` }, el('span', { text: what }), limitPicture(limit, k, `${what}: ${spoken}, ${word}. ${more}`), el('b', { class: shape }, mark(shape), word));
}

/** @param {any} limit @param {number} k @param {string} label */
function limitPicture(limit, k, label) {
  const ends = [limit.low, limit.high].filter(known);
  const half = limit.half_width ?? 0;
  const all = [...ends, ...(known(limit.value) ? [limit.value - half, limit.value + half] : [])];
  const low = Math.min(...all);
  const high = Math.max(...all);
  const pad = (high - low || Math.abs(high) || 1) * 0.22;
  const x = (/** @type {number} */ v) => Math.round(((v - low + pad) / (high - low + 2 * pad)) * 1360) / 10;
  const root = svg('svg', { viewBox: '0 0 136 40', role: 'img', 'aria-label': label, preserveAspectRatio: 'xMidYMid meet' });
  const from = known(limit.low) ? x(limit.low) : 0;
  const to = known(limit.high) ? x(limit.high) : 136;
  root.append(svg('line', { class: 'limit-line', x1: 0, x2: 136, y1: 16, y2: 16 }), svg('rect', { class: 'limit-band', x: from, y: 11, width: Math.max(0, to - from), height: 10 }));
  for (const end of ends) {
    root.append(svg('line', { class: 'limit-edge', x1: x(end), x2: x(end), y1: 6, y2: 25 }), svg('text', { x: Math.min(118, Math.max(18, x(end))), y: 37, text: dress(trimmed(end * k), decimal()) }));
  }
  if (known(limit.value)) {
    if (half) root.append(svg('line', { class: 'limit-bar', x1: x(limit.value - half), x2: x(limit.value + half), y1: 16, y2: 16 }));
    root.append(svg('circle', { class: 'limit-dot', cx: x(limit.value), cy: 16, r: 4.5 }));
  }
  return root;
}

/** A limit as it stands in the sheet. @param {number} x */
function trimmed(x) {
  return String(Number(x.toPrecision(10)));
}

/** @param {import('../store.js').Store} store @param {any} strike @param {any} pinned */
function compareBlock(store, strike, pinned) {
  const label = store.leadLabel(strike);
  const d = decimal();
  const modeOf = (/** @type {any} */ s) => s.modes?.find((/** @type {any} */ m) => m.label === label);
  const rows = [['Q', 'q', 'q_u', '', 1], ['f', 'f_hz', 'f_u_hz', 'Hz', 1], ['T60', 't60_s', 't60_u_s', store.unit, store.unit === 'ms' ? 1000 : 1]].map(([name, key, uKey, unit, k]) => {
    const diff = difference(modeOf(strike), modeOf(pinned), String(key), String(uKey));
    const p = diff ? pairAny(diff.value * Number(k), diff.u * Number(k)) : null;
    const differs = diff ? Math.abs(diff.value) > 2 * diff.u : false;
    return el('tr', {}, el('th', { scope: 'row', text: String(name) }), el('td', { text: (diff && diff.value > 0 ? '+' : '') + pairText(p, String(unit), d) }), el('td', {}, differs ? el('b', { text: t('differs') }) : diff ? t('noDifference') : '–'));
  });
  return el('div', { class: 'block' }, el('h3', { text: t('comparing', { a: dress(String(strike.id)), b: dress(String(pinned.id)) }) }), ' ', button(t('unpin'), { key: 'p', onclick: () => { store.pinned = null; store.touch('selection', 'row'); } }),
    el('table', { class: 'figures' }, el('caption', { class: 'unseen', text: t('differenceHead') }), el('tbody', {}, ...rows)));
}

/** Difference of two series' means with its 95 % interval, from the half-widths of both.
 * @param {any} s @param {any} other */
function againstBlock(s, other) {
  const rows = [];
  for (const mode of s.modes.slice(0, 3)) {
    const before = other.statistics.modes.find((/** @type {any} */ m) => m.label === mode.label);
    for (const [key, name] of [['q', 'Q'], ['f_hz', 'f']]) {
      const a = mode[key];
      const b = before?.[key];
      if (!known(a?.half_width) || !known(b?.half_width)) continue;
      const value = a.mean - b.mean;
      const half = Math.hypot(a.half_width, b.half_width);
      const isOther = Math.abs(value) > half;
      rows.push(el('tr', {}, el('th', { scope: 'row', text: `${name} ${mode.label}` }), el('td', { text: (value > 0 ? '+' : '') + pairText(pairAny(value, half), key === 'f_hz' ? 'Hz' : '', decimal()) }), el('td', {}, isOther ? el('b', { text: t('differs') }) : t('noDifference'))));
    }
  }
  return el('div', { class: 'block' }, el('h3', { text: t('against') }), ' ', el('span', { class: 'sub isolate', text: `${t('thisSeries', { id: other.id })}, 95${NARROW}%` }), el('table', { class: 'figures' }, el('caption', { class: 'unseen', text: t('against') }), el('tbody', {}, ...rows)));
}

