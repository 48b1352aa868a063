// @ts-check
/* A recording that was dropped on the page or chosen: read by the bench, shown here, not stored. */

import { readRecording } from '../api.js';
import { el, figure, mark, setText } from '../dom.js';
import { count, level, pair, parts } from '../format.js';
import { decimal, t } from '../lang.js';
import { reasonWords } from '../sentences.js';

export const LIMIT_MB = 64;

/** @param {HTMLElement} body @param {import('../store.js').Store & {file?: File}} store */
export function fill(body, store) {
  const file = store.file;
  if (!file) return;
  const stop = new AbortController();
  const note = el('p', { role: 'status', class: 'isolate', text: t('readingFile', { name: file.name }) });
  const rows = el('tbody');
  const head = (/** @type {string} */ text, cls = '') => el('th', { scope: 'col', class: cls, text });
  const table = el('table', { class: 'figures', hidden: true }, el('caption', { class: 'unseen', text: file.name }), el('thead', {}, el('tr', {}, head(t('onset_s'), 'left'), head(t('verdict'), 'left'), head('f, Hz'), head('Q'), head('T60, s'), head(t('levelHead')), head(t('reasonHead'), 'left'))), rows);
  body.append(note, el('div', { class: 'table-wrap', tabindex: 0, role: 'region', 'aria-label': t('recordingHead') }, table));
  let found = 0;
  if (file.size > LIMIT_MB * 1024 * 1024) {
    setText(note, t('fileTooBig', { name: file.name, limit: LIMIT_MB }));
    return;
  }
  readRecording(file, (strike) => {
    found++;
    table.hidden = false;
    rows.append(row(strike));
    setText(note, t('fileRead', { count: count(found), name: file.name }));
  }, stop.signal).then(() => setText(note, t(found ? 'fileRead' : 'fileNone', { count: count(found), name: file.name })),
    (cause) => {
      if (!stop.signal.aborted) setText(note, t('changeRefused', { text: cause.message }));
    });
  return () => stop.abort();
}

/** @param {any} strike */
function row(strike) {
  const mode = strike.verdict === 'rejected' ? null : strike.modes[0];
  const num = (/** @type {number} */ value, /** @type {number} */ u) => el('td', {}, mode ? figure(parts(pair(value, u), decimal())) : '–');
  return el('tr', {}, el('th', { scope: 'row', class: 'left', text: level(strike.onset_s, decimal(), 3) }), el('td', { class: 'left' }, mark(strike.verdict), el('span', { class: strike.verdict, text: ' ' + t(strike.verdict) })),
    num(mode?.f_hz, mode?.f_u_hz), num(mode?.q, mode?.q_u), num(mode?.t60_s, mode?.t60_u_s), el('td', { text: level(strike.peak_dbfs, decimal()) }), el('td', { class: 'left', text: reasonWords(strike) }));
}
