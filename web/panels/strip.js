// @ts-check
/* The strip: state, input, what else can be done; the bar that stands over it in lost states. */

import { button, el, mark, setText } from '../dom.js';
import { dress, known, NARROW, significant } from '../format.js';
import { decimal, t } from '../lang.js';
import { benchState } from '../sentences.js';

/** @param {Element} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  const state = /** @type {HTMLElement} */ (element.querySelector('#state'));
  const tools = /** @type {HTMLElement} */ (element.querySelector('#tools'));
  const title = /** @type {HTMLElement} */ (element.querySelector('#wide-title'));
  const brand = /** @type {HTMLElement} */ (element.querySelector('.brand'));
  const bar = /** @type {HTMLElement} */ (document.getElementById('lost-bar'));
  brand.setAttribute('aria-label', 'Wane');
  brand.addEventListener('click', (event) => {
    event.preventDefault();
    store.announce('leave-wide', null);
    store.select(null);
  });

  const word = el('b');
  const detail = el('span', { class: 'detail sub' });
  const name = el('span', { class: 'isolate' });
  const rate = el('span', { class: 'sub rate' });
  const input = el('button', { type: 'button', onclick: () => store.openSheet('input') }, name, rate);
  state.append(mark('ringing'), word, detail, input);
  let shape = 'ringing';

  const sheetButton = (/** @type {string} */ key, /** @type {string} */ label, /** @type {string} */ sheet) =>
    button(t(label), { key, onclick: () => store.openSheet(sheet), kind: '' });
  const minute = button(t('minute'), { key: 'm', onclick: () => store.announce('last-minute', null), kind: 'late' });
  const settings = button(t('settings'), { key: 's', onclick: () => store.openSheet('settings'), kind: 'late' });
  const wide = button(t('wide'), { key: 'w', onclick: () => store.announce('toggle-wide', null), kind: '' });
  tools.setAttribute('aria-label', t('keys'));
  tools.append(minute, settings, sheetButton('c', 'setup', 'check'), wide, sheetButton('?', 'keys', 'keys'));

  return store.watch(['connection', 'bench', 'ringing', 'strikes', 'forming', 'selection', 'clock'], () => {
    const now = benchState(store);
    if (shape !== now.mark) {
      shape = now.mark;
      state.firstElementChild?.replaceWith(mark(shape));
    }
    setText(word, now.word);
    setText(detail, now.detail ?? '');
    detail.hidden = !now.detail;
    bar.hidden = !now.hasBar;
    paintInput(store, name, rate);
    paintTitle(store, title);
  });
}

/** @param {import('../store.js').Store} store @param {HTMLElement} name @param {HTMLElement} rate */
function paintInput(store, name, rate) {
  const input = store.bench?.input;
  const isSimulated = input?.kind === 'simulated';
  const title = !input || input.state === 'none' && !input.name ? t('chooseInput') : isSimulated ? t('simulated') : shortName(input.name);
  const channels = input?.channels_heard ?? (input?.channel ? [input.channel] : []);
  const channel = input && !isSimulated && channels.length ? ', ' + t('channel', { n: channels.join(', ') }) : '';
  setText(name, title + channel);
  name.title = input?.name ?? '';
  setText(rate, known(input?.rate_hz) ? ' ' + significant(input.rate_hz / 1000, 3, decimal()) + NARROW + 'kHz' : '');
}

/** A recording's path: its last part. @param {string} name */
function shortName(name) {
  return name.includes('/') ? name.slice(name.lastIndexOf('/') + 1) : name;
}

/** In the wide view: part and strike. @param {import('../store.js').Store} store
 * @param {HTMLElement} title */
function paintTitle(store, title) {
  if (!store.isWide) return;
  const { strike } = store.shown();
  const part = strike?.part || store.bench?.series?.part || 'Wane';
  const id = strike?.id ? t('strikeNo', { id: dress(String(strike.id)) }) : '';
  if (title.dataset.shown === part + id) return;
  title.dataset.shown = part + id;
  title.replaceChildren(el('b', { text: part }), el('span', { class: 'sub', text: id }));
}
