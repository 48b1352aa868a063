// @ts-check
/* All state of the page. Data goes one way: stream or api -> store -> panel. A change names its
 * topics; panels that watch one are painted together in the next animation frame, and not at all
 * while the page is hidden.
 *
 * Topics: connection bench level ringing strikes forming selection row plot prefs filter sheet clock */

import { chooseScale } from './plot/geometry.js';
import { known, median, pair, placesOf, widerPlaces } from './format.js';

const ROW_MAX = 1000;
const KEPT_MAX = 4000; // strikes in memory; older ones are fetched again when wanted
const FINAL_HOLD_MS = 400; // a final reading stands at least so long before the next one forms over it
const FORMING_STALE_MS = 4000;
const STILL_DB = 6;
const STILL_MS = 95;

/** What is the person's, in this browser only. */
const PREFS = { theme: 'auto', language: null, sound: false, volume: 0.2, speak: false, letterKeys: true, figures: 't60', wide: false };

/** @returns {typeof PREFS} */
function loadPrefs() {
  try {
    return { ...PREFS, ...JSON.parse(localStorage.getItem('wane') || '{}') };
  } catch {
    return { ...PREFS }; // private mode, or not ours: the defaults do
  }
}

export class Store extends EventTarget {
  constructor() {
    super();
    /** @type {{state: 'connecting'|'open'|'catching'|'lost'|'full'|'tabs', since: number, nextTry: number|null, missing: number|null, asOf: number}} */
    this.connection = { state: 'connecting', since: Date.now(), nextTry: null, missing: null, asOf: Date.now() };
    /** @type {any} the object of GET /state */
    this.bench = null;
    /** @type {string|null} */
    this.version = null; // of the bench when this page was loaded
    /** @type {any} */
    this.level = null;
    this.clippedAt = -Infinity;
    this.levelShown = 0;
    this.levelAt = -Infinity;
    /** @type {{at: number, gap: number}|null} */
    this.inputBack = null;
    /** @type {any} a reading that the log could not take */
    this.unkept = null;
    /** @type {any} */
    this.forming = null;
    this.formingAt = 0;
    this.finalAt = -Infinity;
    /** @type {Map<number, any>} */
    this.strikes = new Map();
    /** @type {number[]} ids of the wedge row, oldest first */
    this.row = [];
    /** @type {import('./plot/geometry.js').Scale|null} */
    this.scale = null;
    this.unit = 's'; // of T60, kept for the series
    /** @type {number|null} */
    this.selected = null;
    this.isFollowing = true;
    /** @type {number|null} */
    this.pinned = null;
    /** @type {string|null} lead mode chosen by the person */
    this.lead = null;
    /** @type {number|null} slot under pointer or focus */
    this.hovered = null;
    this.newest = 0;
    this.isUnfolded = false;
    this.isWide = false;
    /** @type {{name: string, opener: Element|null}|null} */
    this.sheet = null;
    /** @type {Record<string, any>} selection words of the log */
    this.filter = {};
    this.prefs = loadPrefs();
    /** @type {Map<string, import('./format.js').Places>} widest figures of this series, by quantity */
    this.widest = new Map();
    /** @type {Set<string>} */
    this.dirty = new Set();
    /** @type {Set<{topics: string[], paint: () => void}>} */
    this.watchers = new Set();
    this.frame = 0;
  }

  /* ---- painting ---- */

  /** @param {string[]} topics @param {() => void} paint @returns {() => void} ends the watch */
  watch(topics, paint) {
    const watcher = { topics, paint };
    this.watchers.add(watcher);
    paint();
    return () => this.watchers.delete(watcher);
  }

  /** @param {string[]} topics */
  touch(...topics) {
    for (const topic of topics) this.dirty.add(topic);
    if (!this.frame) this.frame = requestAnimationFrame(() => this.flush());
  }

