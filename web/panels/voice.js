// @ts-check
/* What is said aloud: the status line for screen readers (final readings only), the alert (input
 * lost, log full), and, when switched on, a short tone and the Q spoken by the browser. */

import { setText } from '../dom.js';
import { dress, pair } from '../format.js';
import { decimal, t } from '../lang.js';
import { benchState } from '../sentences.js';

const SAY_EVERY_MS = 5000; // at ten strikes a second
const QUICK_MS = 1000;
const TONE_S = 0.12;

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  const alert = /** @type {HTMLElement} */ (document.getElementById('alert'));
  let saidAt = -Infinity;
  let finalAt = -Infinity;
  let timer = 0;
  /** @type {AudioContext|null} */
  let audio = null;
  /** @type {any} */
  let waiting = null;

  function say() {
    saidAt = performance.now();
    setText(element, statusText(store, waiting));
    if (store.prefs.speak && waiting.verdict !== 'rejected') speak(store, waiting);
  }

  store.addEventListener('final', (event) => {
    const strike = /** @type {CustomEvent} */ (event).detail;
    const now = performance.now();
    const isQuick = now - finalAt < QUICK_MS;
    finalAt = now;
    waiting = strike;
    clearTimeout(timer);
    const wait = isQuick ? Math.max(0, SAY_EVERY_MS - (now - saidAt)) : 0;
    if (wait) timer = window.setTimeout(say, wait);
    else say();
    if (store.prefs.sound) {
      audio ??= new AudioContext();
      tone(audio, strike.verdict === 'good' ? 660 : 294, store.prefs.volume);
    }
  });
  store.addEventListener('say', (event) => setText(element, t(/** @type {CustomEvent} */ (event).detail)));
  store.addEventListener('say-text', (event) => setText(element, /** @type {CustomEvent} */ (event).detail));
  store.addEventListener('refused', (event) => setText(element, t('changeRefused', { text: /** @type {CustomEvent} */ (event).detail })));
  let alertKey = '';
  return store.watch(['connection', 'bench'], () => {
    const state = benchState(store);
    const key = state.key === 'input-lost' || state.key === 'log-full' ? state.key : '';
    if (key !== alertKey) setText(alert, key ? state.sentence ?? '' : '');
    alertKey = key;
  });
}

/** @param {import('../store.js').Store} store @param {any} strike */
function statusText(store, strike) {
  const mode = strike.verdict === 'rejected' ? null : store.leadMode(strike);
  const q = mode && pair(mode.q, mode.q_u);
  const d = decimal();
  const spoken = q ? t('speakQ', { value: dress(q.value, d), u: q.u ? dress(q.u, d) : t('notKnown') }) : '';
  const more = store.wanted();
  return t('status', { id: strike.id ?? '', verdict: t(strike.verdict), q: spoken, more: more === null ? '' : t('statusMore', { count: more }) });
}

/** @param {import('../store.js').Store} store @param {any} strike */
function speak(store, strike) {
  const mode = store.leadMode(strike);
  const q = mode && pair(mode.q, mode.q_u);
  if (!q || !('speechSynthesis' in window)) return;
  speechSynthesis.cancel();
  const words = new SpeechSynthesisUtterance(`Q ${q.value.replace('.', decimal())}`);
  words.lang = document.documentElement.lang;
  speechSynthesis.speak(words);
}

/** @param {AudioContext} audio @param {number} hz @param {number} volume */
function tone(audio, hz, volume) {
  const source = audio.createOscillator();
  const gain = audio.createGain();
  const now = audio.currentTime;
  source.frequency.value = hz;
  gain.gain.setValueAtTime(0, now);
  gain.gain.linearRampToValueAtTime(volume, now + 0.01);
  gain.gain.linearRampToValueAtTime(0, now + TONE_S);
  source.connect(gain).connect(audio.destination);
  source.start(now);
  source.stop(now + TONE_S + 0.02);
}
