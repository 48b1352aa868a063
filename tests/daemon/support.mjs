// Helpers of the whole-program tests: the real waned on a free port, recordings made here, an
// event-stream reader, raw sockets for requests that no client would send. Nothing sleeps for a
// while and hopes: everything waits for what it wants, with a deadline that only a failure meets.
import { spawn } from 'node:child_process';
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import http from 'node:http';
import net from 'node:net';
import { tmpdir } from 'node:os';
import path from 'node:path';
import { after } from 'node:test';

export const buildDir = process.env.WANE_BUILD ?? '/tmp/build-serve';
const deadlineMs = 60000;

/** A failed test must not leave its daemon running, nor any its folders. */
const children = new Set();
const folders = new Set();
after(() => {
  children.forEach((child) => child.kill('SIGKILL'));
  folders.forEach((folder) => rmSync(folder, { recursive: true, force: true }));
});

export function makeFolder() {
  const folder = mkdtempSync(path.join(tmpdir(), 'wane-test-'));
  folders.add(folder);
  return folder;
}

function late(ms, what) {
  return new Promise((_, reject) => {
    setTimeout(() => reject(new Error(`waited ${ms} ms for ${what}`)), ms).unref();
  });
}

/** Waits for a promise, but not for ever. */
export function within(promise, what, ms = deadlineMs) {
  return Promise.race([promise, late(ms, what)]);
}

/** Runs a program to its end: {status, stdout, stderr}. */
export function run(program, words, options = {}) {
  const child = spawn(path.join(buildDir, program), words, options);
  let stdout = '';
  let stderr = '';
  child.stdout.on('data', (data) => (stdout += data));
  child.stderr.on('data', (data) => (stderr += data));
  return within(
    new Promise((resolve) => {
      child.on('close', (status, signal) => resolve({ status, signal, stdout, stderr }));
    }),
    `${program} to end`,
  );
}

/** A waned that runs: {url, port, child, stop(), kill(), ended}. */
export async function start(words, { folder = makeFolder(), env = {}, program = path.join(buildDir, 'waned') } = {}) {
  const child = spawn(program, ['--listen', '127.0.0.1:0', ...words], {
    env: { ...process.env, XDG_STATE_HOME: folder, XDG_CONFIG_HOME: folder, ...env },
    stdio: ['ignore', 'pipe', 'pipe'],
  });
  const daemon = { child, folder, stderr: '' };
  children.add(child);
  daemon.ended = new Promise((resolve) => {
    child.on('close', (status, signal) => {
      children.delete(child);
      resolve({ status, signal });
    });
  });
  child.stderr.on('data', (data) => (daemon.stderr += data));
  daemon.url = await within(
    new Promise((resolve, reject) => {
      let text = '';
      child.stdout.on('data', (data) => {
        text += data;
        const match = text.match(/^listening on (http:\S+)\n/);
        if (match) resolve(match[1].replace(/\/$/, ''));
      });
      daemon.ended.then(() => reject(new Error(`waned ended: ${daemon.stderr}`)));
    }),
    'the ready line',
  );
  daemon.port = Number(new URL(daemon.url).port);
  daemon.stop = async (signal = 'SIGTERM') => {
    child.kill(signal);
    return within(daemon.ended, 'waned to end');
  };
  return daemon;
}

/** A request by fetch: {status, headers, text, json}. */
export async function call(daemon, method, address, body, headers = {}) {
  const response = await fetch(daemon.url + address, {
    method,
    body: body === undefined || typeof body === 'string' || body instanceof Uint8Array
      ? body
      : JSON.stringify(body),
    headers:
      body === undefined ? headers : { 'Content-Type': 'application/json', ...headers },
  });
  const bytes = new Uint8Array(await response.arrayBuffer());
  const text = new TextDecoder().decode(bytes);
  let json = null;
  try {
    json = JSON.parse(text);
  } catch {
    // not every answer is JSON
  }
  return { status: response.status, headers: response.headers, bytes, text, json };
}

export async function get(daemon, address) {
  const answer = await call(daemon, 'GET', address);
  if (answer.status !== 200) throw new Error(`GET ${address}: ${answer.status} ${answer.text}`);
  return answer.json;
}

/** Bytes as they are, and all that comes back until the other side closes. */
export function sendRaw(port, text) {
  return within(
    new Promise((resolve, reject) => {
      const socket = net.connect(port, '127.0.0.1', () => socket.write(text));
      let answer = '';
      socket.on('data', (data) => (answer += data));
      socket.on('end', () => resolve(answer));
      socket.on('close', () => resolve(answer));
      socket.on('error', (error) => (answer ? resolve(answer) : reject(error)));
    }),
    'an answer to raw bytes',
  );
}