  flush() {
    this.frame = 0;
    const dirty = this.dirty;
    this.dirty = new Set();
    for (const { topics, paint } of this.watchers) {
      if (topics.some((topic) => dirty.has(topic))) paint();
    }
  }

  /** @param {string} name @param {any} detail something that must be acted on at once */
  announce(name, detail) {
    this.dispatchEvent(new CustomEvent(name, { detail }));
  }

  /* ---- strikes ---- */

  /** Final readings from the stream, in id order. @param {any} strike */
  addFinal(strike) {
    if (this.strikes.has(strike.id) && strike.id <= this.newest) return this.change(strike); // seen: no double
    this.put(strike);
    this.newest = Math.max(this.newest, strike.id);
    this.unkept = null;
    this.finalAt = performance.now();
    if (this.forming && !(strike.onset_s < this.forming.onset_s - 0.02)) this.forming = null;
    if (this.belongs(strike)) this.row.push(strike.id);
    if (this.row.length > ROW_MAX) this.row.splice(0, this.row.length - ROW_MAX);
    if (this.isFollowing) this.selected = strike.id;
    this.rescale();
    this.trim();
    this.touch('strikes', 'row', 'forming', 'selection');
    this.announce('final', strike);
  }

  /** A reading that was heard but not kept. @param {any} strike */
  addUnkept(strike) {
    this.unkept = strike;
    this.forming = null;
    this.finalAt = performance.now();
    this.touch('strikes', 'forming');
    this.announce('final', strike);
  }

  /** A strike that was noted, set aside, read again. @param {any} strike */
  change(strike) {
    const old = this.strikes.get(strike.id);
    if (old && old.revision > strike.revision) return;
    this.put(strike);
    this.rescale();
    this.touch('strikes', 'row', 'selection');
    this.announce('changed', strike);
  }

  /** @param {any} strike */
  put(strike) {
    this.strikes.set(strike.id, strike);
    const mode = this.leadMode(strike);
    if (!mode || strike.verdict === 'rejected') return;
    for (const [name, value, u] of figuresOf(mode, this.unit)) {
      const figure = pair(value, u);
      if (figure) this.widest.set(name, /** @type {any} */ (widerPlaces(this.widest.get(name) ?? null, placesOf(figure.value))));
    }
  }

  /** Fills the row: newest first, as GET /strikes gives them. @param {any[]} list */
  fillRow(list) {
    const ascending = [...list].reverse();
    this.widest.clear();
    this.scale = null;
    for (const strike of ascending) this.strikes.set(strike.id, strike);
    this.row = ascending.filter((s) => this.belongs(s)).map((s) => s.id);
    this.rescale();
    for (const strike of ascending) this.put(strike);
    this.newest = Math.max(this.newest, ...this.row, 0);
    if (this.isFollowing) this.selected = this.row.at(-1) ?? null;
    this.touch('strikes', 'row', 'selection', 'forming');
  }

  /** Of the open series, else of the input that is heard. @param {any} strike */
  belongs(strike) {
    const series = this.bench?.series;
    if (series) return strike.series === series.id;
    const name = this.bench?.input?.name;
    return !name || strike.input === name || strike.input === name.slice(name.lastIndexOf('/') + 1); // a recording's path
  }

  forget() {
    this.strikes.clear();
    this.row = [];
    this.newest = 0;
    this.selected = this.pinned = null;
    this.isFollowing = true;
    this.forming = this.unkept = this.scale = null;
    this.widest.clear();
    this.touch('strikes', 'row', 'selection', 'forming', 'filter');
  }

  trim() {
    if (this.strikes.size <= KEPT_MAX) return;
    const keep = new Set([...this.row, this.selected, this.pinned]);
    for (const id of [...this.strikes.keys()].sort((a, b) => a - b)) {
      if (this.strikes.size <= KEPT_MAX / 2) break;
      if (!keep.has(id)) this.strikes.delete(id);
    }
  }

