// @ts-check
/* What each plot draws, from the bench's numbers to columns, marks and a caption. Pure functions;
 * words come in ready. Times are seconds after the onset, levels dBFS. */

import { dress, known, level, NARROW, pair, pairAny, pairText, significant, span } from '../format.js';

const DB_PER_NEPER = 20 / Math.LN10;

/** @typedef {{name: string, colour: string, data: (number|null)[], width: number, dash?: number[], fillTo?: number}} Line */
/** @typedef {{kind: 'label'|'flag'|'band'|'dots'|'upright'|'bracket'|'level', x0?: number, x1?: number, y0?: number, y1?: number, text?: string, colour?: string, align?: CanvasTextAlign}} Mark */
/** @typedef {{sub: string, caption: string, x: number[], lines: Line[], xRange: [number, number], yRange: [number, number], xUnit: string, yUnit: string, xDigits: number, yDigits: number, marks: Mark[], residual?: Spec, hidesX?: boolean, yStep?: number, view?: [number, number]}} Spec */
/** @typedef {(key: string, values?: Record<string, any>) => string} Words */

/** Colour class of a mode by its place among the strike's modes. @param {any[]} modes
 * @param {string} label */
export function modeColour(modes, label) {
  const i = modes.findIndex((m) => m.label === label);
  return i < 0 || i > 4 ? 'trace' : `m${i + 1}`;
}

/** One ascending x for several curves, null where one has no point.
 * @param {{x: number[], y: (number|null)[]}[]} curves */
export function joinColumns(curves) {
  const x = [...new Set(curves.flatMap((c) => c.x))].sort((a, b) => a - b);
  const at = new Map(x.map((v, i) => [v, i]));
  const columns = curves.map((c) => {
    /** @type {(number|null)[]} */
    const column = new Array(x.length).fill(null);
    c.x.forEach((v, i) => { column[/** @type {number} */ (at.get(v))] = c.y[i]; });
    return column;
  });
  return { x, columns };
}

/** @param {number} value @param {number} step */
const floorTo = (value, step) => Math.floor(value / step) * step;

/** @param {any} plot @param {any} strike @param {string|null} lead @param {Words} t @param {string} d
 * @returns {Spec} */
export function decaySpec(plot, strike, lead, t, d) {
  const modes = strike.modes ?? [];
  const curves = [];
  /** @type {Omit<Line, 'data'>[]} */
  const styles = [];
  /** @type {Mark[]} */
  const marks = [];
  const end = Math.max(0.001, plot.window_s?.[1] ?? plot.to_s, ...plot.decay.map((/** @type {any} */ m) => m.fit_t_s?.[1] ?? 0));
  for (const m of plot.decay) {
    curves.push({ x: m.t_s, y: m.db });
    styles.push({ name: m.label, colour: modeColour(modes, m.label), width: 0.8 });
  }
  for (const m of plot.decay) {
    if (!m.fit_t_s || !known(m.fit_db?.[0])) continue;
    const [t0, t1] = untilNoise(m);
    const db1 = m.fit_db[0] + ((m.fit_db[1] - m.fit_db[0]) * (t1 - t0)) / (m.fit_t_s[1] - t0 || 1);
    curves.push({ x: [t0, t1], y: [m.fit_db[0], db1] });
    styles.push({ name: `${m.label} fit`, colour: modeColour(modes, m.label), width: m.label === lead ? 2.6 : 1.6 });
    const isLong = t1 > 0.8 * end;
    const share = isLong ? 1 : 0.55;
    marks.push({ kind: 'label', x0: t0 + (t1 - t0) * share, y0: m.fit_db[0] + (db1 - m.fit_db[0]) * share, text: m.label, colour: modeColour(modes, m.label), align: 'left' });
  }
  const noises = plot.decay.map((/** @type {any} */ m) => m.noise_db).filter(known);
  const noise = noises.length ? noises[0] : null; // the strongest mode's
  const tops = plot.decay.map((/** @type {any} */ m) => m.fit_db?.[0]).filter(known);
  const low = floorTo(Math.max(-240, Math.min(...noises.map((n) => n - 6), -60)), 30);
  if (noise !== null) marks.unshift({ kind: 'dots', x0: -Infinity, x1: Infinity, y0: low, y1: noise });
  const { x, columns } = joinColumns(curves);
  const mode = modes.find((/** @type {any} */ m) => m.label === lead) ?? modes[0];
  const rate = mode && pair(mode.decay_per_s * DB_PER_NEPER, known(mode.decay_u_per_s) ? mode.decay_u_per_s * DB_PER_NEPER : null);
  const own = plot.decay.find((/** @type {any} */ m) => m.label === mode?.label);
  const fall = own?.fit_db ? own.fit_db[0] - Math.max(own.fit_db[1], own.noise_db ?? -Infinity) : null;
  return {
    sub: t('decaySub'), caption: mode ? t('capDecay', { label: mode.label, rate: pairText(rate, '', d), fall: known(fall) && fall > 0 ? significant(fall, 2, d) : null }) : t('noModes'),
    x, lines: styles.map((s, i) => ({ ...s, data: columns[i] })), xRange: [0, end], yRange: [low, Math.max(0, Math.ceil(Math.max(...tops, 0) / 10) * 10)],
    xUnit: t('afterOnset'), yUnit: t('dbfs'), xDigits: 3, yDigits: 1, marks: spreadLabels(marks, (0 - low) / 9), residual: residualSpec(plot, end, t), hidesX: true, yStep: 30, view: brief(mode, [0, end], 1.4),
  };
}

