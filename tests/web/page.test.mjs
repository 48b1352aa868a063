/* The page in a real Chromium against the real waned: what is shown is what the API says, it settles
 * without moving, and keys alone do everything. */

import assert from 'node:assert/strict';
import fs from 'node:fs';
import path from 'node:path';
import { after, before, test } from 'node:test';
import { dress, pair } from '../../web/format.js';
import { api, gobletScene, newFolder, openBrowser, SHOTS, startDaemon, until, watchErrors, writeWave } from './support.mjs';

let browser;
let folder;
let heard; // a daemon that has heard six strikes of the goblet
let wave;

before(async () => {
  fs.mkdirSync(SHOTS, { recursive: true });
  browser = await openBrowser();
  folder = newFolder();
  wave = writeWave(path.join(folder, 'goblet.wav'), gobletScene(6));
  heard = await startDaemon(['--input', wave, '--fast'], path.join(folder, 'heard.sqlite'));
  await until(async () => (await api(heard, '/strikes')).strikes.length >= 6, 'six strikes');
});

after(async () => {
  await browser?.close();
  await heard?.stop();
  if (folder) fs.rmSync(folder, { recursive: true, force: true });
});

async function openPage(url, options = {}) {
  const context = await browser.newContext({ viewport: { width: 1440, height: 900 }, ...options });
  const page = await context.newPage();
  page.setDefaultTimeout(8000);
  const errors = watchErrors(page);
  await page.goto(url);
  return { page, context, errors };
}

/** Waits for the reading to be of a strike. */
const isRead = (page) => page.waitForFunction(() => /\d/.test(document.querySelector('.figure-q .digits')?.textContent ?? '') && !document.querySelector('.figure-q[aria-hidden]'));

/** The digits on the page as the API's pair would be written. */
const digitsOf = (page, selector) => page.evaluate((s) => [...document.querySelectorAll(`${s} .cell`)].filter((c) => !c.classList.contains('pad')).map((c) => c.textContent).join(''), selector);

test('the reading is the newest strike of the API, in its digits', async () => {
  const { page, context, errors } = await openPage(heard.url);
  await isRead(page);
  const { strikes } = await api(heard, '/strikes?limit=1');
  const mode = strikes[0].modes[0];
  assert.equal(await digitsOf(page, '.figure-q'), dress(pair(mode.q, mode.q_u).value));
  assert.equal(await digitsOf(page, '.figure.one'), dress(pair(mode.f_hz, mode.f_u_hz).value));
  assert.equal(await digitsOf(page, '.figure.two'), dress(pair(mode.t60_s, mode.t60_u_s).value));
  const pm = await page.textContent('.figure-q .pm');
  assert.equal(pm.replace(/\s/g, ''), `±${pair(mode.q, mode.q_u).u}`);
  assert.deepEqual(errors, []);
  await page.screenshot({ path: path.join(SHOTS, 'desk-light.png') });
  await context.close();
});

test('the modes table and the log hold the same figures as the API, in the same order', async () => {
  const { page, context } = await openPage(heard.url);
  await isRead(page);
  const { strikes } = await api(heard, '/strikes');
  await page.waitForFunction((n) => document.querySelectorAll('#log tbody tr').length === n, strikes.length);
  const rows = await page.evaluate(() => [...document.querySelectorAll('#log tbody tr')].map((tr) => [tr.querySelector('.i').textContent, tr.querySelector('.f').textContent, tr.querySelector('.q').textContent]));
  rows.forEach((row, i) => {
    const mode = strikes[i].modes[0];
    assert.deepEqual(row, [String(strikes[i].id), dress(pair(mode.f_hz, mode.f_u_hz).value), dress(pair(mode.q, mode.q_u).value)]);
  });
  const shown = await page.evaluate(() => [...document.querySelectorAll('#modes tbody tr')].map((tr) => tr.querySelector('th').textContent));
  assert.deepEqual(shown, strikes[0].modes.map((m) => m.label));
  await context.close();
});

