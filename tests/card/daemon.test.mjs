// The whole program on the tests' own sound card: what is played is heard, read and logged as
// `wane read` reads the file; the card's loss and return show in the stream, the state and the log.
import assert from 'node:assert/strict';
import { spawn, spawnSync } from 'node:child_process';
import { mkdtempSync, rmSync } from 'node:fs';
import path from 'node:path';
import test from 'node:test';
import { get, makeFolder, run, start, until, watch, within } from '../daemon/support.mjs';

const script = decodeURIComponent(new URL('virtual-card', import.meta.url).pathname);
const check = spawnSync(decodeURIComponent(script), ['check'], { encoding: 'utf8' });
const skip = check.status === 0 ? false : `no virtual sound card: ${check.stdout.trim()}`;
if (skip) console.log(`skipped: ${skip}`);

// The promise: a loss is seen within 2 s, the card is listened to 3 s after its return.
const seenMs = 2000;
const againMs = 3000;

function card(...words) {
  const done = spawnSync(decodeURIComponent(script), words, { encoding: 'utf8' });
  assert.equal(done.status, 0, `virtual-card ${words.join(' ')}: ${done.stderr}`);
  return done.stdout;
}

/** Starts a card; {folder, env}: what programs need to see it. Short path: it holds a socket. */
function startCard(rate_hz = 48000, channels = 2) {
  const folder = path.join(mkdtempSync('/tmp/wane-card-'), 'card');
  const env = Object.fromEntries(
    card('start', folder, String(rate_hz), String(channels))
      .trim()
      .split('\n')
      .map((line) => [line.slice(0, line.indexOf('=')), line.slice(line.indexOf('=') + 1)]),
  );
  return { folder, env };
}

function stopCard(made) {
  card('stop', made.folder);
  rmSync(path.dirname(made.folder), { recursive: true });
}

function play(made, file) {
  const player = spawn(decodeURIComponent(script), ['play', made.folder, file]);
  return within(new Promise((resolve) => player.on('close', resolve)), 'the player to end', 120000);
}

/** The strikes of one channel, in time order. */
function ofChannel(strikes, channel) {
  return strikes
    .filter((strike) => strike.channel === channel)
    .sort((a, b) => a.onset_s - b.onset_s);
}

/** Largest difference of the lead modes' f and decay, in units of u. */
function differences(heard, read) {
  const [a] = heard.modes;
  const [b] = read.modes;
  return {
    f: Math.abs(a.f_hz - b.f_hz) / b.f_u_hz,
    decay: Math.abs(a.decay_per_s - b.decay_per_s) / b.decay_u_per_s,
  };
}

test('a recording that is played is read as `wane read` reads the file', { skip }, async () => {
  const folder = makeFolder();
  const file = path.join(folder, 'bench.wav');
  const made = startCard();
  try {
    const words = ['--seed', '12', '--strikes', '5', '--interval', '4', '--channels', '2'];
    const simulated = await run('wane', ['simulate', ...words, '--defects', 'none', file]);
    assert.equal(simulated.status, 0, simulated.stderr);
    const read = await run('wane', ['read', '--json', '--channel', 'all', file]);
    assert.equal(read.status, 0, read.stderr);
    const lines = read.stdout.trim().split('\n').map((line) => JSON.parse(line));
    const daemon = await start(['--input', 'testcard', '--channel', '1,2'], {
      folder, env: made.env,
    });
    const state = await get(daemon, '/api/v1/state');
    assert.equal(state.input.name, 'testcard');
    assert.equal(state.input.state, 'listening');
    assert.equal(state.input.rate_hz, 48000);
    assert.ok(state.input.warnings.some((text) => text.includes('sound server')));
    assert.equal(await play(made, file), 0);
    const read_of = [1, 2].map((channel) => ofChannel(lines, channel));
    assert.ok(read_of.every((list) => list.length >= 4), `strikes: ${lines.length}`);
    const { strikes } = await until(daemon, '/api/v1/strikes', (page) =>
      [1, 2].every((c) => ofChannel(page.strikes, c).length >= read_of[c - 1].length));
    let shift = null;
    for (const channel of [1, 2]) {
      const heard = ofChannel(strikes, channel);
      assert.equal(heard.length, read_of[channel - 1].length, `strikes on channel ${channel}`);
      // Not the last: its window runs into the silence after the recording, the file's does not.
      read_of[channel - 1].slice(0, -1).forEach((line, i) => {
        const { f, decay } = differences(heard[i], line);
        console.log(`channel ${channel}, ${line.modes[0].f_hz.toFixed(2)} Hz: f off by ` +
          `${f.toFixed(4)} u, decay by ${decay.toFixed(4)} u`);
        assert.equal(heard[i].verdict, line.verdict);
        assert.ok(f <= 0.1, `f of strike ${i + 1}, channel ${channel}: off by ${f} u, limit 0.1`);
        assert.ok(decay <= 0.1, `decay of strike ${i + 1}: off by ${decay} u, limit 0.1`);
        // Not a frame was lost between the strikes: the file lies in the stream as a whole.
        shift ??= heard[i].onset_s - line.onset_s;
        const slip_s = heard[i].onset_s - line.onset_s - shift;
        assert.ok(Math.abs(slip_s) < 2 / 48000, `onset slipped by ${slip_s} s`);
      });
    }
    assert.equal((await daemon.stop()).status, 0);
  } finally {
    stopCard(made);
  }
});

