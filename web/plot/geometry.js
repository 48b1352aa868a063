// @ts-check
/* Geometry of the wedges and of plot axes: pure functions, no DOM. Pixels, seconds, dBFS. */

import { median } from '../format.js';

export const LOW_DBFS = -60;
const LENGTH_SHARE = 0.8; // of the pitch, for the median strike
const CUT_SLOTS = 1.9;
const LEAST_PX = 3;

/** @typedef {{t60: number, count: number}} Scale T60 whose wedge is 0.8 pitch long */

/** Height of a strike. @param {number|null|undefined} peakDbfs @param {number} full height of 0 dBFS */
export function wedgeHeight(peakDbfs, full) {
  const level = Math.min(0, Math.max(LOW_DBFS, peakDbfs ?? LOW_DBFS));
  return Math.max(LEAST_PX, ((level - LOW_DBFS) / -LOW_DBFS) * full);
}

/** Length of a strike: `isCut` when it would go over 1.9 slots. No T60: a post, length null.
 * @param {number|null|undefined} t60 @param {number} pitch @param {Scale|null} scale */
export function wedgeLength(t60, pitch, scale) {
  if (!t60 || !(t60 > 0) || !scale) return { length: null, isCut: false };
  const length = (t60 * LENGTH_SHARE * pitch) / scale.t60;
  const limit = CUT_SLOTS * pitch;
  return { length: Math.min(limit, Math.max(LEAST_PX, length)), isCut: length > limit };
}

/** The scale of a row: set at the first good strike, again at the third, then only when the median
 * leaves 0.5 to 1.25 of it. @param {Scale|null} scale @param {number[]} t60s of the good strikes
 * @returns {Scale|null} */
export function chooseScale(scale, t60s) {
  const n = t60s.length;
  if (n === 0) return scale;
  const middle = median(t60s);
  if (!scale || (scale.count < 3 && n >= 3)) return { t60: middle, count: n };
  const ratio = middle / scale.t60;
  return ratio < 0.5 || ratio > 1.25 ? { t60: middle, count: n } : scale;
}

/** Outline of a wedge whose base starts at (x, base): "x,y x,y x,y".
 * A cut one ends in an upright edge at its limit. @param {number} x @param {number} base
 * @param {number} height @param {number} length @param {number} fullLength without the cut */
export function wedgePoints(x, base, height, length, fullLength = length) {
  const points = [[x, base], [x, base - height]];
  if (fullLength > length) points.push([x + length, base - height * (1 - length / fullLength)]);
  points.push([x + length, base]);
  return points.map((p) => p.map((v) => Math.round(v * 100) / 100).join(',')).join(' ');
}

/** Where slot i of an unfolded row stands: lines of whole tens, a gap after each ten.
 * @param {number} i @param {number} perLine @param {number} pitch @param {number} lineHeight
 * @param {number} gap */
export function unfoldedSlot(i, perLine, pitch, lineHeight, gap) {
  const column = i % perLine;
  return { x: column * pitch + Math.floor(column / 10) * gap, y: Math.floor(i / perLine) * lineHeight };
}

/** How many slots, in whole tens, a line of this width takes: 10 … 60.
 * @param {number} width @param {number} pitch @param {number} gap */
export function slotsPerLine(width, pitch, gap) {
  const tens = Math.floor((width + gap) / (10 * pitch + gap));
  return 10 * Math.min(6, Math.max(1, tens));
}

/** The window [from, to) of slots that are near the view. @param {number} scroll @param {number} view
 * @param {number} pitch @param {number} total @param {number} margin slots kept on both sides */
export function slotsInView(scroll, view, pitch, total, margin = 12) {
  const from = Math.max(0, Math.floor(scroll / pitch) - margin);
  return { from, to: Math.min(total, Math.ceil((scroll + view) / pitch) + margin) };
}

/** Zoom of [min, max] by `factor` about `centre`, kept inside [lowest, highest].
 * @param {[number, number]} range @param {number} factor under 1 goes nearer @param {number} centre
 * @param {[number, number]} limits @returns {[number, number]} */
export function zoomRange([min, max], factor, centre, [lowest, highest]) {
  const low = centre - (centre - min) * factor;
  const high = centre + (max - centre) * factor;
  return [Math.max(lowest, low), Math.min(highest, high)];
}

/** Pan by `shift`, without leaving the limits. @param {[number, number]} range @param {number} shift
 * @param {[number, number]} limits @returns {[number, number]} */
export function panRange([min, max], shift, [lowest, highest]) {
  const by = Math.min(highest - max, Math.max(lowest - min, shift));
  return [min + by, max + by];
}

/** Round ticks over a range, about `wanted` of them. @param {number} min @param {number} max
 * @param {number} wanted */
export function ticks(min, max, wanted) {
  const rough = (max - min) / Math.max(1, wanted);
  const power = 10 ** Math.floor(Math.log10(rough));
  const step = [1, 2, 5, 10].map((m) => m * power).find((s) => s >= rough) || power * 10;
  const out = [];
  for (let k = Math.ceil(min / step - 1e-9); k * step <= max + step * 1e-9; k++) {
    out.push(Number((k * step).toPrecision(12)));
  }
  return out;
}