test('the wedge row has a slot a strike; a click selects it and the plots follow', async () => {
  const { page, context, errors } = await openPage(heard.url);
  await isRead(page);
  const { strikes } = await api(heard, '/strikes');
  assert.equal(await page.locator('#row [role=option]').count(), strikes.length);
  const third = strikes[strikes.length - 3].id;
  await page.locator(`#row [data-id="${third}"]`).click();
  await page.waitForFunction((id) => document.querySelector('#row [aria-selected=true]')?.getAttribute('data-id') === String(id), third);
  await page.waitForSelector('.decay-figure .uplot canvas');
  await page.waitForFunction(() => /dB a second/.test(document.querySelector('.decay-figure figcaption').textContent));
  assert.match(await page.textContent('#reading .title'), new RegExp(`strike ${third}\\b`));
  assert.deepEqual(errors, []);
  await context.close();
});

test('the table of a plot holds the numbers that the bench sent', async () => {
  const { page, context } = await openPage(heard.url);
  await isRead(page);
  await page.waitForSelector('.trace-figure .uplot canvas');
  await page.locator('.trace-figure .curve.main').focus();
  await page.keyboard.press('t');
  await page.waitForSelector('.trace-figure table');
  const head = await page.locator('.trace-figure thead th').allTextContents();
  assert.deepEqual(head.slice(1), ['max', 'min']);
  assert.ok(await page.locator('.trace-figure tbody tr').count() > 20);
  await context.close();
});

test('everything is done by keys alone', async () => {
  const { page, context, errors } = await openPage(heard.url);
  await isRead(page);
  const { strikes } = await api(heard, '/strikes');
  const ids = strikes.map((s) => s.id).reverse();
  const selected = () => page.evaluate(() => Number(document.querySelector('#row [aria-selected=true]')?.getAttribute('data-id')));
  await page.keyboard.press('ArrowLeft');
  await page.waitForFunction((id) => document.querySelector('#row [aria-selected=true]')?.getAttribute('data-id') === String(id), ids.at(-2));
  await page.keyboard.press('Home');
  assert.equal(await selected(), ids[0]);
  await page.keyboard.press('p');
  await page.keyboard.press('End');
  await page.waitForFunction(() => /against the pinned strike/.test(document.querySelector('.decay-figure .sub').textContent));
  assert.equal(await selected(), ids.at(-1));
  assert.match(await page.textContent('#series'), /minus strike/);
  await page.keyboard.press('d');
  await page.waitForFunction(() => document.querySelector('.figure.two .label').textContent === 'α');
  await page.keyboard.press('d');
  for (const [key, title] of [['?', 'Keys'], ['c', 'Set-up check'], ['i', 'Input'], ['s', 'This browser']]) {
    await page.keyboard.press(key);
    await page.waitForFunction((text) => document.querySelector('#sheet h2')?.textContent === text, title);
    assert.equal(await page.evaluate(() => document.activeElement.id), 'sheet');
    const overlap = await page.evaluate(() => document.querySelector('#sheet').getBoundingClientRect().top - document.querySelector('#big-wedge').getBoundingClientRect().bottom);
    assert.ok(overlap >= 0, `the sheet ${title} stands over the reading by ${-overlap} px`);
    await page.keyboard.press('Escape');
    await page.waitForFunction(() => document.querySelector('#sheet').hidden);
  }
  await page.keyboard.press('a');
  assert.ok(await page.evaluate(() => document.body.classList.contains('unfolded')));
  await page.keyboard.press('a');
  await page.keyboard.press('w');
  await page.waitForFunction(() => document.body.classList.contains('wide') && location.hash === '#wide');
  await page.screenshot({ path: path.join(SHOTS, 'wide-light.png') });
  await page.keyboard.press('Escape');
  await page.waitForFunction(() => !document.body.classList.contains('wide'));
  await page.keyboard.press('/');
  assert.equal(await page.evaluate(() => document.activeElement.tagName), 'SELECT');
  assert.deepEqual(errors, []);
  await context.close();
});

