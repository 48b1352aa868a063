// @ts-check
/* Recordings dropped anywhere on the page. */

import { setText } from '../dom.js';
import { t } from '../lang.js';

/** @param {HTMLElement} element @param {import('../store.js').Store & {file?: File}} store */
export function mount(element, store) {
  setText(element, t('dropNow'));
  const holdsFile = (/** @type {DragEvent} */ event) => event.dataTransfer?.types.includes('Files');
  document.addEventListener('dragover', (event) => {
    if (!holdsFile(event)) return;
    event.preventDefault();
    element.hidden = false;
  });
  document.addEventListener('dragleave', (event) => {
    if (!event.relatedTarget) element.hidden = true;
  });
  document.addEventListener('drop', (event) => {
    element.hidden = true;
    if (!holdsFile(event)) return;
    event.preventDefault();
    const file = event.dataTransfer?.files[0];
    if (file) store.announce('read-file', file);
  });
  store.addEventListener('read-file', (event) => {
    store.file = /** @type {CustomEvent} */ (event).detail;
    const opener = store.sheet?.opener ?? document.activeElement;
    store.sheet = null;
    store.touch('sheet');
    store.flush();
    store.sheet = { name: 'recording', opener };
    store.touch('sheet');
  });
}
