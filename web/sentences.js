// @ts-check
/* Sentences: of a verdict, of a state of the bench. Numbers come from the reading; a clause whose
 * number is null goes. The verdict is the bench's, never worked out from the reason. */

import { count, dress, known, level, NARROW, plainAt, significant, span } from './format.js';
import { decimal, entry, fill, t } from './lang.js';

/** First of this list is said, the rest are named. */
const ORDER = ['samples-lost', 'clipped', 'double-hit', 'restruck', 'noisy', 'too-soft', 'too-short',
  'not-a-ring', 'not-exponential', 'gliding', 'input-steered', 'unresolved'];

/** @param {unknown} x @param {(x: number) => string} format */
function ifKnown(x, format) {
  return known(x) ? format(x) : null;
}

/** The numbers of a reading, dressed for its sentence. @param {any} strike */
function numbersOf(strike) {
  const why = strike.why ?? {};
  const d = decimal();
  const hz = (/** @type {number} */ x) => significant(x, Math.max(3, Math.ceil(Math.log10(Math.abs(x) + 1))), d) + NARROW + 'Hz';
  const rate = (/** @type {number} */ x) => significant(x, 2, d) + NARROW + '/s';
  const window = strike.window_s ? strike.window_s[1] - strike.window_s[0] : null;
  const isSlower = known(why.late_per_s) && known(why.early_per_s) && why.late_per_s < why.early_per_s;
  return {
    frames: ifKnown(why.lost_frames, count),
    span: known(why.lost_frames) && known(strike.rate_hz) ? span(why.lost_frames / strike.rate_hz, d) : null,
    for: ifKnown(why.for_s, (x) => span(x, d)),
    after: ifKnown(why.after_s, (x) => span(x, d)),
    cut: ifKnown(why.cut_s, (x) => span(x, d)),
    noise: ifKnown(why.noise_dbfs, (x) => level(x, d, 0) + NARROW + 'dBFS'),
    over: ifKnown(why.over_noise_db, (x) => level(x, d, 0) + NARROW + 'dB'),
    cycles: ifKnown(why.cycles, (x) => significant(x, 2, d)),
    ring: ifKnown(why.span_s ?? window, (x) => span(x, d)),
    early: ifKnown(why.early_per_s, rate),
    late: ifKnown(why.late_per_s, rate),
    slows: t(isSlower ? 'slows' : 'quickens'),
    earlyHz: ifKnown(why.early_hz, hz),
    lateHz: ifKnown(why.late_hz, hz),
    gain: ifKnown(why.gain_db, (x) => level(Math.abs(x), d, 1) + NARROW + 'dB'),
    near: ifKnown(why.near_hz, hz),
  };
}

/** Reasons in the order of the sentence. @param {any} strike @returns {string[]} */
export function orderedReasons(strike) {
  const reasons = strike.reasons ?? [];
  return [...ORDER.filter((r) => reasons.includes(r)), ...reasons.filter((/** @type {string} */ r) => !ORDER.includes(r))];
}

/** "double hit, 21 ms": the log's short form. @param {any} strike */
export function reasonWords(strike) {
  const numbers = numbersOf(strike);
  /** @type {Record<string, string|null>} */
  const detail = { 'double-hit': numbers.after, restruck: numbers.cut, clipped: numbers.for, noisy: numbers.noise, 'too-soft': numbers.over, 'samples-lost': numbers.span, 'input-steered': numbers.gain, unresolved: numbers.near };
  return orderedReasons(strike).map((r) => {
    const word = entry(`reason.${r}`)?.word ?? r;
    return detail[r] ? `${word}, ${detail[r]}` : word;
  }).join('; ');
}

/** @param {any} strike @param {{isTank?: boolean, enough?: string|null}} context enough: the
 * precision reached when no more strikes are wanted */
export function verdictSentence(strike, { isTank = false, enough = null } = {}) {
  const [first, ...others] = orderedReasons(strike);
  if (!first) {
    if (strike.verdict !== 'good') return t('notGood');
    const tap = enough ? t('enough', { percent: enough }) : entry('tapAgain')[isTank ? 'tank' : 'part'];
    return (strike.remarks ?? []).includes('blow-clipped') ? `${t('blowClipped')} ${tap}` : tap;
  }
  const reason = entry(`reason.${first}`);
  if (typeof reason !== 'object') return `${first}.`;
  const seen = fill((isTank && reason.seenTank) || reason.seen, numbersOf(strike));
  const change = (isTank && reason.tank) || reason.change;
  const also = others.length ? t('also', { list: others.map((r) => entry(`reason.${r}`)?.word ?? r).join(t('and')) }) : '';
  return `${seen}: ${change}${also}`;
}

/** "41 s", "3 min". @param {number} seconds */
export function ageText(seconds) {
  const s = Math.max(0, Math.round(seconds));
  if (s < 120) return t('seconds', { n: s });
  if (s < 7200) return t('minutes', { n: Math.round(s / 60) });
  if (s < 172800) return t('hours', { n: Math.round(s / 3600) });
  return t('days', { n: Math.round(s / 86400) });
}