test('a note and a set-aside by keys are in the log, and another page sees them at once', async () => {
  const { page, context } = await openPage(heard.url);
  const other = await openPage(heard.url);
  await isRead(page);
  await isRead(other.page);
  const id = (await api(heard, '/strikes?limit=1')).strikes[0].id;
  await page.waitForSelector('#log tr.selected');
  await page.keyboard.press('n');
  await page.waitForSelector('#log form.inline input');
  await page.keyboard.type('softer <b>tap</b>');
  await page.keyboard.press('Enter');
  await until(async () => (await api(heard, `/strikes/${id}`)).note === 'softer <b>tap</b>', 'the note');
  await other.page.waitForFunction(() => document.querySelector('#log .acts .text')?.textContent === 'softer <b>tap</b>');
  await page.waitForFunction(() => !document.querySelector('#log form.inline'));
  await page.keyboard.press('x');
  await page.waitForSelector('#log form.inline input');
  await page.keyboard.type('touched');
  await page.keyboard.press('Enter');
  await other.page.waitForSelector('#row .w-hollow');
  await page.waitForFunction(() => !document.querySelector('#log form.inline'));
  await page.keyboard.press('x');
  await until(async () => (await api(heard, `/strikes/${id}`)).set_aside === null, 'taken back');
  await context.close();
  await other.context.close();
});

test('a link to one strike opens it, and a wrong one says so', async () => {
  const { strikes } = await api(heard, '/strikes');
  const id = strikes.at(-1).id;
  const { page, context } = await openPage(`${heard.url}#strike=${id}`);
  await page.waitForFunction((n) => document.querySelector('#reading .title')?.textContent.includes(`strike ${n}`), id);
  await context.close();
  const wrong = await openPage(`${heard.url}#strike=999999`);
  await wrong.page.waitForFunction(() => /no strike 999999/.test(document.querySelector('#log').textContent));
  await wrong.context.close();
});

test('the filter shows what the API gives for it, and the export asks for the same', async () => {
  const { page, context } = await openPage(heard.url);
  await isRead(page);
  await page.locator('#log select').nth(3).selectOption('rejected');
  await page.waitForFunction(() => /No strike matches/.test(document.querySelector('#log .none').textContent));
  assert.match(await page.locator('#log a[download]').first().getAttribute('href'), /verdict=rejected/);
  await page.locator('#log .none button').click();
  await page.waitForFunction(() => document.querySelectorAll('#log tbody tr').length >= 6);
  await context.close();
});

test('a recording chosen on the page is read and shown, and not stored', async () => {
  const { page, context } = await openPage(heard.url);
  await isRead(page);
  const before = (await api(heard, '/state')).log.newest;
  await page.keyboard.press('i');
  await page.locator('#recording-file').setInputFiles(wave);
  await page.waitForFunction(() => document.querySelectorAll('#sheet tbody tr').length === 6, null, { timeout: 30000 });
  assert.equal((await api(heard, '/state')).log.newest, before);
  await page.screenshot({ path: path.join(SHOTS, 'recording.png') });
  await context.close();
});

