// @ts-check
/* Figures as text: a value beside its standard uncertainty, levels, times. Pure functions, no DOM.
 * Rounding is done on decimal strings of at most 15 digits, so that 0.145 rounds half up to 0.15. */

export const NARROW = '\u202f'; // between groups, around the plus-minus, before a unit
export const MINUS = '\u2212';
export const DASH = '\u2013'; // "not known"
export const PM = '\u00b1';

/** @typedef {{ch: string, kind: 'sure'|'wane'|'empty'|'point'|'gap'|'pad'|'dash'}} Cell */
/** @typedef {{int: number, dec: number}} Places digits before and after the decimal sign */

/** Is it a number that can be shown? @param {unknown} x @returns {x is number} */
export function known(x) {
  return typeof x === 'number' && Number.isFinite(x);
}

/** |x| / 10^place as a whole number, half up. @param {number} x @param {number} place */
function wholeAt(x, place) {
  const scaled = place > 0 ? Math.abs(x) / 10 ** place : Math.abs(x) * 10 ** -place;
  return Math.floor(Number(scaled.toPrecision(15)) + 0.5);
}

/** Place (power of ten) of the last of `digits` significant digits of u after rounding.
 * @param {number} u greater than zero @param {number} digits */
export function placeOf(u, digits) {
  const place = Math.floor(Math.log10(Number(u.toPrecision(12)))) - digits + 1;
  return wholeAt(u, place) >= 10 ** digits ? place + 1 : place;
}

/** Decimal text of x rounded at `place`, zeros kept, with a plain '.' and '-', no groups.
 * @param {number} x @param {number} place */
export function plainAt(x, place) {
  let digits = String(BigInt(wholeAt(x, place)));
  if (place > 0 && digits !== '0') digits += '0'.repeat(place);
  const sign = x < 0 && /[1-9]/.test(digits) ? '-' : '';
  if (place >= 0) return sign + digits;
  digits = digits.padStart(1 - place, '0');
  return sign + digits.slice(0, place) + '.' + digits.slice(place);
}

/** Grouping, minus and decimal sign for the screen. @param {string} plain @param {string} decimal */
export function dress(plain, decimal = '.') {
  const negative = plain.startsWith('-');
  const [whole, rest] = (negative ? plain.slice(1) : plain).split('.');
  const grouped = whole.length >= 5 ? whole.replace(/\B(?=(\d{3})+$)/g, NARROW) : whole;
  return (negative ? MINUS : '') + grouped + (rest === undefined ? '' : decimal + rest);
}

/** A value and its u in the right number of digits, plain text.
 * null when nothing may be shown: value unknown, or u larger than the value.
 * u is null where the uncertainty is not known (the value then has four significant digits).
 * @param {unknown} value @param {unknown} u @param {number} digits of u: 2, or 1 while forming
 * @returns {{value: string, u: string|null, place: number}|null} */
export function pair(value, u, digits = 2) {
  if (!known(value)) return null;
  if (!known(u) || u <= 0) {
    const place = value === 0 ? 0 : Math.min(0, Math.floor(Math.log10(Math.abs(value))) - 3);
    return { value: plainAt(value, place), u: null, place };
  }
  if (u > Math.abs(value)) return null;
  const place = placeOf(u, digits);
  return { value: plainAt(value, place), u: plainAt(u, place), place };
}

/** As pair, but for differences, where u may well be larger than the value.
 * @param {unknown} value @param {unknown} u */
export function pairAny(value, u) {
  if (!known(value) || !known(u) || u <= 0) return null;
  const place = placeOf(u, 2);
  return { value: plainAt(value, place), u: plainAt(u, place), place };
}

/** "881.7418 ± 0.0011 Hz". @param {{value: string, u: string|null}|null} p
 * @param {string} unit may be empty @param {string} decimal */
export function pairText(p, unit = '', decimal = '.') {
  if (!p) return DASH;
  const tail = unit ? NARROW + unit : '';
  if (p.u === null) return dress(p.value, decimal) + tail;
  return `${dress(p.value, decimal)}${NARROW}${PM}${NARROW}${dress(p.u, decimal)}${tail}`;
}

/** Digits before and after the sign. @param {string} plain @returns {Places} */
export function placesOf(plain) {
  const [whole, rest] = plain.replace('-', '').split('.');
  return { int: whole.length, dec: rest ? rest.length : 0 };
}

/** Places wide enough for both. @param {Places|null} a @param {Places|null} b @returns {Places|null} */
export function widerPlaces(a, b) {
  if (!a || !b) return a || b;
  return { int: Math.max(a.int, b.int), dec: Math.max(a.dec, b.dec) };
}

/** The cells of a figure. The last two digits wane (one while forming); what is not known yet, up
 * to `places`, is an empty cell; a whole part shorter than `places` is padded on its left, so that
 * no digit changes its place between forming and final.
 * @param {{value: string, u: string|null, place: number}|null} p
 * @param {{forming?: boolean, places?: Places|null, decimal?: string}} options
 * @returns {Cell[]} */