/** A ring that is short beside its window, or beside the time before it, is first shown near: the
 * whole is one key away. @param {any} mode @param {[number, number]} range @param {number} share of
 * T60 shown @returns {[number, number]|undefined} */
function brief(mode, [from, to], share) {
  const wanted = known(mode?.t60_s) ? mode.t60_s * share : to;
  const end = wanted < 0.4 * to ? wanted : to;
  const start = Math.max(from, -0.25 * end);
  return end < to || start > from ? [start, end] : undefined;
}

/** Span of a mode's fit, ended where it meets its noise. @param {any} m @returns {[number, number]} */
function untilNoise(m) {
  const [t0, t1] = m.fit_t_s;
  const [db0, db1] = m.fit_db;
  if (!known(m.noise_db) || db1 >= m.noise_db || db0 <= m.noise_db) return [t0, t1];
  return [t0, t0 + ((t1 - t0) * (db0 - m.noise_db)) / (db0 - db1)];
}

/** Words at the right edge that would cover each other are moved apart. @param {Mark[]} marks
 * @param {number} least distance */
export function spreadLabels(marks, least) {
  const labels = marks.filter((m) => m.kind === 'label').sort((a, b) => (b.y0 ?? 0) - (a.y0 ?? 0));
  const ends = labels.filter((m) => (m.x0 ?? 0) >= 0.8 * Math.max(...labels.map((l) => l.x0 ?? 0)));
  const edge = Math.max(...ends.map((m) => m.x0 ?? 0));
  ends.forEach((m, i) => {
    m.x0 = edge;
    if (i > 0) m.y0 = Math.min(m.y0 ?? 0, (ends[i - 1].y0 ?? 0) - least);
  });
  return marks;
}

/** @param {any} plot @param {number} end @param {Words} t @returns {Spec} */
function residualSpec(plot, end, t) {
  const values = plot.residual?.over_noise ?? [];
  const inside = values.filter((/** @type {any} */ v, /** @type {number} */ i) => known(v) && plot.residual.t_s[i] >= (plot.window_s?.[0] ?? 0)).sort((/** @type {number} */ a, /** @type {number} */ b) => a - b);
  const most = Math.max(2, 1.3 * (inside[Math.floor(inside.length * 0.97)] ?? 0)); // the blow itself may go over the top
  return {
    sub: '', caption: '', x: plot.residual?.t_s ?? [], lines: [{ name: t('residual'), colour: 'trace', data: values, width: 1 }],
    xRange: [0, end], yRange: [0, most > 4 ? Math.ceil(most) : 3], yStep: most > 4 ? undefined : 1, xUnit: t('afterOnset'), yUnit: t('residual'), xDigits: 3, yDigits: 2,
    marks: [{ kind: 'band', x0: -Infinity, x1: Infinity, y0: 0, y1: 1, colour: 'sunk' }, { kind: 'level', y0: 1, colour: 'edge' }],
  };
}