  rescale() {
    const t60s = this.goodT60s();
    const scale = chooseScale(this.scale, t60s);
    if (scale === this.scale) return;
    this.scale = scale;
    this.unit = scale && scale.t60 < 0.1 ? 'ms' : 's';
    this.widest.clear();
    for (const id of this.row) this.put(this.strikes.get(id));
  }

  /** T60 of the lead mode of the row's good strikes that count. @returns {number[]} */
  goodT60s() {
    const out = [];
    for (const id of this.row) {
      const strike = this.strikes.get(id);
      if (!strike || strike.verdict !== 'good' || isAside(strike)) continue;
      const t60 = this.leadMode(strike)?.t60_s;
      if (known(t60)) out.push(t60);
    }
    return out;
  }

  medianT60() {
    const t60s = this.goodT60s();
    return t60s.length ? median(t60s) : null;
  }

  /* ---- lead mode ---- */

  /** Label of the lead mode for a strike: the person's, the part sheet's, the first good strike's
   * strongest; without a series this strike's strongest. @param {any} strike */
  leadLabel(strike) {
    if (this.lead) return this.lead;
    const series = this.bench?.series;
    if (series && strike?.series === series.id) {
      if (series.statistics?.lead) return series.statistics.lead;
      for (const id of this.row) {
        const other = this.strikes.get(id);
        if (other?.verdict === 'good' && !isAside(other)) return other.modes[0]?.label ?? null;
      }
    }
    return strike?.modes?.[0]?.label ?? null;
  }

  /** @param {any} strike */
  leadMode(strike) {
    const label = this.leadLabel(strike);
    return strike?.modes?.find((/** @type {any} */ m) => m.label === label) ?? null;
  }

  /** ↑ ↓ @param {number} step */
  stepLead(step) {
    const strike = this.shown().strike;
    const labels = (strike?.modes ?? []).map((/** @type {any} */ m) => m.label);
    if (!labels.length) return;
    const at = labels.indexOf(this.leadLabel(strike));
    this.setLead(labels[Math.min(labels.length - 1, Math.max(0, at + step))]);
  }

  /** @param {string|null} label */
  setLead(label) {
    this.lead = label;
    this.scale = null;
    this.rescale();
    this.touch('strikes', 'row', 'selection', 'forming');
  }

  /* ---- what is shown ---- */

  /** What the reading shows now. @returns {{strike: any, isForming: boolean}} */
  shown() {
    const isLatest = this.isFollowing || this.isWide;
    if (!isLatest) return { strike: this.strikes.get(this.selected ?? -1) ?? null, isForming: false };
    if (this.unkept) return { strike: this.unkept, isForming: false };
    const forming = this.forming;
    const now = performance.now();
    const isHeld = now - this.finalAt < FINAL_HOLD_MS && !(forming?.rang_s > FINAL_HOLD_MS / 1000);
    if (forming && !isHeld && now - this.formingAt < FORMING_STALE_MS) return { strike: forming, isForming: true };
    return { strike: this.strikes.get(this.row.at(-1) ?? -1) ?? null, isForming: false };
  }

  /** The strike that plots and comparison are of. */
  selectedStrike() {
    return this.strikes.get(this.selected ?? -1) ?? null;
  }

  /** @param {number|null} id */
  select(id) {
    this.selected = id;
    this.isFollowing = id === null || id === this.row.at(-1);
    if (id === null) this.selected = this.row.at(-1) ?? null;
    if (!this.bench?.series) this.lead = null;
    this.touch('selection', 'row', 'strikes', 'forming');
  }

  /** ← → along the row; from outside it, its nearest end. @param {number} step */
  stepSelection(step) {
    if (!this.row.length) return;
    const at = this.row.indexOf(this.selected ?? -1);
    const next = at < 0 ? this.row.length - 1 : Math.min(this.row.length - 1, Math.max(0, at + step));
    this.select(this.row[next]);
  }

