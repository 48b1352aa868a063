/* Pure functions of the page: figures, wedges, plots' columns, folding of the log. No browser. */

import assert from 'node:assert/strict';
import { test } from 'node:test';
import * as format from '../../web/format.js';
import * as geometry from '../../web/plot/geometry.js';
import { difference, joinColumns, nearestIndex, spreadLabels } from '../../web/plot/specs.js';
import { figureEm } from '../../web/plot/fit-size.js';
import en from '../../web/lang/en.js';
import de from '../../web/lang/de.js';

const text = (cells) => cells.map((c) => (c.kind === 'empty' ? '_' : c.kind === 'pad' ? ' ' : c.ch)).join('');
const kinds = (cells, kind) => cells.filter((c) => c.kind === kind).map((c) => c.ch).join('');

test('a value is rounded to the place of the second digit of its uncertainty, zeros kept', () => {
  const cases = [
    [881.74178, 0.00112, '881.7418', '0.0011'], [1442.68, 5.2, '1442.7', '5.2'], [2031.447, 0.0062, '2031.4470', '0.0062'],
    [12843, 148, '12840', '150'], [0.55123, 0.00349, '0.5512', '0.0035'], [9.995, 0.0996, '10.00', '0.10'], [1427, 44, '1427', '44'],
  ];
  for (const [value, u, v, s] of cases) {
    const p = format.pair(value, u);
    assert.deepEqual([p.value, p.u], [v, s], `${value} ± ${u}`);
  }
});

test('an uncertainty is rounded half up in decimal, not in binary', () => {
  assert.equal(format.pair(10, 0.145).u, '0.15');
  assert.equal(format.pair(10, 0.125).u, '0.13');
  assert.equal(format.pair(1, 0.0995).u, '0.10');
});

/* JCGM 100:2008 (GUM), 7.2.2: m_S = 100.021 47 g with u_c = 0.35 mg, written 100.021 47(35) g. */
test('the worked example of the GUM, 7.2.2, comes out in its digits', () => {
  assert.deepEqual(format.pair(100.02147, 0.00035), { value: '100.02147', u: '0.00035', place: -5 });
});

test('nothing is shown that is not known', () => {
  assert.equal(format.pair(null, 1), null);
  assert.equal(format.pair(NaN, 1), null);
  assert.equal(format.pair(3, 4), null);
  assert.equal(format.pairText(null), '–');
  assert.equal(format.pair(881.7418, null).u, null);
  assert.equal(format.level(undefined), '–');
  assert.equal(format.span(null), '–');
});

test('groups, minus and units are set with narrow spaces', () => {
  assert.equal(format.pairText(format.pair(12843, 148), 'Hz'), '12\u202f840\u202f±\u202f150\u202fHz');
  assert.equal(format.dress('-12840.5'), '\u221212\u202f840.5');
  assert.equal(format.dress('1284.75', ','), '1284,75');
  assert.equal(format.level(-0.04), '0.0');
  assert.equal(format.level(-11.95), '\u221212.0');
});

test('the last two digits wane, one while forming, and unknown places are empty cells', () => {
  const final = format.cells(format.pair(1442.68, 5.2));
  assert.equal(text(final), '1442.7');
  assert.equal(kinds(final, 'wane'), '27');
  const places = format.placesOf('1442.7');
  const steps = [[1231, 400, '12__._', '2'], [1381, 90, '138_._', '8'], [1433, 30, '143_._', '3'], [1441, 9, '1441._', '1']];
  for (const [value, u, shown, wane] of steps) {
    const cells = format.cells(format.pair(value, u, 1), { forming: true, places });
    assert.equal(text(cells), shown);
    assert.equal(kinds(cells, 'wane'), wane);
  }
});

test('a figure has as many cells while it forms as when it is final, over random values', () => {
  let seed = 20260301;
  const random = () => (seed = (seed * 48271) % 2147483647) / 2147483647;
  for (let i = 0; i < 2000; i++) {
    const value = 10 ** (1 + 4 * random());
    const u = value * 10 ** (-2 - 3 * random());
    const final = format.pair(value, u);
    const places = format.placesOf(final.value);
    const forming = format.pair(value * (1 + 1e-4 * random()), u * (2 + 20 * random()), 1);
    if (!forming) continue;
    const a = format.cells(forming, { forming: true, places: format.widerPlaces(places, format.placesOf(forming.value)) });
    const b = format.cells(final, { places: format.widerPlaces(places, format.placesOf(forming.value)) });
    if (format.placesOf(forming.value).dec <= places.dec) assert.equal(a.length, b.length, `seed 20260301, case ${i}: ${text(a)} ${text(b)}`);
  }
});

test('table parts put the decimal sign with the waning digits only where both surround it', () => {
  assert.deepEqual(format.parts(format.pair(1442.68, 5.2)), { sure: '144', wane: '2.7' });
  assert.deepEqual(format.parts(format.pair(881.7418, 0.0011)), { sure: '881.74', wane: '18' });
  assert.deepEqual(format.parts(format.pair(1427.1, 44)), { sure: '14', wane: '27' });
});

