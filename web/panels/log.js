// @ts-check
/* The running log: newest first, older pages fetched as they are wanted, rows keyed by strike. */

import { BASE, get, query, send } from '../api.js';
import { button, el, figure, mark, setText } from '../dom.js';
import { count, dress, level, pair, parts } from '../format.js';
import { decimal, t } from '../lang.js';
import { figuresOf, isAside } from '../store.js';
import { clockText, reasonWords, zoneText } from '../sentences.js';
import { mountFilter, matches } from './log-filter.js';

const PAGE = 50;
const LIVE_MAX = 400; // rows kept while nobody scrolls down; older ones are fetched again
const RUN_LEAST = 2;

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  const sub = el('span', { class: 'sub' });
  const note = el('span', { class: 'sub' });
  const head = el('div', { class: 'head' }, el('h2', { id: 'log-title', text: t('log') }), sub, note, el('span', { class: 'grow' }));
  const body = el('tbody');
  const columns = [['time', 'time'], ['id', 'strike'], ['part', 'part'], ['verdict', 'verdict'], ['reason', 'reasonHead'], ['f', 'f'], ['q', 'q'], ['t', 't60'], ['level', 'levelHead'], ['note', 'note']];
  const heads = Object.fromEntries(columns.map(([name, key]) => [name, el('th', { scope: 'col', class: 'f q t level'.split(' ').includes(name) ? 'num' : '', text: t(key, { zone: zoneText() }) })]));
  const table = el('table', {}, el('caption', { class: 'unseen', text: t('log') }), el('colgroup', {}, ...columns.map(([name]) => el('col', { class: `c-${name}` }))),
    el('thead', {}, el('tr', {}, ...columns.map(([name]) => heads[name]))), body);
  const none = el('p', { class: 'none' });
  const rest = el('div', { class: 'rest' }, button(t('older'), { onclick: () => fetchOlder() }));
  const scroll = el('div', { class: 'scroll', tabindex: 0, role: 'group', 'aria-label': t('rowsOfLog') }, table, none, rest);
  element.setAttribute('aria-labelledby', 'log-title');
  element.append(head, scroll);
  mountFilter(head, store, () => [...ids].map((id) => store.strikes.get(id) ?? kept.get(id)));

  /** @type {number[]} newest first */
  let ids = [];
  /** @type {Map<number, any>} strikes of these rows, also when the store has let them go */
  const kept = new Map();
  /** @type {string|null} */
  let next = null;
  let isFetching = false;
  let isStale = true;
  let generation = 0;
  /** @type {Map<string, {node: HTMLElement, key: string}>} */
  const rows = new Map();
  const openRuns = new Set();
  /** @type {{id: number, kind: 'note'|'aside'}|null} */
  let editing = null;

  const words = () => ({ ...store.filter, limit: PAGE });

  async function restart() {
    generation++;
    isStale = false;
    ids = [];
    kept.clear();
    next = `${BASE}/strikes${query(words())}`;
    await fetchOlder();
  }

  async function fetchOlder() {
    if (!next || isFetching) return;
    const mine = generation;
    isFetching = true;
    setText(none, t('loading'));
    try {
      const page = await get(next);
      if (mine !== generation) return;
      for (const strike of page.strikes) {
        if (kept.has(strike.id)) continue;
        kept.set(strike.id, strike);
        ids.push(strike.id);
      }
      ids.sort((a, b) => b - a);
      next = page.next ?? null;
    } catch {
      if (mine === generation) isStale = true; // fetched anew when the bench is back
    } finally {
      isFetching = false;
      if (mine !== generation) fetchOlder();
      store.touch('strikes');
    }
  }

  function paint() {
    const unit = store.unit;
    setText(heads.f, 'f, Hz');
    setText(heads.t, `T60, ${unit}`);
    const total = store.bench?.log?.strikes;
    const since = store.bench?.log?.since;
    setText(sub, typeof total === 'number' ? t('strikesSince', { count: count(Math.max(total, ids.length)), day: since ? new Date(since).toLocaleDateString(document.documentElement.lang, { day: 'numeric', month: 'long' }) : null }) : '');
    const entries = foldRuns(ids, (id) => kept.get(id), openRuns);
    const wanted = new Set(entries.map((entry) => entry.key));
    const nodes = entries.map((entry) => rowFor(entry, unit)); // may replace nodes that stand already
    let at = /** @type {ChildNode|null} */ (body.firstChild);
    for (const node of nodes) {
      if (node === at) at = at.nextSibling;
      else body.insertBefore(node, at);
    }
    for (const [key, { node }] of rows) {
      if (wanted.has(key)) continue;
      node.remove();
      rows.delete(key);
    }
    const isFiltered = Object.keys(store.filter).length > 0;
    none.hidden = ids.length > 0 && !isFetching;
    if (!ids.length && !isFetching) {
      none.replaceChildren(isFiltered ? t('noMatch') + ' ' : t('logEmpty'), isFiltered ? button(t('clearFilter'), { onclick: () => store.setFilter({}) }) : '');
    }
    rest.hidden = !next;
  }

  /** @param {{key: string, id: number, run: number[]|null}} entry @param {string} unit */
  function rowFor(entry, unit) {
    const strike = kept.get(entry.id);
    const isSelected = entry.id === store.selected;
    const isEdited = editing?.id === entry.id ? editing.kind : '';
    const key = entry.run ? `${entry.run.length}` : `${strike.revision} ${strike.verdict} ${strike.note} ${strike.odd} ${isAside(strike)} ${isSelected} ${isEdited} ${unit} ${store.lead ?? ''}`;
    const old = rows.get(entry.key);
    if (old?.key === key) return old.node;
    const node = entry.run ? runRow(entry) : strikeRow(strike, isSelected, isEdited, unit);
    if (old) {
      const focused = old.node.contains(document.activeElement) ? /** @type {HTMLElement} */ (document.activeElement).dataset.act : null;
      old.node.replaceWith(node);
      if (focused) /** @type {HTMLElement|null} */ (node.querySelector(`[data-act="${focused}"]`))?.focus();
    }
    rows.set(entry.key, { node, key });
    return node;
  }

  /** @param {{key: string, id: number, run: number[]|null}} entry */
  function runRow(entry) {
    const run = /** @type {number[]} */ (entry.run);
    const times = { count: count(run.length), from: clockText(kept.get(run[run.length - 1]).time), to: clockText(kept.get(run[0]).time) };
    return el('tr', { class: 'run' }, el('td', { colspan: 10 }, mark('rejected'), ' ' + t('folded', times) + ' ',
      button(t('unfoldRun'), { onclick: () => { openRuns.add(entry.key); store.touch('strikes'); } })));
  }

  /** @param {any} strike @param {boolean} isSelected @param {string} isEdited @param {string} unit */
  function strikeRow(strike, isSelected, isEdited, unit) {
    const mode = strike.verdict === 'rejected' ? null : store.leadMode(strike);
    const values = Object.fromEntries((mode ? figuresOf(mode, unit) : []).map(([name, value, u]) => [name, parts(pair(value, u), decimal())]));
    const num = (/** @type {string} */ name, /** @type {string} */ cls) => el('td', { class: `num ${cls}` }, values[name] ? figure(values[name]) : '–');
    const select = el('button', { type: 'button', 'data-act': 'select', 'aria-label': t('strikeNo', { id: strike.id }), text: dress(String(strike.id)), onclick: () => openStrike(strike.id) });
    const verdict = [mark(isAside(strike) ? 'aside' : strike.verdict), el('span', { class: strike.verdict, text: ' ' + t(strike.verdict) }), strike.odd ? ', ' + t('odd') : ''];
    const reason = reasonWords(strike) + (isAside(strike) ? (strike.reasons?.length ? '; ' : '') + (strike.set_aside ? t('asideBecause', { reason: strike.set_aside }) : t('aside')) : '');
    return el('tr', { class: isSelected ? 'selected' : '', 'aria-current': isSelected ? 'true' : null },
      el('td', { class: 'd-time t', text: clockText(strike.time), title: strike.time }), el('th', { scope: 'row', class: 'i' }, select),
      el('td', { class: 'p' }, el('span', { class: 'part-name', text: [strike.part, strike.specimen].filter(Boolean).join(', ') })),
      el('td', { class: 'v' }, ...verdict), el('td', { class: 'r', title: reason, text: reason }),
      num('f', 'f'), num('q', 'q'), num('t60', 'd'), el('td', { class: 'num l', text: level(mode?.level_dbfs ?? strike.peak_dbfs, decimal()) }),
      el('td', { class: 'n' }, isEdited ? editForm(strike, isEdited) : acts(strike)));
  }

  /** @param {any} strike */
  function acts(strike) {
    const act = (/** @type {string} */ name, /** @type {string} */ text, /** @type {() => void} */ onclick) =>
      el('button', { type: 'button', class: 'plain', 'data-act': name, text, 'aria-label': `${text}, ${t('strikeNo', { id: strike.id })}`, onclick });
    const more = el('span', { class: 'more-acts' }, act('note', t('addNote'), () => edit(strike.id, 'note')),
      isAside(strike) ? act('aside', t('takeBack'), () => patch(strike.id, { set_aside: null })) : act('aside', t('setAside'), () => edit(strike.id, 'aside')),
      act('link', t('copyLink'), () => copyLink(strike.id)),
      el('a', { class: 'plain', href: `${BASE}/strikes/${strike.id}/wave`, download: '', text: t('saveWave'), 'aria-label': `${t('saveWave')}, ${t('strikeNo', { id: strike.id })}` }));
    return el('div', { class: 'acts' }, el('span', { class: 'text', text: strike.note ?? '', title: strike.note || null }), more);
  }

  /** @param {any} strike @param {string} kind */
  function editForm(strike, kind) {
    const input = el('input', { type: 'text', 'data-act': 'text', maxlength: kind === 'note' ? 2000 : 200, 'aria-label': t(kind === 'note' ? 'noteOf' : 'asideOf', { id: strike.id }), placeholder: t(kind === 'note' ? 'note' : 'asideOf', { id: strike.id }) });
    /** @type {HTMLInputElement} */ (input).value = kind === 'note' ? strike.note ?? '' : '';
    const form = el('form', { class: 'inline' }, input, el('button', { type: 'submit', class: 'framed', 'data-act': 'keep', text: t('keep') }));
    form.addEventListener('submit', (event) => {
      event.preventDefault();
      const text = /** @type {HTMLInputElement} */ (input).value.trim();
      patch(strike.id, kind === 'note' ? { note: text } : { set_aside: text });
    });
    input.addEventListener('keydown', (event) => {
      if (/** @type {KeyboardEvent} */ (event).key === 'Escape') stopEditing(strike.id);
    });
    return form;
  }

  /** @param {number} id @param {'note'|'aside'} kind */
  function edit(id, kind) {
    if (store.bench?.can_change === false) return say(t('lookOnly'));
    const strike = kept.get(id);
    if (!strike) return;
    if (kind === 'aside' && isAside(strike)) {
      patch(id, { set_aside: null });
      return;
    }
    editing = { id, kind };
    store.touch('strikes');
    store.flush();
    const input = /** @type {HTMLElement|null} */ (rows.get(`s${id}`)?.node.querySelector('input'));
    input?.focus();
    input?.scrollIntoView({ block: 'nearest' });
  }

  /** @param {number} id */
  function stopEditing(id) {
    editing = null;
    store.touch('strikes');
    store.flush();
    /** @type {HTMLElement|null} */ (rows.get(`s${id}`)?.node.querySelector('[data-act="select"]'))?.focus({ preventScroll: true });
  }

  /** @param {number} id @param {object} change */
  async function patch(id, change) {
    try {
      const strike = await send('PATCH', `/strikes/${id}`, change);
      if (strike) store.change(strike);
    } catch (cause) {
      say(t('changeRefused', { text: cause instanceof Error ? cause.message : String(cause) }));
    }
    if (editing?.id === id) stopEditing(id);
  }

  /** @param {number} id */
  async function copyLink(id) {
    const address = `${location.origin}${location.pathname}#strike=${id}`;
    try {
      await navigator.clipboard.writeText(address);
      say(t('linkCopied', { id }));
    } catch {
      say(address); // no clipboard here: the address can be read and copied by hand
    }
  }

  /** @param {string} text */
  function say(text) {
    setText(note, text);
    store.announce('say-text', text);
  }

  /** @param {number} id */
  async function openStrike(id) {
    if (!store.strikes.has(id)) {
      try {
        store.strikes.set(id, kept.get(id) ?? await get(`/strikes/${id}`));
      } catch {
        return say(t('notFound', { id }));
      }
    }
    store.select(id);
    if (location.hash.startsWith('#strike=') && location.hash !== `#strike=${id}`) history.replaceState(null, '', `#strike=${id}`);
  }

  new IntersectionObserver((seen) => {
    if (seen.some((s) => s.isIntersecting) && ids.length) fetchOlder();
  }, { root: scroll, rootMargin: '300px' }).observe(rest);

  store.addEventListener('open-strike', (event) => openStrike(/** @type {CustomEvent} */ (event).detail));
  store.addEventListener('edit-note', (event) => edit(/** @type {CustomEvent} */ (event).detail, 'note'));
  store.addEventListener('edit-aside', (event) => edit(/** @type {CustomEvent} */ (event).detail, 'aside'));
  store.addEventListener('final', (event) => {
    const strike = /** @type {CustomEvent} */ (event).detail;
    if (!strike.id || isStale || !matches(strike, store.filter) || kept.has(strike.id)) return;
    kept.set(strike.id, strike);
    ids.unshift(strike.id);
    if (ids.length > LIVE_MAX && scroll.scrollTop < 100) {
      for (const id of ids.splice(LIVE_MAX - PAGE)) kept.delete(id);
      next = `${BASE}/strikes${query({ ...words(), before: ids[ids.length - 1] })}`;
    }
  });
  store.addEventListener('changed', (event) => {
    const strike = /** @type {CustomEvent} */ (event).detail;
    if (kept.has(strike.id)) kept.set(strike.id, strike);
  });
  store.addEventListener('caught-up', () => {
    if (isStale) restart();
  });
  store.watch(['filter'], () => {
    if (!isStale) restart();
  });
  return store.watch(['strikes', 'selection', 'bench', 'filter', 'connection'], paint);
}

/** Runs of thumps that were no ring, folded into one entry each. @param {number[]} ids
 * @param {(id: number) => any} strikeOf @param {Set<string>} openRuns
 * @returns {{key: string, id: number, run: number[]|null}[]} */
export function foldRuns(ids, strikeOf, openRuns) {
  const isThump = (/** @type {number} */ id) => {
    const s = strikeOf(id);
    return s.verdict === 'rejected' && s.reasons.length === 1 && s.reasons[0] === 'not-a-ring' && !s.note && !isAside(s);
  };
  const out = [];
  for (let i = 0; i < ids.length; i++) {
    let end = i;
    while (end < ids.length && isThump(ids[end])) end++;
    const run = ids.slice(i, end);
    const key = `r${run[run.length - 1]}`; // its oldest: the key stands while the run grows
    if (run.length >= RUN_LEAST && !openRuns.has(key)) {
      out.push({ key, id: ids[i], run });
      i = end - 1;
    } else if (run.length) {
      for (const id of run) out.push({ key: `s${id}`, id, run: null });
      i = end - 1;
    } else {
      out.push({ key: `s${ids[i]}`, id: ids[i], run: null });
    }
  }
  return out;
}
