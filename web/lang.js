// @ts-check
/* The page's words in the language of the person. English is always there, as the fallback. */

import en from './lang/en.js';

/** Language files beside this one. A third is a file and a word here. */
export const LANGUAGES = ['en', 'de'];

/** @type {Record<string, any>} */
let words = en;

/** @param {string|null} chosen null: as the browser says */
export async function loadLanguage(chosen) {
  const wanted = [chosen, ...navigator.languages].filter(Boolean)
    .map((tag) => String(tag).slice(0, 2).toLowerCase()).find((tag) => LANGUAGES.includes(tag));
  words = wanted && wanted !== 'en' ? (await import(`./lang/${wanted}.js`)).default : en;
  document.documentElement.lang = words.code;
}

export function decimal() {
  return words.decimal;
}

/** The entry as it stands in the file (lists, groups). @param {string} key @returns {any} */
export function entry(key) {
  const pick = (/** @type {any} */ from) => key.split('.').reduce((at, part) => at?.[part], from);
  return pick(words) ?? pick(en) ?? key;
}

/** A sentence with its {names} filled in; of a list, the first whose names are all known.
 * @param {string} key @param {Record<string, string|number|null|undefined>} values */
export function t(key, values = {}) {
  return fill(entry(key), values);
}

/** @param {string|string[]} text @param {Record<string, string|number|null|undefined>} values */
export function fill(text, values) {
  const variants = Array.isArray(text) ? text : [text];
  const isKnown = (/** @type {string} */ name) => values[name] !== null && values[name] !== undefined;
  const fits = variants.find((v) => [...v.matchAll(/\{(\w+)\}/g)].every((m) => isKnown(m[1])));
  return (fits ?? variants[variants.length - 1])
    .replace(/\{(\w+)\}/g, (_, name) => (isKnown(name) ? String(values[name]) : '–'));
}