/** The log, by SQLite's own shell: lost, then listening again with the length of the gap. */
function checkLog(file) {
  const sql = "SELECT text, gap_ms FROM event WHERE kind = 'input' ORDER BY id";
  const asked = spawnSync('sqlite3', ['-readonly', '-json', file, sql], { encoding: 'utf8' });
  if (asked.error?.code === 'ENOENT') {
    console.log('the log is not looked into: no sqlite3');
    return;
  }
  assert.equal(asked.status, 0, asked.stderr);
  const events = JSON.parse(asked.stdout);
  const lost = events.findIndex((event) => event.text === 'lost');
  assert.ok(lost >= 0, asked.stdout);
  const back = events.slice(lost).find((event) => event.text === 'listening');
  assert.ok(back?.gap_ms > 0, `the log knows no gap: ${asked.stdout}`);
}

for (const how of ['remove', 'kill', 'suspend', 'freeze']) {
  test(`the card is lost and comes back: ${how}`, { skip }, async () => {
    const folder = makeFolder();
    const made = startCard();
    try {
      const daemon = await start(['--input', 'testcard'], { folder, env: made.env });
      const stream = await watch(daemon).opened;
      await stream.next((event) => event.event === 'level');
      const away = Date.now();
      card('unplug', made.folder, how);
      const lost = await stream.next((e) => e.event === 'input' && e.data.state === 'lost');
      const seen = Date.now() - away;
      assert.equal((await get(daemon, '/api/v1/state')).input.state, 'lost');
      const before = stream.list.length;
      card('replug', made.folder);
      const back = Date.now();
      await stream.next((e) => e.event === 'input' && e.data.state === 'listening' &&
        stream.list.indexOf(e) >= before);
      const again = Date.now() - back;
      console.log(`${how}: loss in the stream after ${seen} ms ("${lost.data.text}"), ` +
        `listening again ${again} ms after the return`);
      assert.ok(seen <= seenMs, `seen after ${seen} ms, limit ${seenMs}`);
      assert.ok(again <= againMs, `listening after ${again} ms, limit ${againMs}`);
      const from = stream.list.length;
      await stream.next((e) => e.event === 'level' && stream.list.indexOf(e) >= from);
      stream.close();
      assert.equal((await daemon.stop()).status, 0);
      checkLog(path.join(folder, 'wane', 'log.sqlite'));
    } finally {
      stopCard(made);
    }
  });
}

test('an unknown card is refused with the list of those that are there', { skip }, async () => {
  const made = startCard();
  try {
    const env = { ...process.env, ...made.env };
    const refused = await run('waned', ['--listen', '127.0.0.1:0', '--input', 'gong'], { env });
    assert.equal(refused.status, 1);
    assert.match(refused.stderr, /no sound card named `gong`; there are `testcard`, `default`\n$/);
    const listed = await run('wane', ['inputs', '--json'], { env });
    assert.equal(listed.status, 0, listed.stderr);
    const cards = listed.stdout.trim().split('\n').map((line) => JSON.parse(line));
    assert.deepEqual(cards.map((entry) => entry.input), ['testcard', 'default']);
    assert.ok(cards.every((entry) => entry.behind_server && entry.warnings.length === 1));
  } finally {
    stopCard(made);
  }
});
