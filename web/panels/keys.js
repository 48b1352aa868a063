// @ts-check
/* The sheet of keys, and what to take care of. */

import { button, el } from '../dom.js';
import { entry, t } from '../lang.js';

/** @param {HTMLElement} body @param {import('../store.js').Store} store */
export function fill(body, store) {
  const pairs = /** @type {[string, string][]} */ (entry('keyList'));
  const settings = () => {
    store.openSheet('settings');
  };
  body.append(
    el('div', { class: 'fields' }, button(t('settings'), { key: 's', kind: 'framed', onclick: settings }), button(t('minute'), { key: 'm', kind: 'framed', onclick: () => store.announce('last-minute', null) })),
    el('ul', { class: 'key-list' }, ...pairs.map(([keys, does]) => el('li', {}, el('span', { class: 'pair' }, ...keys.split(' ').map((key) => el('kbd', { text: key }))), el('span', { text: does })))),
    el('h3', { text: t('cautionHead') }),
    el('ul', { class: 'cautions' }, ...entry('cautions').map((/** @type {string} */ text) => el('li', { text }))),
  );
}