/** @param {string|number|Date|null|undefined} time "14:32:48" in the browser's zone */
export function clockText(time) {
  if (!time) return '–';
  const date = new Date(time);
  return Number.isNaN(date.getTime()) ? '–' : date.toLocaleTimeString(document.documentElement.lang, { hour12: false });
}

/** Short name of the browser's zone: "CET". */
export function zoneText() {
  const parts = new Intl.DateTimeFormat(document.documentElement.lang, { timeZoneName: 'short' }).formatToParts(new Date());
  return parts.find((p) => p.type === 'timeZoneName')?.value ?? '';
}

/** "2.4 %" @param {number} share */
export function percentText(share) {
  return significant(share * 100, 2, decimal()) + NARROW + '%';
}

/** What the detector takes when nothing is set (detect.h). */
export const AUTOMATIC_TRIGGER_DB = 17;

/** How far over the noise of its band a tone must stand to be caught. @param {any} trigger of GET
 * /trigger @param {number} by how far the trigger is being moved, dB */
export function overNoise(trigger, by = 0) {
  if (!trigger) return null;
  return dress(plainAt((trigger.trigger_db ?? AUTOMATIC_TRIGGER_DB) + by, 0)) + NARROW + 'dB';
}

/** The state of bench and page: mark and word of the strip; a sentence when it takes the verdict's
 * place; a button; whether the top bar stands; whether the level is known.
 * @typedef {{mark: string, word: string, detail: string|null, sentence: string|null, action: string|null, hasBar: boolean, hasLevel: boolean, key: string}} BenchState
 * @param {import('./store.js').Store} store @returns {BenchState} */
export function benchState(store) {
  const c = store.connection;
  /** @type {BenchState} */
  const fine = { key: 'listening', mark: 'good', word: t('listening'), detail: null, sentence: null, action: null, hasBar: false, hasLevel: true };
  if (c.state === 'connecting') return { ...fine, key: 'connecting', mark: 'ringing', word: t('connecting'), sentence: t('connectingSentence'), hasLevel: false };
  if (c.state === 'lost' || c.state === 'full' || c.state === 'tabs') return awayState(store, fine);
  if (c.state === 'catching') return { ...fine, key: 'catching', mark: 'ringing', word: t('catchingUp'), sentence: t('fetching', { count: c.missing === null ? null : count(c.missing) }) };
  const input = store.bench?.input;
  if (input?.state === 'lost') {
    return { ...fine, key: 'input-lost', mark: 'rejected', word: t('inputLost'), sentence: t('inputGone', { time: input.since ? clockText(input.since) : null }), action: 'other', hasBar: true, hasLevel: false };
  }
  if (!input || input.state === 'none') {
    const isEnded = input?.ended === true;
    return { ...fine, key: 'no-input', mark: 'ringing', word: t('notListening'), detail: isEnded ? null : t('noInput'), sentence: t(isEnded ? 'inputEnded' : 'chooseSentence'), action: 'choose', hasLevel: false };
  }
  const log = store.bench?.log;
  if (log?.state === 'full' || log?.state === 'closed') {
    const isFull = log.state === 'full';
    return { ...fine, key: 'log-full', mark: 'doubtful', detail: t('notKeeping'), sentence: isFull ? t('logFull', { count: log.unkept || null, time: log.unkept_since ? clockText(log.unkept_since) : null }) : t('logClosed'), action: isFull ? 'download' : null, hasBar: true };
  }
  if (log?.unread > 1) return { ...fine, key: 'behind', mark: 'doubtful', detail: t('behindWord', { count: count(log.unread) }), sentence: t('behind') };
  if (store.version && store.bench.version !== store.version) {
    return { ...fine, key: 'version', mark: 'doubtful', sentence: t('otherVersion', { theirs: store.bench.version, ours: store.version }), action: 'reload' };
  }
  if (store.inputBack && Date.now() - store.inputBack.at < 10000 && known(store.inputBack.gap)) {
    return { ...fine, key: 'back', sentence: t('inputBack', { span: span(store.inputBack.gap, decimal()) }) };
  }
  const isRinging = store.level?.ringing || store.shown().isForming;
  if (isRinging) return { ...fine, key: 'ringing', mark: 'ringing', word: t('ringing') };
  if (!store.shown().strike) return { ...fine, key: 'waiting', sentence: t('waiting', { over: overNoise(store.bench?.trigger) }), action: 'check' };
  return fine;
}

/** @param {import('./store.js').Store} store @param {BenchState} fine @returns {BenchState} */
function awayState(store, fine) {
  const c = store.connection;
  const away = { ...fine, key: 'lost', mark: 'rejected', word: t('noConnection'), action: 'retry', hasBar: true, hasLevel: false };
  if (c.state === 'full') return { ...away, key: 'full', sentence: t('tooMany', { count: store.bench?.watchers_max ?? 200 }) };
  if (c.state === 'tabs') return { ...away, key: 'tabs', sentence: t('tooManyTabs') };
  const seconds = c.nextTry ? Math.ceil((c.nextTry - Date.now()) / 1000) : 0;
  const next = seconds > 0 ? t('nextTry', { seconds }) : t('tryingNow');
  return { ...away, detail: t('asOf', { time: clockText(c.asOf) }), sentence: t('connectionLost', { next }) };
}
