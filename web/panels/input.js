// @ts-check
/* The input chooser: sound cards, the simulated bench, a recording to be read. */

import { get, send } from '../api.js';
import { button, el, setText } from '../dom.js';
import { count, NARROW, significant } from '../format.js';
import { decimal, t } from '../lang.js';

/** @param {HTMLElement} body @param {import('../store.js').Store} store */
export function fill(body, store) {
  const note = el('p', { class: 'sub', text: t('lookingForInputs') });
  const list = el('ul', { class: 'lines inputs' });
  const file = /** @type {HTMLInputElement} */ (el('input', { type: 'file', id: 'recording-file', 'aria-label': t('chooseFile'), accept: 'audio/*,.wav,.flac,.aiff,.aif,.caf,.w64,.rf64,.ogg' }));
  file.addEventListener('change', () => {
    if (file.files?.[0]) store.announce('read-file', file.files[0]);
  });
  body.append(note, list, el('p', {}, t('dropHere') + ' ', file));
  let isOver = false;

  get('/inputs').then(({ inputs }) => {
    if (isOver) return;
    const hasCard = inputs.some((/** @type {any} */ i) => i.kind === 'card');
    setText(note, hasCard ? '' : t('noCards'));
    list.replaceChildren(...inputs.map((/** @type {any} */ input) => inputRow(store, input, note)));
  }, (cause) => setText(note, t('inputsTrouble', { text: cause.message })));
  return () => {
    isOver = true;
  };
}

/** @param {import('../store.js').Store} store @param {any} input @param {HTMLElement} note */
function inputRow(store, input, note) {
  const isSimulated = input.kind === 'simulated';
  const isUsed = store.bench?.input?.name === input.name;
  const facts = isSimulated ? t('simulatedSub')
    : [input.host, input.channels === 1 ? t('oneChannel') : t('channels', { count: count(input.channels) }), input.rate_hz ? significant(input.rate_hz / 1000, 3, decimal()) + NARROW + 'kHz' : ''].filter(Boolean).join(', ');
  const number = (/** @type {string} */ label, /** @type {number} */ least, /** @type {number} */ most) => {
    const node = /** @type {HTMLInputElement} */ (el('input', { type: 'number', min: least, max: most, placeholder: t('own') }));
    return { node, label: el('label', {}, label, node) };
  };
  const channel = number(t('channelLabel'), 1, Math.max(1, input.channels ?? 1));
  const rate = number(t('rateLabel'), 1000, 768000);
  const use = /** @type {HTMLButtonElement} */ (el('button', { type: 'button', class: 'framed', text: t('useInput'), onclick: choose }));
  const choices = el('div', { class: 'fields', hidden: true }, ...(isSimulated ? [] : [channel.label, rate.label]), use);
  const open = button('', { kind: '', onclick: () => { choices.hidden = !choices.hidden; if (!choices.hidden) use.focus(); } });
  open.replaceChildren(el('b', { text: isSimulated ? t('simulated') : input.name }), el('span', { class: 'sub', text: ` ${facts}${isUsed ? ` · ${t('inUse')}` : ''}` }));

  async function choose() {
    use.disabled = true;
    /** @type {Record<string, any>} */
    const wanted = { name: input.name };
    if (rate.node.value) wanted.rate_hz = Number(rate.node.value);
    if (channel.node.value) wanted.channels_heard = [Number(channel.node.value)];
    try {
      const now = await send('PUT', '/input', wanted);
      if (now) store.setInput(now);
      store.openSheet(null);
    } catch (cause) {
      setText(note, t('changeRefused', { text: cause instanceof Error ? cause.message : String(cause) }));
      use.disabled = false;
    }
  }
  return el('li', {}, open, ...(input.warnings?.length ? [el('span', { class: 'sub isolate', text: input.warnings.join('. ') + '.' })] : []), choices);
}