test('wedges: height by level, length by T60, cut at 1.9 slots, never under 3 px', () => {
  assert.equal(geometry.wedgeHeight(0, 66), 66);
  assert.equal(geometry.wedgeHeight(-30, 66), 33);
  assert.equal(geometry.wedgeHeight(-90, 66), 3);
  assert.equal(geometry.wedgeHeight(null, 66), 3);
  const scale = { t60: 3.6, count: 3 };
  assert.ok(Math.abs(geometry.wedgeLength(3.6, 58, scale).length - 46.4) < 1e-9); // 0.8 of the pitch
  assert.deepEqual(geometry.wedgeLength(36, 58, scale), { length: 1.9 * 58, isCut: true });
  assert.equal(geometry.wedgeLength(0.001, 58, scale).length, 3);
  assert.equal(geometry.wedgeLength(null, 58, scale).length, null);
});

test('the scale is set at the first and the third good strike, then only when it is left', () => {
  let scale = geometry.chooseScale(null, []);
  assert.equal(scale, null);
  scale = geometry.chooseScale(scale, [3]);
  assert.equal(scale.t60, 3);
  const first = scale;
  assert.equal(geometry.chooseScale(scale, [3, 3.4]), first);
  scale = geometry.chooseScale(scale, [3, 3.4, 3.3]);
  assert.equal(scale.t60, 3.3);
  assert.equal(geometry.chooseScale(scale, [3, 3.4, 3.3, 4.0, 4.0]), scale);
  assert.equal(geometry.chooseScale(scale, [5, 5, 5, 5]).t60, 5);
  assert.equal(geometry.chooseScale(scale, [1, 1, 1, 1]).t60, 1);
});

test('an unfolded row stands in lines of whole tens', () => {
  assert.equal(geometry.slotsPerLine(1400, 21, 14), 60);
  assert.equal(geometry.slotsPerLine(340, 21, 14), 10);
  assert.deepEqual(geometry.unfoldedSlot(60, 60, 21, 50, 14), { x: 0, y: 50 });
  assert.deepEqual(geometry.unfoldedSlot(10, 60, 21, 50, 14), { x: 224, y: 0 });
});

test('only slots near the view are made', () => {
  assert.deepEqual(geometry.slotsInView(58 * 100, 580, 58, 500, 12), { from: 88, to: 122 });
  assert.deepEqual(geometry.slotsInView(0, 580, 58, 5), { from: 0, to: 5 });
});

test('zoom keeps its centre and stays inside; pan never leaves', () => {
  assert.deepEqual(geometry.zoomRange([0, 4], 0.5, 1, [0, 4]), [0.5, 2.5]);
  assert.deepEqual(geometry.zoomRange([1, 2], 10, 1.5, [0, 4]), [0, 4]);
  assert.deepEqual(geometry.panRange([3, 4], 5, [0, 4]), [3, 4]);
  assert.deepEqual(geometry.ticks(0, 4, 4), [0, 1, 2, 3, 4]);
});

test('curves with their own times share one ascending column', () => {
  const joined = joinColumns([{ x: [0, 2], y: [1, 3] }, { x: [1, 2], y: [5, 6] }]);
  assert.deepEqual(joined.x, [0, 1, 2]);
  assert.deepEqual(joined.columns, [[1, null, 3], [null, 5, 6]]);
  assert.equal(nearestIndex([0, 1, 2, 3], 1.6), 2);
});

test('words at the end of two close lines are moved apart', () => {
  const marks = spreadLabels([{ kind: 'label', x0: 4, y0: -70, text: '1a' }, { kind: 'label', x0: 3.9, y0: -71, text: '1b' }, { kind: 'label', x0: 0.5, y0: -50, text: '2' }], 8);
  assert.equal(marks[1].y0, -78);
  assert.equal(marks[1].x0, 4);
  assert.equal(marks[2].y0, -50);
});

test('a difference of two readings carries both uncertainties', () => {
  const d = difference({ q: 1442.7, q_u: 3 }, { q: 1279.1, q_u: 4 }, 'q', 'q_u');
  assert.equal(Math.round(d.value * 10) / 10, 163.6);
  assert.equal(d.u, 5);
  assert.equal(difference({ q: 1 }, null, 'q', 'q_u'), null);
});

test('the width of a figure follows its places', () => {
  const glyph = { digit: 0.6, point: 0.3 };
  assert.ok(Math.abs(figureEm({ int: 4, dec: 1 }, glyph, 0) - 3.3) < 1e-9);
  assert.ok(figureEm({ int: 4, dec: 3 }, glyph, 0, 0.5) < figureEm({ int: 4, dec: 3 }, glyph, 0));
});

test('the second language has no key that English lacks, and the same {names} in each sentence', () => {
  const names = (value) => new Set([...JSON.stringify(value).matchAll(/\{(\w+)\}/g)].map((m) => m[1]));
  const walk = (a, b, at) => {
    for (const [key, value] of Object.entries(b)) {
      assert.ok(key in a, `${at}${key} is not in English`);
      if (value && typeof value === 'object' && !Array.isArray(value)) walk(a[key], value, `${at}${key}.`);
      else for (const name of names(value)) assert.ok(names(a[key]).has(name), `${at}${key}: {${name}}`);
    }
  };
  walk(en, de, '');
  assert.equal(en.keyList.length, de.keyList.length);
});

test('no sentence about a poor tap says error, invalid or failed', () => {
  for (const words of [en, de]) assert.doesNotMatch(JSON.stringify(words.reason), /error|invalid|failed|Fehler|ungültig/i);
});