/** Two strikes' lead modes, both from 0 dB. @param {any} plot @param {any} other @param {any} strike
 * @param {any} pinned @param {string|null} lead @param {Words} t @param {string} d @returns {Spec} */
export function compareSpec(plot, other, strike, pinned, lead, t, d) {
  const lineOf = (/** @type {any} */ p) => {
    const m = p.decay.find((/** @type {any} */ c) => c.label === lead) ?? p.decay[0];
    return m?.fit_t_s ? { x: m.fit_t_s, y: m.fit_db.map((/** @type {number} */ v) => v - m.fit_db[0]) } : { x: [], y: [] };
  };
  const a = lineOf(plot);
  const b = lineOf(other);
  const { x, columns } = joinColumns([a, b]);
  const end = Math.max(0.001, ...a.x, ...b.x);
  const low = floorTo(Math.min(-20, ...a.y, ...b.y), 20);
  /** @type {Mark[]} */
  const marks = [[a, strike.id, 'm1'], [b, pinned.id, 'm2']].filter(([c]) => c.x.length)
    .map(([c, id, colour]) => ({ kind: 'label', x0: c.x[1], y0: c.y[1], text: String(id), colour, align: 'left' }));
  return {
    sub: t('decayAgainst', { id: pinned.id, label: lead ?? '' }), caption: compareCaption(strike, pinned, lead, t, d), x,
    lines: [{ name: t('strikeNo', { id: strike.id }), colour: 'm1', data: columns[0], width: 2.4 }, { name: t('strikeNo', { id: pinned.id }), colour: 'm2', data: columns[1], width: 2.4, dash: [7, 4] }],
    xRange: [0, end], yRange: [low, 0], xUnit: t('afterOnset'), yUnit: t('dbBoth'), xDigits: 3, yDigits: 1, marks,
  };
}

/** Difference of two independent readings of one mode. @param {any} a @param {any} b
 * @param {string} key @param {string} uKey */
export function difference(a, b, key, uKey) {
  if (!known(a?.[key]) || !known(b?.[key]) || !known(a[uKey]) || !known(b[uKey])) return null;
  return { value: a[key] - b[key], u: Math.hypot(a[uKey], b[uKey]) };
}

/** @param {any} strike @param {string|null} label */
const modeOf = (strike, label) => strike.modes?.find((/** @type {any} */ m) => m.label === label) ?? null;

/** @param {any} strike @param {any} pinned @param {string|null} lead @param {Words} t @param {string} d */
function compareCaption(strike, pinned, lead, t, d) {
  const signed = (/** @type {string} */ key, /** @type {string} */ uKey, /** @type {string} */ unit) => {
    const diff = difference(modeOf(strike, lead), modeOf(pinned, lead), key, uKey);
    return diff ? (diff.value > 0 ? '+' : '') + pairText(pairAny(diff.value, diff.u), unit, d) : '–';
  };
  return t('capCompare', { id: strike.id, other: pinned.id, dq: signed('q', 'q_u', ''), df: signed('f_hz', 'f_u_hz', 'Hz') });
}