export function cells(p, { forming = false, places = null, decimal = '.' } = {}) {
  if (!p) return [{ ch: DASH, kind: 'dash' }];
  const negative = p.value.startsWith('-');
  const [whole, rest = ''] = p.value.replace('-', '').split('.');
  const intLength = Math.max(whole.length, places ? places.int : 0);
  const decLength = Math.max(rest.length, forming && places ? places.dec : 0);
  /* Digits right of the place of u are not known: zeros that only hold the place while forming. */
  const unknownInt = forming && p.place > 0 ? Math.min(p.place, whole.length - 1) : 0;
  const digits = whole + rest;
  const waning = p.u === null ? 0 : forming ? 1 : 2;
  const lastKnown = digits.length - unknownInt;
  const isGrouped = intLength >= 5; // by the field, so that its width does not follow the value
  /** @type {Cell[]} */
  const out = [];
  if (negative) out.push({ ch: MINUS, kind: 'sure' });
  for (let i = whole.length - intLength; i < whole.length; i++) {
    if (isGrouped && i > whole.length - intLength && (whole.length - i) % 3 === 0) out.push({ ch: NARROW, kind: 'gap' });
    out.push(i < 0 ? { ch: '0', kind: 'pad' } : cellAt(digits, i, lastKnown, waning));
  }
  if (decLength > 0) {
    const wanes = whole.length - 1 >= lastKnown - waning && rest.length > 0 && waning > 0;
    out.push({ ch: decimal, kind: wanes || rest.length === 0 ? 'point' : 'sure' });
    for (let i = 0; i < decLength; i++) {
      out.push(i < rest.length ? cellAt(digits, whole.length + i, lastKnown, waning)
        : { ch: '0', kind: 'empty' });
    }
  }
  return out;
}

/** @param {string} digits @param {number} i @param {number} lastKnown @param {number} waning
 * @returns {Cell} */
function cellAt(digits, i, lastKnown, waning) {
  if (i >= lastKnown) return { ch: '0', kind: 'empty' };
  return { ch: digits[i], kind: i >= lastKnown - waning ? 'wane' : 'sure' };
}

/** Sure and waning parts of a table figure, dressed. @param {ReturnType<typeof pair>} p
 * @param {string} decimal @returns {{sure: string, wane: string}} */
export function parts(p, decimal = '.') {
  if (!p) return { sure: DASH, wane: '' };
  const text = dress(p.value, decimal);
  if (p.u === null) return { sure: text, wane: '' };
  let at = text.length;
  for (let digits = 0; at > 0 && digits < 2; at--) {
    if (/\d/.test(text[at - 1])) digits++;
  }
  if (at > 0 && text[at - 1] === decimal) at--;
  return { sure: text.slice(0, at), wane: text.slice(at) };
}

const SUPERSCRIPT = '⁰¹²³⁴⁵⁶⁷⁸⁹';

/** Power of ten of a small figure such as zeta. @param {number} value */
export function exponentOf(value) {
  return value === 0 ? 0 : Math.floor(Math.log10(Math.abs(value)));
}

/** " × 10⁻⁴" @param {number} exponent */
export function powerText(exponent) {
  const digits = String(Math.abs(exponent)).replace(/\d/g, (d) => SUPERSCRIPT[Number(d)]);
  return `${NARROW}×${NARROW}10${exponent < 0 ? '⁻' : ''}${digits}`;
}

/** One decimal. @param {unknown} dbfs @param {string} decimal @param {number} decimals */
export function level(dbfs, decimal = '.', decimals = 1) {
  return known(dbfs) ? dress(plainAt(dbfs, -decimals), decimal) : DASH;
}

/** A plain figure to `digits` significant digits. @param {unknown} x @param {number} digits
 * @param {string} decimal */
export function significant(x, digits, decimal = '.') {
  if (!known(x)) return DASH;
  if (x === 0) return '0';
  const place = placeOf(Math.abs(x), digits);
  return dress(plainAt(x, Math.min(place, 0)), decimal);
}

/** A span of time for a sentence: 21 ms, 0.62 s. @param {unknown} seconds @param {string} decimal */
export function span(seconds, decimal = '.') {
  if (!known(seconds)) return DASH;
  if (Math.abs(seconds) < 0.1) return significant(seconds * 1000, 2, decimal) + NARROW + 'ms';
  return significant(seconds, 2, decimal) + NARROW + 's';
}

/** Whole number with groups. @param {number} n */
export function count(n) {
  return dress(String(Math.round(n)));
}

/** @param {number[]} sorted numbers, not empty */
export function median(sorted) {
  const x = [...sorted].sort((a, b) => a - b);
  const half = x.length >> 1;
  return x.length % 2 ? x[half] : (x[half - 1] + x[half]) / 2;
}
