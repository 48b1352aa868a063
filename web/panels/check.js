// @ts-check
/* The five-second set-up check: what the bench says of noise, clipping, hum, lost samples and a
 * steered level, one sentence each. The page only counts and compares; it measures nothing. */

import { el, mark, setText } from '../dom.js';
import { count, known, level, NARROW, significant } from '../format.js';
import { decimal, t } from '../lang.js';
import { benchState } from '../sentences.js';

const SECONDS = 5;
const QUIET_DBFS = -50;
const STEADY_DB = 6;
const SILENT_DBFS = -130;
const STRIKES_BACK = 10;

/** @param {HTMLElement} body @param {import('../store.js').Store} store */
export function fill(body, store) {
  const note = el('p');
  const list = el('ul', { class: 'lines' });
  const again = el('button', { type: 'button', class: 'framed', text: t('checkAgain'), onclick: () => start() });
  body.append(note, el('div', { role: 'status' }, list), again);
  /** @type {number[]} */
  let noises = [];
  let hasClipped = false;
  let hasRung = false;
  let startedAt = 0;
  let timer = 0;

  const unwatch = store.watch(['level'], () => {
    if (!startedAt || !store.level) return;
    if (known(store.level.noise_dbfs)) noises.push(store.level.noise_dbfs);
    hasClipped ||= store.level.clipped === true;
    hasRung ||= store.level.ringing === true;
  });

  function start() {
    noises = [];
    hasClipped = hasRung = false;
    list.replaceChildren();
    again.hidden = true;
    startedAt = performance.now();
    tick();
  }
  function tick() {
    const left = Math.ceil(SECONDS - (performance.now() - startedAt) / 1000);
    if (!benchState(store).hasLevel) return end([['doubtful', t('checkNoInput')]]);
    if (left > 0) {
      setText(note, t('checkRunning', { seconds: left }));
      timer = window.setTimeout(tick, 250);
      return;
    }
    end(findings(store, noises, hasClipped, hasRung));
  }
  function end(/** @type {[string, string][]} */ lines) {
    startedAt = 0;
    setText(note, '');
    again.hidden = false;
    list.replaceChildren(...lines.map(([shape, text]) => el('li', {}, mark(shape), el('span', { text }))));
  }
  start();
  return () => {
    clearTimeout(timer);
    unwatch();
  };
}

/** @param {import('../store.js').Store} store @param {number[]} noises @param {boolean} hasClipped
 * @param {boolean} hasRung @returns {[string, string][]} mark, sentence */
function findings(store, noises, hasClipped, hasRung) {
  /** @type {[string, string][]} */
  const out = [];
  const d = decimal();
  if (hasRung) out.push(['doubtful', t('strikesDuring')]);
  if (noises.length) {
    const sorted = [...noises].sort((a, b) => a - b);
    const middle = sorted[sorted.length >> 1];
    const range = sorted[sorted.length - 1] - sorted[0];
    const values = { level: level(middle, d, 0), db: significant(Math.max(0.1, range), 2, d) };
    if (middle < SILENT_DBFS) out.push(['doubtful', t('silentInput')]);
    else out.push(middle <= QUIET_DBFS ? ['good', t('noiseQuiet', values)] : ['doubtful', t('noiseLoud', values)]);
    out.push(range <= STEADY_DB ? ['good', t('noiseSteady', values)] : ['doubtful', t('noiseMoves', values)]);
  } else {
    out.push(['doubtful', t('silentInput')]);
  }
  const last = store.row.slice(-STRIKES_BACK).map((id) => store.strikes.get(id)).filter(Boolean);
  const tones = last.flatMap((s) => s.tones ?? []).sort((a, b) => b.level_dbfs - a.level_dbfs);
  if (tones.length) out.push(['doubtful', t('humFound', { f: significant(tones[0].f_hz, 3, d) + NARROW + 'Hz', level: level(tones[0].level_dbfs, d, 0) })]);
  else out.push(last.length ? ['good', t('humNone')] : ['doubtful', t('humUnknown')]);
  if (last.length) out.push(last.some((s) => s.reasons?.includes('input-steered')) ? ['doubtful', t('steeredSeen')] : ['good', t('steeredNone')]);
  out.push(hasClipped ? ['doubtful', t('clipSeen')] : ['good', t('clipNone')]);
  const lost = store.bench?.input?.lost_frames;
  if (known(lost)) out.push(lost > 0 ? ['doubtful', t('lostSeen', { count: count(lost) })] : ['good', t('lostNone')]);
  for (const warning of store.bench?.input?.warnings ?? []) out.push(['doubtful', `${warning}.`]);
  return out;
}
