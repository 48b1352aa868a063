// @ts-check
/* What the log shows: by series, part, specimen, verdict and time, and its export. */

import { BASE, get, query } from '../api.js';
import { button, el } from '../dom.js';
import { t } from '../lang.js';

const HOURS = { hour: 1, day: 24, week: 168 };

/** Would the bench give this strike for this selection? @param {any} strike
 * @param {Record<string, any>} filter */
export function matches(strike, filter) {
  if (filter.series && strike.series !== Number(filter.series)) return false;
  if (filter.part && strike.part !== filter.part) return false;
  if (filter.specimen && strike.specimen !== filter.specimen) return false;
  if (filter.verdict && strike.verdict !== filter.verdict) return false;
  const time = Date.parse(strike.time);
  if (filter.from && time < Date.parse(filter.from)) return false;
  return !(filter.to && time >= Date.parse(filter.to));
}

/** @param {HTMLElement} head @param {import('../store.js').Store} store @param {() => any[]} listed */
export function mountFilter(head, store, listed) {
  const series = choice('series', [['', t('allSeries')]]);
  const part = choice('part', [['', t('allParts')]]);
  const specimen = choice('specimen', [['', t('allSpecimens')]]);
  const verdict = choice('verdict', [['', t('allVerdicts')], ...['good', 'doubtful', 'rejected'].map((v) => /** @type {[string, string]} */ ([v, t(v)]))]);
  const time = choice('time', [['', t('anyTime')], ['hour', t('lastHour')], ['day', t('lastDay')], ['week', t('lastWeek')], ['span', t('fromTo')]]);
  const from = el('input', { type: 'datetime-local', 'aria-label': t('from') });
  const to = el('input', { type: 'datetime-local', 'aria-label': t('to') });
  const span = el('span', {}, from, ' – ', to);
  const csv = el('a', { class: 'plain', download: '', text: t('csv') });
  const json = el('a', { class: 'plain', download: '', text: t('json') });
  head.append(series, part, specimen, verdict, time, span, csv, json, button(t('minute'), { onclick: () => store.announce('last-minute', null) }));
  const selects = { series, part, specimen, verdict };

  function read() {
    /** @type {Record<string, any>} */
    const filter = {};
    for (const [name, select] of Object.entries(selects)) if (select.value) filter[name] = select.value;
    const hours = HOURS[/** @type {keyof typeof HOURS} */ (time.value)];
    if (hours) filter.from = new Date(Date.now() - hours * 3600e3).toISOString();
    if (time.value === 'span') {
      for (const [name, input] of /** @type {[string, HTMLInputElement][]} */ ([['from', from], ['to', to]])) {
        if (input.value) filter[name] = new Date(input.value).toISOString();
      }
    }
    store.setFilter(filter);
  }
  for (const node of [series, part, specimen, verdict, time, from, to]) node.addEventListener('change', read);
  for (const [node, name] of /** @type {[HTMLSelectElement, string][]} */ ([[part, 'part'], [specimen, 'specimen']])) {
    node.addEventListener('focus', () => addNames(node, listed(), name));
    node.addEventListener('pointerenter', () => addNames(node, listed(), name));
  }
  let hasSeries = false;
  const fetchSeries = async () => {
    if (hasSeries) return;
    hasSeries = true;
    try {
      const page = await get('/series');
      for (const s of page.series ?? []) addOption(series, String(s.id), [t('thisSeries', { id: s.id }), s.part, s.specimen].filter(Boolean).join(' · '));
    } catch { /* the list stays as it is; it is tried again at the next focus */
      hasSeries = false;
    }
  };
  series.addEventListener('focus', fetchSeries);
  series.addEventListener('pointerenter', fetchSeries);
  store.addEventListener('focus-filter', () => verdict.focus());

  store.watch(['filter', 'bench'], () => {
    const words = query(store.filter);
    csv.setAttribute('href', `${BASE}/export.csv${words}`);
    json.setAttribute('href', `${BASE}/export.json${words}`);
    if (store.bench?.series) addOption(series, String(store.bench.series.id), t('thisSeries', { id: store.bench.series.id }));
    for (const [name, select] of Object.entries(selects)) select.value = String(store.filter[name] ?? '');
    if (!store.filter.from && !store.filter.to && time.value !== 'span') time.value = '';
    span.hidden = time.value !== 'span';
  });
}

/** @param {string} name @param {[string, string][]} options @returns {HTMLSelectElement} */
function choice(name, options) {
  const key = /** @type {Record<string, string>} */ ({ series: 'allSeries', part: 'allParts', specimen: 'allSpecimens', verdict: 'allVerdicts', time: 'anyTime' })[name];
  return /** @type {HTMLSelectElement} */ (el('select', { 'aria-label': `${t('filter')}: ${t(key)}` }, ...options.map(([value, text]) => el('option', { value, text }))));
}

/** @param {HTMLSelectElement} select @param {string} value @param {string} text */
function addOption(select, value, text) {
  if (![...select.options].some((o) => o.value === value)) select.append(el('option', { value, text }));
}

/** @param {HTMLSelectElement} select @param {any[]} strikes @param {string} key */
function addNames(select, strikes, key) {
  for (const name of new Set(strikes.map((s) => s?.[key]).filter(Boolean))) addOption(select, name, name);
}
