// @ts-check
/* One place for the sentence: the verdict of the strike that is shown, or the state of the bench. */

import { el, mark, setText } from '../dom.js';
import { known } from '../format.js';
import { t } from '../lang.js';
import { BASE } from '../api.js';
import { benchState, percentText, verdictSentence } from '../sentences.js';

/* States that can wait while a fresh verdict is read. */
const PATIENT = ['back', 'behind', 'version', 'log-full'];
const FRESH_MS = 8000;
const KNOWN_ENOUGH = 0.01; // of Q: "hold still" goes

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  const word = el('span', { class: 'word' });
  const sentence = el('span', { class: 'sentence isolate' });
  const action = el('span');
  element.append(word, sentence, action);
  element.setAttribute('aria-label', t('verdict'));
  let wordKey = 'none yet';
  let actionKey = '';

  /** @type {Record<string, () => HTMLElement>} */
  const actions = {
    check: () => framed(t('checkSetup'), 'c', () => store.openSheet('check')),
    choose: () => framed(t('chooseInput'), 'i', () => store.openSheet('input')),
    other: () => framed(t('chooseOther'), 'i', () => store.openSheet('input')),
    retry: () => framed(t('tryNow'), 'r', () => store.announce('retry', null)),
    download: () => el('a', { class: 'plain', href: `${BASE}/export.csv`, download: '', text: t('downloadLog') }),
    reload: () => framed(t('reload'), '', () => location.reload()),
  };

  return store.watch(['strikes', 'forming', 'selection', 'bench', 'connection', 'ringing', 'clock'], () => {
    const state = benchState(store);
    const { strike, isForming } = store.shown();
    const now = describe(store, state, strike, isForming);
    if (wordKey !== now.shape + now.word) {
      wordKey = now.shape + now.word;
      word.replaceChildren(...(now.word ? [mark(now.shape), el('span', { class: now.shape === 'ringing' ? '' : now.shape, text: now.word })] : []));
      word.hidden = !now.word;
    }
    setText(sentence, now.sentence);
    const wanted = state.action ?? '';
    if (actionKey !== wanted) {
      const hadFocus = action.contains(document.activeElement);
      actionKey = wanted;
      action.replaceChildren(...(wanted ? [actions[wanted]()] : []));
      if (hadFocus) /** @type {HTMLElement|null} */ (action.firstElementChild)?.focus();
    }
  });
}

/** @param {import('../store.js').Store} store @param {import('../sentences.js').BenchState} state
 * @param {any} strike @param {boolean} isForming */
function describe(store, state, strike, isForming) {
  const isReadingOld = strike && !isForming && !store.isFollowing && !store.isWide;
  const isFresh = isForming || (PATIENT.includes(state.key) && performance.now() - store.finalAt < FRESH_MS);
  if (state.sentence && !isReadingOld && !isFresh) return { shape: '', word: '', sentence: state.sentence };
  if (isForming || (state.key === 'ringing' && !strike)) {
    const mode = store.leadMode(strike);
    const isKnown = known(mode?.q_u) && mode.q_u < KNOWN_ENOUGH * mode.q;
    return { shape: 'ringing', word: t('ringing'), sentence: isKnown ? '' : t('holdStill') };
  }
  if (!strike) return { shape: '', word: '', sentence: '' };
  const note = strike.id ? '' : ' ' + t('unkeptNote');
  return { shape: strike.verdict, word: t(strike.verdict), sentence: verdictSentence(strike, { isTank: isTank(store, strike), enough: enough(store) }) + note };
}

/** A coil and capacitor, by the part sheet's word. @param {import('../store.js').Store} store
 * @param {any} strike */
export function isTank(store, strike) {
  const kind = strike.kind ?? store.bench?.series?.kind ?? '';
  return /tank/i.test(kind) || /\btank\b/i.test(strike.part ?? '');
}

/** The precision reached, when no more strikes are wanted. @param {import('../store.js').Store} store */
function enough(store) {
  const s = store.bench?.series?.statistics;
  const q = s?.modes?.[0]?.q;
  return s?.more === 0 && known(q?.half_width) && known(q.mean) ? percentText(q.half_width / Math.abs(q.mean)) : null;
}

/** @param {string} text @param {string} key @param {() => void} onclick */
function framed(text, key, onclick) {
  return el('button', { type: 'button', class: 'framed', onclick }, text, key ? el('kbd', { text: key, 'aria-hidden': 'true' }) : null);
}
