/* Every state that this machine can bring about is drawn with its sentence, and nothing is lost or
 * doubled when the bench dies and comes back. */

import assert from 'node:assert/strict';
import fs from 'node:fs';
import path from 'node:path';
import { after, before, test } from 'node:test';
import { api, gobletScene, newFolder, openBrowser, SHOTS, startDaemon, until, watchErrors, writeWave } from './support.mjs';

let browser;
let folder;

before(async () => {
  fs.mkdirSync(SHOTS, { recursive: true });
  browser = await openBrowser();
  folder = newFolder();
});
after(async () => {
  await browser?.close();
  if (folder) fs.rmSync(folder, { recursive: true, force: true });
});

async function openPage(url) {
  const page = await browser.newPage({ viewport: { width: 1440, height: 900 } });
  page.setDefaultTimeout(20000);
  const errors = watchErrors(page);
  await page.goto(url);
  return { page, errors };
}
const sentence = (page, pattern) => page.waitForFunction((p) => new RegExp(p).test(document.querySelector('#verdict .sentence')?.textContent ?? ''), pattern);
const shot = (page, name) => page.screenshot({ path: path.join(SHOTS, `state-${name}.png`) });

test('waiting for the first strike says what will be caught, with dotted wedges', async () => {
  const quiet = writeWave(path.join(folder, 'quiet.wav'), { seconds: 40, strikes: [] });
  const daemon = await startDaemon(['--input', quiet], path.join(folder, 'quiet.sqlite'));
  try {
    const { page, errors } = await openPage(daemon.url);
    await sentence(page, '^Tap the part\\. Anything \\d+.dB over the noise');
    assert.ok(await page.locator('#row .w-dotted').count() > 3);
    assert.equal(await page.textContent('#state b'), 'listening');
    assert.equal(await page.locator('#verdict button').textContent(), 'Check the set-upc');
    await shot(page, 'waiting');
    await page.keyboard.press('l');
    await page.keyboard.press('ArrowRight');
    await page.keyboard.press('ArrowRight');
    await page.keyboard.press('ArrowRight');
    await page.keyboard.press('Enter');
    await until(async () => (await api(daemon, '/trigger')).trigger_db === 20, 'a trigger of 20 dB');
    assert.deepEqual(errors, []);
    await page.close();
  } finally {
    await daemon.stop();
  }
});

test('a recording that has ended says so and offers the inputs', async () => {
  const file = writeWave(path.join(folder, 'short.wav'), gobletScene(1));
  const daemon = await startDaemon(['--input', file, '--fast'], path.join(folder, 'short.sqlite'));
  try {
    const { page, errors } = await openPage(daemon.url);
    await sentence(page, 'heard to its end');
    assert.equal(await page.textContent('#state b'), 'not listening');
    await shot(page, 'ended');
    await page.keyboard.press('i');
    await page.waitForFunction(() => /Simulated bench/.test(document.querySelector('#sheet')?.textContent ?? ''));
    await shot(page, 'inputs');
    assert.deepEqual(errors, []);
    await page.close();
  } finally {
    await daemon.stop();
  }
});

test('kill -9: the page says so, keeps the reading, and catches up without gap or double', async () => {
  const file = writeWave(path.join(folder, 'many.wav'), gobletScene(4, 1.2));
  const log = path.join(folder, 'many.sqlite');
  let daemon = await startDaemon(['--input', file, '--fast'], log);
  const { page, errors } = await openPage(daemon.url);
  await page.waitForFunction(() => document.querySelectorAll('#log tbody tr').length === 4);
  const figure = await page.textContent('.figure-q .digits');
  await daemon.stop('SIGKILL');
  await sentence(page, 'cannot reach the bench');
  assert.equal(await page.textContent('#state b'), 'no connection');
  assert.equal(await page.textContent('.figure-q .digits'), figure);
  assert.match(await page.textContent('#reading .title'), /ago/);
  assert.equal(await page.evaluate(() => document.querySelector('#lost-bar').hidden), false);
  await shot(page, 'no-connection');
  daemon = await startDaemon(['--input', file, '--fast'], log, daemon.port);
  try {
    await page.waitForFunction(() => document.querySelectorAll('#log tbody tr').length === 8, null, { timeout: 40000 });
    const { strikes } = await api(daemon, '/strikes');
    const ids = await page.evaluate(() => [...document.querySelectorAll('#log tbody tr .i')].map((c) => Number(c.textContent)));
    assert.deepEqual(ids, strikes.map((s) => s.id));
    assert.deepEqual(await page.evaluate(() => [...document.querySelectorAll('#row [data-id]')].map((o) => Number(o.getAttribute('data-id'))).sort((a, b) => a - b)), [...ids].reverse());
    assert.deepEqual(errors, []);
    await page.close();
  } finally {
    await daemon.stop();
  }
});