  togglePin() {
    const strike = this.selectedStrike();
    if (!strike) return;
    this.pinned = this.pinned === strike.id ? null : strike.id;
    this.touch('selection', 'row');
  }

  /** More strikes that are still worth making, or null when nobody knows. */
  wanted() {
    const n = this.bench?.series?.statistics?.more;
    return known(n) ? n : null;
  }

  /* ---- from the stream ---- */

  /** @param {any} level */
  setLevel(level) {
    if (level.ringing !== this.level?.ringing) this.touch('ringing');
    this.level = level;
    this.connection.asOf = Date.now();
    const now = performance.now();
    if (level.clipped) this.clippedAt = now;
    /* In the noise nothing is to be seen at 20 Hz that is not at 10; a frame costs the same. */
    const isStill = !level.ringing && Math.abs((level.dbfs ?? 0) - this.levelShown) < STILL_DB;
    if (isStill && now - this.levelAt < STILL_MS) return;
    this.levelShown = level.dbfs ?? 0;
    this.levelAt = now;
    this.touch('level');
  }

  /** @param {any} forming */
  setForming(forming) {
    this.forming = forming;
    this.formingAt = performance.now();
    this.touch('forming');
  }

  /** @param {any} bench */
  setBench(bench) {
    const before = this.bench;
    if (bench.series && !bench.series.statistics && before?.series?.id === bench.series.id) {
      bench = { ...bench, series: { ...before.series, ...bench.series } }; // /state leaves them out
    }
    this.bench = bench;
    this.version ??= bench.version;
    if (bench.level && !this.level) this.level = bench.level;
    this.touch('bench', 'level');
    const isOther = before && (before.series?.id !== bench.series?.id || before.input?.name !== bench.input?.name);
    if (isOther) this.announce('row-changed', null);
  }

  /** @param {any} input */
  setInput(input) {
    const before = this.bench?.input;
    if (before?.state === 'lost' && input.state === 'listening' && before.since) {
      this.inputBack = { at: Date.now(), gap: (Date.parse(input.since ?? '') - Date.parse(before.since)) / 1000 };
    }
    if (input.state !== 'listening') this.forming = null;
    this.setBench({ ...this.bench, input });
    this.touch('forming');
  }

  /** @param {Partial<Store['connection']>} change */
  setConnection(change) {
    this.connection = { ...this.connection, ...change };
    this.touch('connection');
  }

  /* ---- the person's ---- */

  /** @param {keyof typeof PREFS} key @param {any} value */
  setPref(key, value) {
    this.prefs = { ...this.prefs, [key]: value };
    try {
      localStorage.setItem('wane', JSON.stringify(this.prefs));
    } catch { /* not kept: it holds for this visit */ }
    this.touch('prefs', 'strikes', 'forming', 'row', 'selection');
  }

  /** @param {string|null} name null closes it */
  openSheet(name) {
    if (name === this.sheet?.name) name = null;
    const opener = this.sheet?.opener ?? document.activeElement;
    this.sheet = name ? { name, opener } : null;
    if (!name && opener instanceof HTMLElement) opener.focus();
    this.touch('sheet');
  }

  /** @param {Record<string, any>} filter */
  setFilter(filter) {
    this.filter = filter;
    this.touch('filter');
  }
}

/** @param {any} strike */
export function isAside(strike) {
  return strike.set_aside !== null && strike.set_aside !== undefined;
}

/** The figures of a mode by name: value, u. @param {any} mode @param {string} unit of T60
 * @returns {[string, number, number][]} */
export function figuresOf(mode, unit) {
  const k = unit === 'ms' ? 1000 : 1;
  return [
    ['q', mode.q, mode.q_u],
    ['f', mode.f_hz, mode.f_u_hz],
    ['t60', mode.t60_s * k, mode.t60_u_s * k],
    ['decay', mode.decay_per_s, mode.decay_u_per_s],
  ];
}
