// @ts-check
/* The bench's trigger in figures; empty: chosen by itself. Changed with its version checked. */

import { getTagged, Problem, send } from '../api.js';
import { el, setText } from '../dom.js';
import { t } from '../lang.js';

/** name, unit, least, most */
const FIELDS = /** @type {[string, string, number, number][]} */ ([
  ['trigger_db', 'dB', 6, 60], ['f_low_hz', 'Hz', 1, 400000], ['f_high_hz', 'Hz', 1, 400000], ['hold_off_s', 's', 0, 60], ['window_max_s', 's', 0.05, 600],
]);

/** @param {HTMLElement} body @param {import('../store.js').Store} store */
export function fill(body, store) {
  const note = el('p', { class: 'sub', text: t('triggerHelp') });
  const inputs = FIELDS.map(([name, unit, min, max]) => {
    const input = /** @type {HTMLInputElement} */ (el('input', { type: 'number', min, max, step: 'any', placeholder: t('auto') }));
    return { name, input, node: el('label', {}, `${t(`triggerField.${name}`)}, ${unit}`, input) };
  });
  const save = /** @type {HTMLButtonElement} */ (el('button', { type: 'submit', class: 'framed', text: t('keep') }));
  const auto = /** @type {HTMLButtonElement} */ (el('button', { type: 'button', class: 'framed', text: t('auto'), onclick: () => { for (const { input } of inputs) input.value = ''; keep(); } }));
  const form = el('form', {}, el('div', { class: 'fields' }, ...inputs.map(({ node }) => node), save, auto));
  body.append(form, note);
  /** @type {string|null} */
  let etag = null;

  function show(/** @type {any} */ value) {
    for (const { name, input } of inputs) input.value = value[name] ?? '';
  }
  async function load() {
    try {
      const answer = await getTagged('/trigger');
      etag = answer.etag;
      show(answer.value);
    } catch (cause) {
      setText(note, t('changeRefused', { text: cause instanceof Error ? cause.message : String(cause) }));
    }
  }
  async function keep() {
    save.disabled = auto.disabled = true;
    const wanted = Object.fromEntries(inputs.map(({ name, input }) => [name, input.value === '' ? null : Number(input.value)]));
    try {
      const trigger = await send('PUT', '/trigger', wanted, etag);
      store.setBench({ ...store.bench, trigger: trigger ?? wanted });
      await load();
      setText(note, wanted.trigger_db === null ? t('automaticNow') : t('triggerKept', { over: `${wanted.trigger_db}\u202fdB` }));
    } catch (cause) {
      const isChanged = cause instanceof Problem && cause.status === 412;
      if (isChanged) await load();
      setText(note, isChanged ? t('triggerChanged') : t('changeRefused', { text: cause instanceof Error ? cause.message : String(cause) }));
    }
    save.disabled = auto.disabled = false;
  }
  form.addEventListener('submit', (event) => {
    event.preventDefault();
    keep();
  });
  load();
}
