/* What the page's tests share: a real waned, a real Chromium, and recordings made here. */

import { spawn } from 'node:child_process';
import fs from 'node:fs';
import os from 'node:os';
import path from 'node:path';
import { fileURLToPath } from 'node:url';

const HERE = path.dirname(fileURLToPath(import.meta.url));
export const BUILD = path.resolve(HERE, process.env.WANE_BUILD ?? '../../build');
export const CHROMIUM = process.env.WANE_CHROMIUM ?? '/usr/bin/chromium';
export const SHOTS = path.join(BUILD, 'screenshots');

/** Why these tests cannot run here, or null. */
export function whyNot() {
  if (!fs.existsSync(path.join(HERE, 'node_modules', 'playwright-core'))) return 'tests/web/node_modules is missing: run "npm ci" in tests/web';
  if (!fs.existsSync(CHROMIUM)) return `${CHROMIUM} is missing: apt-get install chromium`;
  if (!fs.existsSync(path.join(BUILD, 'waned'))) return `${BUILD}/waned is missing: build first, or set WANE_BUILD`;
  return null;
}

/** @returns {Promise<import('playwright-core').Browser>} */
export async function openBrowser() {
  const { chromium } = await import('playwright-core');
  return chromium.launch({
    executablePath: CHROMIUM,
    args: ['--headless', '--no-sandbox', '--disable-gpu', '--disable-quic', '--no-first-run', '--disable-background-networking', '--disable-component-update', '--disable-sync'],
  });
}

export function newFolder() {
  return fs.mkdtempSync(path.join(os.tmpdir(), 'wane page ')); // a space in the name, on purpose
}

/** Starts waned and waits for its line. @param {string[]} words @param {string} log */
export async function startDaemon(words, log, port = 0) {
  const child = spawn(path.join(BUILD, 'waned'), ['--listen', `127.0.0.1:${port}`, '--log', log, ...words], { stdio: ['ignore', 'pipe', 'pipe'] });
  let errors = '';
  child.stderr.on('data', (data) => { errors += data; });
  const url = await new Promise((resolve, reject) => {
    let text = '';
    child.stdout.on('data', (data) => {
      text += data;
      const found = /listening on (http:\S+)/.exec(text);
      if (found) resolve(found[1]);
    });
    child.on('exit', (code) => reject(new Error(`waned ended with ${code}: ${errors}`)));
  });
  let isAsked = false;
  const gone = new Promise((resolve) => child.on('exit', (code, signal) => {
    if (!isAsked) console.log(`waned ended by itself: code ${code}, signal ${signal}; ${errors}`);
    resolve(code);
  }));
  return {
    url, port: Number(new URL(url).port),
    async stop(signal = 'SIGTERM') {
      isAsked = true;
      child.kill(signal);
      await gone;
    },
  };
}

/** @param {{url: string}} daemon @param {string} path */
export async function api(daemon, path, options = {}) {
  const response = await fetch(`${daemon.url}api/v1${path}`, options);
  if (!response.ok) throw new Error(`${path}: ${response.status} ${await response.text()}`);
  return response.json();
}

/** Waits until check() gives something true. @template T @param {() => Promise<T>} check */
export async function until(check, what = 'the condition', seconds = 30) {
  const end = Date.now() + seconds * 1000;
  for (;;) {
    const value = await check();
    if (value) return value;
    if (Date.now() > end) throw new Error(`${what}: not within ${seconds} s`);
    await new Promise((resolve) => setTimeout(resolve, 50));
  }
}

/** Console errors and exceptions of a page, but for the refused connections that a test brings on.
 * @param {import('playwright-core').Page} page */
export function watchErrors(page) {
  const errors = [];
  page.on('pageerror', (error) => errors.push(String(error.stack ?? error)));
  page.on('console', (message) => {
    if (message.type() === 'error' && !/Failed to load resource/.test(message.text())) errors.push(message.text());
  });
  return errors;
}

/** Gaussian noise from a printed seed (mulberry32, Box-Muller). @param {number} seed */
function noiseOf(seed) {
  let state = seed;
  const uniform = () => {
    state = (state + 0x6d2b79f5) | 0;
    let t = Math.imul(state ^ (state >>> 15), 1 | state);
    t = (t + Math.imul(t ^ (t >>> 7), 61 | t)) ^ t;
    return ((t ^ (t >>> 14)) >>> 0) / 4294967296;
  };
  return () => Math.sqrt(-2 * Math.log(uniform() + 1e-12)) * Math.cos(2 * Math.PI * uniform());
}

/** A 16-bit mono WAV of damped sinusoids in noise.
 * @param {string} file @param {{seconds: number, rate?: number, noise?: number, seed?: number,
 *   strikes: {at: number, modes: {f: number, decay: number, level: number}[]}[]}} scene */
export function writeWave(file, { seconds, rate = 48000, noise = 3e-4, seed = 7, strikes }) {
  const count = Math.round(seconds * rate);
  const samples = new Float64Array(count);
  const gauss = noiseOf(seed);
  for (let i = 0; i < count; i++) samples[i] = noise * gauss();
  for (const { at, modes } of strikes) {
    const first = Math.round(at * rate);
    for (const { f, decay, level } of modes) {
      const last = Math.min(count, first + Math.ceil((14 / decay) * rate));
      for (let i = first; i < last; i++) {
        const t = i / rate - at;
        samples[i] += level * Math.exp(-decay * t) * Math.sin(2 * Math.PI * f * t + 0.3);
      }
    }
  }
  const data = Buffer.alloc(44 + 2 * count);
  data.write('RIFF', 0);
  data.writeUInt32LE(36 + 2 * count, 4);
  data.write('WAVEfmt ', 8);
  data.writeUInt32LE(16, 16);
  data.writeUInt16LE(1, 20);
  data.writeUInt16LE(1, 22);
  data.writeUInt32LE(rate, 24);
  data.writeUInt32LE(rate * 2, 28);
  data.writeUInt16LE(2, 32);
  data.writeUInt16LE(16, 34);
  data.write('data', 36);
  data.writeUInt32LE(2 * count, 40);
  for (let i = 0; i < count; i++) data.writeInt16LE(Math.round(Math.min(1, Math.max(-1, samples[i])) * 32767), 44 + 2 * i);
  fs.writeFileSync(file, data);
  return file;
}

/** An invented goblet, struck every `every` seconds. */
export function gobletScene(count, every = 3, first = 1) {
  const strikes = Array.from({ length: count }, (_, i) => ({
    at: first + i * every + 0.0137 * i,
    modes: [{ f: 881.74, decay: 4.1, level: 0.3 * (1 - 0.04 * (i % 5)) }, { f: 2031.4, decay: 9.5, level: 0.1 }],
  }));
  return { seconds: first + count * every + 0.5, strikes };
}