/** @param {any} plot @param {any} strike @param {Words} t @param {string} d @returns {Spec|null} */
export function nearSpec(plot, strike, t, d) {
  const near = plot.near;
  if (!near?.f_hz?.length) return null;
  const from = near.f_hz[0];
  const to = near.f_hz[near.f_hz.length - 1];
  const inside = (strike.modes ?? []).filter((/** @type {any} */ m) => m.f_hz >= from && m.f_hz <= to);
  const top = Math.max(...near.db.filter(known));
  const high = top > -40 ? Math.max(0, Math.ceil((top + 8) / 10) * 10) : Math.ceil((top + 15) / 20) * 20;
  const low = floorTo(Math.max(Math.min(...near.db.filter(known)), top - 80), 20);
  const lead = inside.find((/** @type {any} */ m) => m.label === near.label) ?? inside[0];
  const [a, b] = [...inside].sort((p, q) => p.f_hz - q.f_hz);
  const split = inside.length === 2 ? pair(b.f_hz - a.f_hz, Math.hypot(a.f_u_hz, b.f_u_hz)) : null;
  const caption = split ? t('capNear', { split: pairText(split, '', d) }) : lead ? t('capNearOne', { f: pairText(pair(lead.f_hz, lead.f_u_hz), 'Hz', d) }) : '';
  return {
    sub: t('around', { label: near.label }), caption, x: near.f_hz,
    lines: [{ name: t('strike'), colour: 'trace', data: near.db, width: 1, fillTo: low }, { name: t('fitWord'), colour: modeColour(strike.modes, near.label), data: near.fit_db ?? [], width: 1.8 }],
    xRange: [from, to], yRange: [low, high], xUnit: 'Hz', yUnit: t('dbfs'), xDigits: 6, yDigits: 1,
    marks: inside.map((/** @type {any} */ m) => ({ kind: 'flag', x0: m.f_hz, y0: peakNear(near.f_hz, near.db, m.f_hz) ?? m.level_dbfs, text: m.label, colour: modeColour(strike.modes, m.label) })),
  };
}

/** Level of a curve at x. @param {number[]} x @param {(number|null)[]} y @param {number} at */
export function peakNear(x, y, at) {
  const i = nearestIndex(x, at);
  const around = y.slice(Math.max(0, i - 2), i + 3).filter(known);
  return around.length ? Math.max(...around) : null;
}

/** Index of the value nearest to `at` in an ascending list. @param {ArrayLike<number>} x
 * @param {number} at */
export function nearestIndex(x, at) {
  let low = 0;
  let high = x.length - 1;
  while (high - low > 1) {
    const middle = (low + high) >> 1;
    if (x[middle] <= at) low = middle;
    else high = middle;
  }
  return high >= 0 && Math.abs(x[high] - at) < Math.abs(x[low] - at) ? high : low;
}

/** @param {any} plot @param {any} strike @param {Words} t @param {string} d @returns {Spec} */
export function wideSpec(plot, strike, t, d) {
  const s = plot.spectrum;
  const modes = strike.modes ?? [];
  const highest = Math.max(0, ...modes.map((/** @type {any} */ m) => m.f_hz));
  const nyquist = plot.rate_hz / 2;
  const to = Math.min(nyquist, Math.max(1000, highest * 1.45));
  const seen = s.db.filter((/** @type {any} */ v, /** @type {number} */ i) => known(v) && s.f_hz[i] <= to);
  const top = Math.max(-200, ...seen);
  const low = floorTo(Math.max(Math.min(...seen, -60), top - 140), 20);
  const high = Math.min(20, Math.max(0, Math.ceil((top + 8) / 10) * 10));
  const tone = (strike.tones ?? [])[0];
  /** @type {Mark[]} */
  const marks = modes.map((/** @type {any} */ m) => ({ kind: 'flag', x0: m.f_hz, y0: peakNear(s.f_hz, s.db, m.f_hz) ?? m.level_dbfs, text: m.label, colour: modeColour(modes, m.label) }));
  if (tone) marks.push({ kind: 'label', x0: tone.f_hz, y0: peakNear(s.f_hz, s.db, tone.f_hz) ?? tone.level_dbfs, text: t('hum'), colour: 'ink2', align: 'left' });
  const hum = tone ? significant(tone.f_hz, 3, d) + NARROW + 'Hz' : null;
  return {
    sub: t('wideSpectrum'), caption: !modes.length ? t('noModes') : modes.length === 1 && !hum ? t('capWideOne') : t('capWide', { count: modes.length, hum }), x: s.f_hz,
    lines: [{ name: t('strike'), colour: 'trace', data: s.db, width: 1, fillTo: low }, ...(s.noise_db ? [{ name: t('noiseWord'), colour: 'edge', data: s.noise_db, width: 0.8, dash: [2, 2] }] : [])],
    xRange: [0, to], yRange: [low, high], xUnit: 'Hz', yUnit: t('dbfs'), xDigits: 5, yDigits: 1, marks,
  };
}

