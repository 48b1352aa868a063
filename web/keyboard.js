// @ts-check
/* Keys of the whole page. None acts inside a field; letters can be turned off. */

import { isField } from './dom.js';

/** @param {import('./store.js').Store} store */
export function startKeys(store) {
  const toggleWide = () => {
    const isWide = !store.isWide;
    store.setPref('wide', isWide);
    history.replaceState(null, '', isWide ? '#wide' : location.pathname);
    window.dispatchEvent(new HashChangeEvent('hashchange'));
  };
  const toggleFold = () => {
    store.isUnfolded = !store.isUnfolded;
    document.body.classList.toggle('unfolded', store.isUnfolded);
    store.touch('row');
  };
  const step = (/** @type {number} */ by) => {
    const isInRow = document.activeElement?.closest('#row') !== null;
    store.stepSelection(by);
    store.flush();
    if (isInRow) store.announce('focus-selected', null);
  };
  const ends = (/** @type {number|null} */ id) => {
    const isInRow = document.activeElement?.closest('#row') !== null;
    store.select(id);
    store.flush();
    if (isInRow) store.announce('focus-selected', null);
  };

  /** @type {Record<string, () => void>} */
  const plain = {
    ArrowLeft: () => step(-1), ArrowRight: () => step(1),
    ArrowUp: () => store.stepLead(-1), ArrowDown: () => store.stepLead(1),
    Home: () => ends(store.row[0] ?? null), End: () => ends(null),
    Escape: () => {
      if (store.sheet) store.openSheet(null);
      else if (store.isWide) toggleWide();
    },
  };
  /** @type {Record<string, () => void>} */
  const letters = {
    p: () => store.togglePin(), w: toggleWide, a: toggleFold,
    d: () => store.setPref('figures', store.prefs.figures === 'decay' ? 't60' : 'decay'),
    n: () => store.announce('edit-note', store.selected), x: () => store.announce('edit-aside', store.selected),
    t: () => store.announce('toggle-table', null), c: () => store.openSheet('check'), i: () => store.openSheet('input'),
    l: () => store.announce('focus-level', null), '/': () => store.announce('focus-filter', null),
    r: () => store.announce('retry', null), m: () => store.announce('last-minute', null), s: () => store.openSheet('settings'),
    '?': () => store.openSheet('keys'),
    '+': () => store.announce('zoom', 0.5), '=': () => store.announce('zoom', 0.5), '-': () => store.announce('zoom', 2), '0': () => store.announce('zoom', 0),
  };

  document.addEventListener('keydown', (event) => {
    if (event.defaultPrevented || event.ctrlKey || event.metaKey || event.altKey) return;
    if (isField(event.target)) {
      if (event.key === 'Escape') /** @type {HTMLElement} */ (event.target).blur();
      return;
    }
    const isArrow = event.key.startsWith('Arrow') || event.key === 'Home' || event.key === 'End';
    const target = /** @type {Element|null} */ (event.target instanceof Element ? event.target : null);
    if (isArrow && (event.shiftKey || target?.closest('[data-arrows]'))) return; // the plot's, the sheet's
    if (isArrow && target?.closest('.table-wrap, #log .scroll') && /^(ArrowUp|ArrowDown)$/.test(event.key)) return;
    const act = plain[event.key] ?? (store.prefs.letterKeys || event.key === '?' ? letters[event.key] : undefined);
    if (!act) return;
    event.preventDefault();
    act();
  });
  store.addEventListener('toggle-wide', toggleWide);
  store.addEventListener('toggle-fold', toggleFold);
  store.addEventListener('leave-wide', () => {
    if (store.isWide) toggleWide();
  });
  store.addEventListener('last-minute', () => {
    const link = document.createElement('a');
    link.href = '/api/v1/recent.wav?seconds=60';
    link.download = '';
    link.click();
    store.announce('say', 'minuteSaved');
  });
}