test('forming sharpens and settles without any digit changing its place', async () => {
  const strikes = Array.from({ length: 8 }, (_, i) => ({ at: 3 + 4 * i, modes: [{ f: 660.3, decay: 2.2, level: 0.4 }] }));
  const live = writeWave(path.join(folder, 'live.wav'), { seconds: 36, strikes });
  const daemon = await startDaemon(['--input', live], path.join(folder, 'live.sqlite'));
  try {
    const { page, context, errors } = await openPage(daemon.url);
    await page.evaluate(() => {
      window.seen = [];
      const watch = () => {
        const q = document.querySelector('.figure-q');
        const cells = [...q.querySelectorAll('.cell')].map((c) => [c.className, c.textContent, Math.round(c.getBoundingClientRect().left * 10) / 10, Math.round(c.getBoundingClientRect().width * 10) / 10]);
        const word = document.querySelector('#verdict .word').textContent;
        const last = window.seen.at(-1);
        const key = JSON.stringify([cells, word]);
        if (!last || last.key !== key) window.seen.push({ key, cells, word, boxes: ['reading', 'modes', 'verdict', 'big-wedge', 'row', 'plots', 'series', 'log'].map((id) => Object.values(document.getElementById(id).getBoundingClientRect().toJSON()).map(Math.round).join(' ')).join(' | ') });
        requestAnimationFrame(watch);
      };
      watch();
    });
    await page.waitForFunction(() => window.seen.some((s) => s.word === 'good'), null, { timeout: 30000 });
    await page.evaluate(() => { window.seen = []; });
    await page.waitForFunction(() => window.seen.filter((s) => s.word === 'ringing').length > 2, null, { timeout: 30000 });
    await page.screenshot({ path: path.join(SHOTS, 'forming.png') });
    await page.waitForFunction(() => window.seen.at(-1).word === 'good' && window.seen.some((s) => s.word === 'ringing'), null, { timeout: 30000 });
    const { seen } = await page.evaluate(() => ({ seen: window.seen }));
    const forming = seen.filter((s) => s.word === 'ringing' && s.cells.length > 1);
    assert.ok(forming.length >= 3, `only ${forming.length} forming frames were painted`);
    assert.ok(forming.some((s) => s.cells.some(([cls]) => cls.includes('empty'))), 'no empty cell was seen');
    const final = seen.filter((s) => s.word === 'good').at(-1);
    assert.ok(final.cells.every(([cls]) => !cls.includes('empty')));
    const second = forming.filter((s) => seen.indexOf(s) < seen.indexOf(final)).at(-1);
    second.cells.slice(0, final.cells.length).forEach(([, , left, width], i) => {
      assert.deepEqual([left, width], final.cells[i].slice(2), `cell ${i} moved`);
    });
    for (const { boxes } of seen) assert.equal(boxes, final.boxes, 'a panel moved or changed its size');
    assert.deepEqual(errors, []);
    await context.close();
  } finally {
    await daemon.stop();
  }
});

test('names with markup, of 199 characters (all that the log takes) and from right to left are shown as text', async () => {
  const names = ['<script>alert(1)</script>', 'x'.repeat(199), 'كأس زجاجي רקמה'];
  const scene = gobletScene(2, 2);
  const file = writeWave(path.join(folder, 'names.wav'), scene);
  for (const name of names) {
    const daemon = await startDaemon(['--input', file], path.join(folder, `names-${names.indexOf(name)}.sqlite`));
    try {
      const json = { 'Content-Type': 'application/json' };
      await api(daemon, '/series', { method: 'POST', headers: json, body: JSON.stringify({ specimen: name, name }) });
      const { page, context, errors } = await openPage(daemon.url);
      await until(async () => (await api(daemon, '/strikes')).strikes.length >= 1, 'a strike');
      await page.waitForFunction((n) => document.querySelector('#log .part-name')?.textContent.includes(n), name);
      await page.waitForFunction((n) => document.querySelector('#reading .title').textContent.includes(n), name);
      assert.equal(await page.evaluate(() => document.querySelectorAll('body script').length), 0);
      const wide = await page.evaluate(() => document.documentElement.scrollWidth - innerWidth);
      assert.ok(wide <= 0, `the page is ${wide} px too wide`);
      assert.deepEqual(errors, []);
      await page.screenshot({ path: path.join(SHOTS, `name-${names.indexOf(name)}.png`) });
      await context.close();
    } finally {
      await daemon.stop();
    }
  }
});