/** An event stream: events in `list`; next(test) waits for one. */
export function watch(daemon, address = '/api/v1/stream', headers = {}) {
  const stream = { list: [], waiting: [], isOpen: false, status: 0 };
  let text = '';
  const take = (block) => {
    const event = { event: 'message', id: null, data: null };
    for (const line of block.split('\n')) {
      const colon = line.indexOf(':');
      if (colon <= 0) continue;
      const value = line.slice(colon + 1).replace(/^ /, '');
      event[line.slice(0, colon)] = value;
    }
    if (event.data === null) return;
    event.data = JSON.parse(event.data);
    stream.list.push(event);
    stream.waiting = stream.waiting.filter((waiter) => !waiter(event));
  };
  stream.opened = within(
    new Promise((resolve, reject) => {
      stream.request = http.get(daemon.url + address, { headers, agent: false }, (response) => {
        stream.status = response.statusCode;
        stream.headers = response.headers;
        stream.response = response;
        response.setEncoding('utf8');
        response.on('data', (data) => {
          text += data;
          for (let end = text.indexOf('\n\n'); end >= 0; end = text.indexOf('\n\n')) {
            take(text.slice(0, end));
            text = text.slice(end + 2);
          }
        });
        stream.ended = new Promise((done) => {
          response.on('end', () => done('end'));
          response.on('error', () => done('cut'));
        });
        resolve(stream);
      });
      stream.request.on('error', reject);
    }),
    'the stream to open',
  );
  stream.next = (test) => {
    const found = stream.list.find(test);
    if (found) return Promise.resolve(found);
    return within(
      new Promise((resolve) => {
        stream.waiting.push((event) => {
          if (!test(event)) return false;
          resolve(event);
          return true;
        });
      }),
      `an event: ${test}`,
    );
  };
  stream.close = () => stream.request.destroy();
  return stream;
}

/** Waits until `test` of what GET address gives is true. */
export async function until(daemon, address, test) {
  const end = Date.now() + deadlineMs;
  for (;;) {
    const value = await get(daemon, address);
    if (test(value)) return value;
    if (Date.now() > end) throw new Error(`${address} never: ${test}`);
    await new Promise((resolve) => setTimeout(resolve, 20));
  }
}

export const hasEnded = (state) => state.input.ended;

// --- recordings ---

/** Same numbers for the same seed (Mulberry32, Tommy Ettinger 2017, public domain). */
export function random(seed) {
  let state = seed >>> 0;
  return () => {
    state = (state + 0x6d2b79f5) >>> 0;
    let t = state;
    t = Math.imul(t ^ (t >>> 15), t | 1);
    t ^= t + Math.imul(t ^ (t >>> 7), t | 61);
    return ((t ^ (t >>> 14)) >>> 0) / 4294967296;
  };
}

function gauss(next) {
  return Math.sqrt(-2 * Math.log(1 - next())) * Math.cos(2 * Math.PI * next());
}

/** Samples of strikes: [{at_s, modes: [{f_hz, decay_per_s, amplitude}]}] in white noise. */
export function ring({ seconds, rate_hz = 48000, strikes, noise_rms = 1e-4, seed = 1 }) {
  const next = random(seed);
  const samples = new Float32Array(Math.round(seconds * rate_hz));
  for (let n = 0; n < samples.length; n++) samples[n] = noise_rms * gauss(next);
  for (const strike of strikes) {
    const first = Math.ceil(strike.at_s * rate_hz);
    const last = Math.min(samples.length, first + 8 * rate_hz);
    for (const mode of strike.modes) {
      for (let n = first; n < last; n++) {
        const t = n / rate_hz - strike.at_s;
        samples[n] +=
          mode.amplitude *
          Math.exp(-mode.decay_per_s * t) *
          Math.sin(2 * Math.PI * mode.f_hz * t);
      }
    }
  }
  return samples;
}

/** 32-bit float WAV (format 3) of one or more channels of the same length. */
export function wav(channels, rate_hz = 48000) {
  const frames = channels[0].length;
  const bytes = Buffer.alloc(44 + frames * channels.length * 4);
  bytes.write('RIFF', 0);
  bytes.writeUInt32LE(bytes.length - 8, 4);
  bytes.write('WAVEfmt ', 8);
  bytes.writeUInt32LE(16, 16);
  bytes.writeUInt16LE(3, 20);
  bytes.writeUInt16LE(channels.length, 22);
  bytes.writeUInt32LE(rate_hz, 24);
  bytes.writeUInt32LE(rate_hz * channels.length * 4, 28);
  bytes.writeUInt16LE(channels.length * 4, 32);
  bytes.writeUInt16LE(32, 34);
  bytes.write('data', 36);
  bytes.writeUInt32LE(frames * channels.length * 4, 40);
  for (let n = 0; n < frames; n++) {
    channels.forEach((samples, c) =>
      bytes.writeFloatLE(samples[n], 44 + (n * channels.length + c) * 4),
    );
  }
  return bytes;
}

/** `count` strikes of a tile that rings at 1234.5 Hz (Q about 970), one every `every_s`. */
export const tile = { f_hz: 1234.5, decay_per_s: 4, amplitude: 0.3 };
export function tileStrikes(count, every_s = 1.5) {
  return Array.from({ length: count }, (_, i) => ({
    at_s: 0.7 + i * every_s,
    modes: [tile],
  }));
}

export function writeTile(folder, count, name = 'tile.wav') {
  const file = path.join(folder, name);
  const samples = ring({ seconds: 0.7 + count * 1.5, strikes: tileStrikes(count) });
  writeFileSync(file, wav([samples]));
  return file;
}