test('a log that was begun anew makes the page forget the old ids', async () => {
  const file = writeWave(path.join(folder, 'anew.wav'), gobletScene(3, 1.2));
  let daemon = await startDaemon(['--input', file, '--fast'], path.join(folder, 'first.sqlite'));
  const { page } = await openPage(daemon.url);
  await page.waitForFunction(() => document.querySelectorAll('#log tbody tr').length === 3);
  await daemon.stop('SIGKILL');
  const single = writeWave(path.join(folder, 'one.wav'), gobletScene(1));
  daemon = await startDaemon(['--input', single, '--fast'], path.join(folder, 'second.sqlite'), daemon.port);
  try {
    await page.waitForFunction(() => document.querySelectorAll('#log tbody tr').length === 1 && document.querySelectorAll('#row [data-id]').length === 1, null, { timeout: 40000 });
    await page.close();
  } finally {
    await daemon.stop();
  }
});

test('the simulated bench shows a reading within its first strikes, on phone, desk and wall, light and dark', async () => {
  const daemon = await startDaemon(['--input', 'simulated'], path.join(folder, 'demo.sqlite'));
  try {
    await until(async () => (await api(daemon, '/strikes')).strikes.length >= 2, 'two strikes', 60);
    for (const [width, height] of [[360, 740], [390, 844], [800, 1100], [1280, 720], [1440, 900], [2560, 1440]]) {
      for (const colorScheme of ['light', 'dark']) {
        const page = await browser.newPage({ viewport: { width, height }, colorScheme });
        const errors = watchErrors(page);
        await page.goto(daemon.url);
        await page.waitForFunction(() => document.querySelectorAll('#log tbody tr').length >= 2);
        await page.waitForSelector('.decay-figure canvas');
        const over = await page.evaluate(() => document.documentElement.scrollWidth - innerWidth);
        assert.ok(over <= 0, `${width} px: the page is ${over} px too wide`);
        await page.screenshot({ path: path.join(SHOTS, `bench-${width}-${colorScheme}.png`) });
        assert.deepEqual(errors, []);
        await page.close();
      }
    }
  } finally {
    await daemon.stop();
  }
});

test('Q’s digits are at least 8 % of the window’s height in every view, 22 % in the wide one', async () => {
  const file = writeWave(path.join(folder, 'size.wav'), gobletScene(2));
  const daemon = await startDaemon(['--input', file, '--fast'], path.join(folder, 'size.sqlite'));
  const DIGIT_EM = 0.727; // height of a digit in Inter; Liberation Sans and DejaVu Sans have as much within 1 %
  try {
    for (const [width, height, hash, share] of [[1440, 900, '', 0.08], [1280, 720, '', 0.08], [800, 1100, '', 0.08], [390, 844, '', 0.08], [2560, 1440, '', 0.08], [1440, 900, '#wide', 0.219], [1280, 720, '#wide', 0.219]]) {
      const page = await browser.newPage({ viewport: { width, height } });
      await page.goto(daemon.url + hash);
      await page.waitForFunction(() => /\d/.test(document.querySelector('.figure-q .digits .sure')?.textContent ?? ''));
      const size = await page.evaluate(() => parseFloat(getComputedStyle(document.querySelector('.figure-q .digits .sure')).fontSize));
      assert.ok(size * DIGIT_EM >= share * height, `${width} x ${height} ${hash}: digits of ${(size * DIGIT_EM).toFixed(1)} px, wanted ${(share * height).toFixed(1)}`);
      await page.close();
    }
  } finally {
    await daemon.stop();
  }
});
