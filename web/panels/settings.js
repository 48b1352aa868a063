// @ts-check
/* Settings that are the person's: kept in this browser. */

import { el } from '../dom.js';
import { LANGUAGES, t } from '../lang.js';

/** @param {HTMLElement} body @param {import('../store.js').Store} store */
export function fill(body, store) {
  const select = (/** @type {any} */ key, /** @type {string} */ label, /** @type {[string, string][]} */ options, /** @type {() => void} */ then = () => {}) => {
    const node = /** @type {HTMLSelectElement} */ (el('select', { onchange: () => { store.setPref(key, node.value || null); then(); } }, ...options.map(([value, text]) => el('option', { value, text }))));
    node.value = String(/** @type {any} */ (store.prefs)[key] ?? '');
    return el('label', {}, label, node);
  };
  const toggle = (/** @type {any} */ key, /** @type {string} */ label) => {
    const node = /** @type {HTMLInputElement} */ (el('input', { type: 'checkbox', onchange: () => store.setPref(key, node.checked) }));
    node.checked = Boolean(/** @type {any} */ (store.prefs)[key]);
    return el('label', { class: 'switch' }, node, ' ' + label);
  };
  const volume = /** @type {HTMLInputElement} */ (el('input', { type: 'range', min: 0.02, max: 1, step: 0.02, onchange: () => store.setPref('volume', Number(volume.value)) }));
  volume.value = String(store.prefs.volume);
  const names = { en: 'English', de: 'Deutsch' };
  body.append(
    el('div', { class: 'fields' },
      select('theme', t('theme'), [['auto', t('themeAuto')], ['light', t('themeLight')], ['dark', t('themeDark')]]),
      select('figures', t('figures'), [['t60', t('figuresT60')], ['decay', t('figuresDecay')]]),
      select('language', t('language'), [['', t('themeAuto')], ...LANGUAGES.map((code) => /** @type {[string, string]} */ ([code, /** @type {any} */ (names)[code] ?? code]))], () => location.reload())),
    el('div', { class: 'fields' }, toggle('sound', t('sound')), toggle('speak', t('speak')), toggle('letterKeys', t('letterKeys')), el('label', {}, t('volume'), volume)),
    el('p', { class: 'sub', text: t('soundHelp') }),
  );
}
