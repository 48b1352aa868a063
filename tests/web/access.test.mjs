/* axe-core in every state, light and dark, 360 to 2560 px; what a screen reader hears. */

import assert from 'node:assert/strict';
import fs from 'node:fs';
import { createRequire } from 'node:module';
import path from 'node:path';
import { after, before, test } from 'node:test';
import { api, gobletScene, newFolder, openBrowser, SHOTS, startDaemon, until, writeWave } from './support.mjs';

const axe = fs.readFileSync(createRequire(import.meta.url).resolve('axe-core/axe.min.js'), 'utf8');
let browser;
let folder;
let daemon;

before(async () => {
  fs.mkdirSync(SHOTS, { recursive: true });
  browser = await openBrowser();
  folder = newFolder();
  const file = writeWave(path.join(folder, 'goblet.wav'), gobletScene(4));
  daemon = await startDaemon(['--input', file, '--fast'], path.join(folder, 'axe.sqlite'));
  await until(async () => (await api(daemon, '/strikes')).strikes.length >= 4, 'four strikes');
});
after(async () => {
  await browser?.close();
  await daemon?.stop();
  if (folder) fs.rmSync(folder, { recursive: true, force: true });
});

/** @param {import('playwright-core').Page} page @param {string} what */
async function check(page, what) {
  if (!(await page.evaluate(() => 'axe' in window))) await page.evaluate(axe); // past the CSP, by the debugger
  const { violations } = await page.evaluate(() => window.axe.run(document, { resultTypes: ['violations'] }));
  const told = violations.map((v) => `${v.id}: ${v.nodes.slice(0, 3).map((n) => `${n.target} ${n.failureSummary?.split('\n')[1] ?? ''}`).join(' | ')}`);
  assert.deepEqual(told, [], what);
}

async function openPage(width, height, colorScheme, hash = '') {
  const page = await browser.newPage({ viewport: { width, height }, colorScheme, reducedMotion: 'reduce' }); // no fade while axe looks
  page.setDefaultTimeout(15000);
  await page.goto(daemon.url + hash);
  await page.waitForFunction(() => document.querySelectorAll('#log tbody tr').length >= 4);
  await page.waitForSelector('.decay-figure canvas', { state: 'attached' });
  return page;
}

for (const colorScheme of ['light', 'dark']) {
  test(`axe finds nothing at any width, ${colorScheme}`, async () => {
    for (const [width, height] of [[360, 740], [800, 1100], [1280, 720], [2560, 1440]]) {
      const page = await openPage(width, height, colorScheme);
      await check(page, `${width} px ${colorScheme}`);
      await page.close();
    }
  });

  test(`axe finds nothing in sheets, tables, editing, comparison and the wide view, ${colorScheme}`, async () => {
    const page = await openPage(1440, 900, colorScheme);
    for (const key of ['?', 'c', 'i', 's']) {
      await page.keyboard.press(key);
      await page.waitForFunction(() => !document.querySelector('#sheet').hidden && document.querySelector('#sheet').textContent.length > 20);
      await check(page, `sheet ${key}`);
      await page.keyboard.press('Escape');
    }
    await page.locator('.decay-figure .curve.main').focus();
    await page.keyboard.press('t');
    await page.waitForSelector('.decay-figure table');
    await check(page, 'table of a plot');
    await page.keyboard.press('t');
    await page.keyboard.press('ArrowLeft');
    await page.keyboard.press('p');
    await page.keyboard.press('End');
    await page.waitForFunction(() => /minus strike/.test(document.querySelector('#series').textContent));
    await check(page, 'comparison');
    await page.keyboard.press('n');
    await page.waitForSelector('#log form.inline');
    await check(page, 'note being written');
    await page.keyboard.press('Escape');
    await page.keyboard.press('a');
    await check(page, 'row unfolded');
    await page.keyboard.press('a');
    await page.keyboard.press('w');
    await check(page, 'wide view');
    await page.close();
  });
}

test('axe finds nothing when the connection is lost; the status speaks of final readings only', async () => {
  const file = writeWave(path.join(folder, 'lost.wav'), gobletScene(2, 2.5, 3));
  const own = await startDaemon(['--input', file], path.join(folder, 'lost.sqlite'));
  const page = await browser.newPage({ viewport: { width: 1440, height: 900 } });
  await page.goto(own.url);
  await page.evaluate(() => {
    window.said = [];
    new MutationObserver(() => window.said.push(document.querySelector('#say').textContent)).observe(document.querySelector('#say'), { childList: true, characterData: true, subtree: true });
  });
  await page.waitForFunction(() => document.querySelectorAll('#log tbody tr').length >= 2, null, { timeout: 30000 });
  const said = await page.evaluate(() => window.said);
  assert.ok(said.every((text) => /^Strike \d+, (good|doubtful|rejected)\./.test(text)), said.join(' / '));
  await own.stop('SIGKILL');
  await page.waitForFunction(() => /cannot reach/.test(document.querySelector('#verdict').textContent), null, { timeout: 15000 });
  await check(page, 'no connection');
  await page.close();
});

test('forced colours and reduced motion keep shapes and stop fades', async () => {
  const page = await browser.newPage({ viewport: { width: 1440, height: 900 }, forcedColors: 'active', reducedMotion: 'reduce' });
  await page.goto(daemon.url);
  await page.waitForFunction(() => document.querySelectorAll('#row [data-id]').length >= 4);
  const animated = await page.evaluate(() => [...document.querySelectorAll('*')].filter((n) => getComputedStyle(n).animationName !== 'none').length);
  assert.equal(animated, 0);
  await page.screenshot({ path: path.join(SHOTS, 'forced-colours.png') });
  await page.close();
});