/** @param {any} plot @param {any} strike @param {Words} t @param {string} d @param {any} lead mode,
 * for the first view @returns {Spec} */
export function traceSpec(plot, strike, t, d, lead = null) {
  const { t0_s, dt_s, min, max } = plot.trace;
  const x = min.map((/** @type {number} */ _, /** @type {number} */ i) => t0_s + (i + 0.5) * dt_s);
  const most = Math.max(1e-6, ...max.map(Math.abs), ...min.map(Math.abs));
  const reach = most * 1.15;
  const [w0, w1] = plot.window_s ?? [null, null];
  /** @type {Mark[]} */
  const marks = [{ kind: 'band', x0: -Infinity, x1: 0, y0: -Infinity, y1: Infinity, colour: 'sunk' }, { kind: 'upright', x0: 0, text: t('onset'), colour: 'ink' }];
  if (known(w0) && known(w1)) marks.push({ kind: 'bracket', x0: w0, x1: w1, text: t('window', { span: span(w1 - w0, d) }), colour: 'ink' });
  return {
    sub: t('traceSub'), caption: t('capTrace', { peak: `${level(strike.peak_dbfs, d)}${NARROW}dBFS`, span: known(w0) && known(w1) ? span(w1 - w0, d) : '–' }), x,
    lines: [{ name: 'max', colour: 'trace', data: max, width: 1 }, { name: 'min', colour: 'trace', data: min, width: 1 }],
    xRange: [plot.from_s, plot.to_s], yRange: [-reach, reach], xUnit: t('afterOnset'), yUnit: t('fullScale'), xDigits: 4, yDigits: 3, marks,
    view: brief(lead, [plot.from_s, plot.to_s], 1),
  };
}

/** Columns of a plot as a table, thinned to `most` rows. @param {Spec} spec @param {number} most */
export function tableOf(spec, most) {
  const step = Math.max(1, Math.ceil(spec.x.length / most));
  const rows = [];
  for (let i = 0; i < spec.x.length; i += step) rows.push([spec.x[i], ...spec.lines.map((l) => l.data[i] ?? null)]);
  return { head: [spec.xUnit, ...spec.lines.map((l) => l.name)], rows, step };
}

/** @param {Spec} spec */
export function csvOf(spec) {
  const { head, rows } = tableOf(spec, Infinity);
  const quote = (/** @type {string} */ s) => (/[",\n]/.test(s) ? `"${s.replace(/"/g, '""')}"` : s);
  return [head.map((h, i) => quote(i ? `${h} (${spec.yUnit})` : h)), ...rows.map((r) => r.map((v) => v ?? ''))].map((r) => r.join(',')).join('\n') + '\n';
}

/** "at 0.620 s: 1a −21.3" @param {Spec} spec @param {number} x @param {string} d @param {Words} t */
export function valueText(spec, x, d, t) {
  const i = nearestIndex(spec.x, x);
  const near = (/** @type {(number|null)[]} */ data) => {
    for (let k = 0; k < 60; k++) {
      for (const j of [i - k, i + k]) if (known(data[j])) return data[j];
    }
    return null;
  };
  const values = spec.lines.filter((l) => !l.name.endsWith(' fit')).map((l) => `${l.name} ${level(near(l.data), d, spec.yDigits)}`);
  const unit = spec.xUnit === 'Hz' ? 'Hz' : 's';
  return `${t('at', { x: dress(Number(x).toPrecision(spec.xDigits).replace(/e.*/, ''), d) + NARROW + unit })}: ${values.join(' · ')}`;
}
