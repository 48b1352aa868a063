// @ts-check
/* The sheet: keys, input, set-up check, settings, trigger, a dropped recording. It stands over the
 * lower part of the page, never over the reading; Esc closes it and focus goes back. */

import { button, el } from '../dom.js';
import { t } from '../lang.js';
import * as keys from './keys.js';
import * as settings from './settings.js';

/** What needs the bench is fetched when it is first opened; keys and settings are always here.
 * @type {Record<string, {title: string, load: () => any}>} */
const CONTENT = {
  keys: { title: 'keysHead', load: () => keys },
  settings: { title: 'settingsHead', load: () => settings },
  check: { title: 'checkHead', load: () => import('./check.js') },
  input: { title: 'inputHead', load: () => import('./input.js') },
  recording: { title: 'recordingHead', load: () => import('./recording.js') },
  trigger: { title: 'triggerLabel', load: () => import('./trigger.js') },
};

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  let shown = '';
  /** @type {(() => void) | void} */
  let end;
  element.setAttribute('tabindex', '-1');

  /** @param {{load: () => any}} content @param {HTMLElement} body @param {string} name */
  async function fill(content, body, name) {
    try {
      const { fill: fillBody } = await content.load();
      if (shown === name && body.isConnected) end = fillBody(body, store);
    } catch (cause) {
      body.append(el('p', { text: t('plotTrouble', { text: cause instanceof Error ? cause.message : String(cause) }) }));
    }
  }

  return store.watch(['sheet'], () => {
    const name = store.sheet?.name ?? '';
    if (name === shown) return;
    shown = name;
    if (end) end();
    end = undefined;
    element.hidden = !name;
    element.replaceChildren();
    if (!name) return;
    const content = CONTENT[name];
    const title = el('h2', { id: 'sheet-title', text: t(content.title) });
    const body = el('div', { class: 'lined' });
    element.setAttribute('aria-labelledby', 'sheet-title');
    element.append(el('div', { class: 'head' }, title, button(t('close'), { key: 'Esc', onclick: () => store.openSheet(null) })), body);
    element.classList.add('opening');
    fill(content, body, name);
    element.scrollTop = 0;
    element.focus({ preventScroll: true });
  });
}
