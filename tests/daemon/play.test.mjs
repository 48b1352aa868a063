// From a recording to the log, the stream and back: the whole daemon.
import assert from 'node:assert/strict';
import test from 'node:test';
import {
  call, get, hasEnded, makeFolder, ring, run, start, tile, until, wav, watch, within, writeTile,
} from './support.mjs';
import { writeFileSync } from 'node:fs';
import path from 'node:path';

const idsOf = (stream) =>
  stream.list.filter((event) => event.event === 'strike').map((event) => Number(event.id));

test('a recording played fast is read, logged, and served, and the daemon goes on', async () => {
  const folder = makeFolder();
  const file = writeTile(folder, 4);
  const daemon = await start(['--input', file, '--fast'], { folder });
  const state = await until(daemon, '/api/v1/state', hasEnded);
  assert.equal(state.input.state, 'none');
  const page = await get(daemon, '/api/v1/strikes');
  assert.equal(page.strikes.length, 4);
  assert.deepEqual(page.strikes.map((strike) => strike.id), [4, 3, 2, 1]);
  assert.equal(page.next, undefined);
  for (const strike of page.strikes) {
    // Followed to alpha T = 6 with nothing amiss (contract.md, "Verdict and reasons").
    assert.equal(strike.verdict, 'good', `${strike.reasons} ${JSON.stringify(strike.why)}`);
    const [mode] = strike.modes;
    // Truth: the samples were made with these numbers (support.mjs).
    const f_error = Math.abs(mode.f_hz - tile.f_hz);
    assert.ok(f_error < 6 * mode.f_u_hz, `f off by ${f_error}, u ${mode.f_u_hz}`);
    const decay_error = Math.abs(mode.decay_per_s - tile.decay_per_s);
    assert.ok(decay_error < 6 * mode.decay_u_per_s, `${decay_error}, u ${mode.decay_u_per_s}`);
    assert.equal(strike.source, file);
  }
  assert.equal((await call(daemon, 'GET', '/healthz')).status, 200);
  assert.deepEqual(await daemon.stop(), { status: 0, signal: null });
});

test('the daemon and `wane read` give the same digits', async () => {
  const folder = makeFolder();
  const file = writeTile(folder, 3);
  const read = await run('wane', ['read', '--json', file]);
  assert.equal(read.status, 0, read.stderr);
  const lines = read.stdout.trim().split('\n').map((line) => JSON.parse(line));
  const daemon = await start(['--input', file, '--fast'], { folder });
  await until(daemon, '/api/v1/state', hasEnded);
  const { strikes } = await get(daemon, '/api/v1/strikes');
  strikes.reverse();
  assert.equal(strikes.length, lines.length);
  lines.forEach((line, i) => {
    for (const key of ['onset_s', 'window_s', 'verdict', 'reasons', 'why', 'modes', 'strike'])
      assert.deepEqual(strikes[i][key], line[key], `strike ${i + 1}, ${key}`);
  });
  const sent = await call(
    daemon, 'POST', '/api/v1/recordings?name=tile.wav',
    wav([ring({ seconds: 2.5, strikes: [{ at_s: 0.7, modes: [tile] }] })]),
    { 'Content-Type': 'audio/wav' },
  );
  assert.equal(sent.status, 200, sent.text);
  assert.equal(JSON.parse(sent.text.trim().split('\n')[0]).source, 'tile.wav');
  await daemon.stop();
});

test('two channels are read each by itself, in the order of their onsets', async () => {
  const folder = makeFolder();
  const file = path.join(folder, 'two.wav');
  const slow = { f_hz: 700, decay_per_s: 1.2, amplitude: 0.3 };
  const left = ring({ seconds: 7, strikes: [{ at_s: 0.6, modes: [slow] }], seed: 2 });
  const right = ring({
    seconds: 7, seed: 3,
    strikes: [1, 2, 3].map((at_s) => ({ at_s, modes: [tile] })),
  });
  writeFileSync(file, wav([left, right]));
  const daemon = await start(['--input', file, '--fast', '--channel', '1,2'], { folder });
  await until(daemon, '/api/v1/state', hasEnded);
  const { strikes } = await get(daemon, '/api/v1/strikes');
  strikes.reverse();
  assert.deepEqual(strikes.map((strike) => strike.channel), [1, 2, 2, 2]);
  const onsets = strikes.map((strike) => strike.onset_s);
  assert.deepEqual(onsets, [...onsets].sort((a, b) => a - b));
  await daemon.stop();
});

test('a fresh stream replays nothing, ?after= and Last-Event-ID replay every strike once', async () => {
  const folder = makeFolder();
  const file = writeTile(folder, 6);
  const daemon = await start(['--input', file, '--fast'], { folder });
  await until(daemon, '/api/v1/state', hasEnded);
  const fresh = await watch(daemon).opened;
  const hello = await fresh.next((event) => event.event === 'hello');
  assert.equal(hello.data.newest, 6);
  const all = await watch(daemon, '/api/v1/stream?after=0').opened;
  await all.next((event) => event.id === '6');
  assert.deepEqual(idsOf(all), [1, 2, 3, 4, 5, 6]);
  const some = await watch(daemon, '/api/v1/stream?after=1', { 'Last-Event-ID': '4' }).opened;
  await some.next((event) => event.id === '6');
  assert.deepEqual(idsOf(some), [5, 6], 'Last-Event-ID wins over ?after=');
  const one = await get(daemon, '/api/v1/strikes/5');
  assert.deepEqual(some.list.find((event) => event.id === '5').data, one);
  const foreign = await watch(daemon, '/api/v1/stream?after=900').opened;
  await foreign.next((event) => event.event === 'reset');
  // A change is seen by the fresh one: it was open, and had nothing replayed before it.
  await call(daemon, 'PATCH', '/api/v1/strikes/2', { note: 'seen' });
  await fresh.next((event) => event.event === 'changed' && event.data.note === 'seen');
  assert.deepEqual(idsOf(fresh), []);
  [fresh, all, some, foreign].forEach((stream) => stream.close());
  assert.equal((await daemon.stop()).status, 0);
});

test('kill -9 loses nothing that was announced, and ids go on', async () => {
  const folder = makeFolder();
  const log = path.join(folder, 'log.sqlite');
  const file = writeTile(folder, 40);
  let announced = [];
  const daemon = await start(['--input', file, '--fast', '--log', log], { folder });
  const stream = await watch(daemon, '/api/v1/stream?after=0').opened;
  await stream.next((event) => event.event === 'strike');
  daemon.child.kill('SIGKILL');
  await daemon.ended;
  await stream.ended;
  announced = stream.list.filter((event) => event.event === 'strike');
  assert.ok(announced.length >= 1);
  const again = await start(['--log', log], { folder });
  for (const event of announced) {
    const kept = await get(again, `/api/v1/strikes/${event.id}`);
    assert.deepEqual(kept, event.data);
  }
  const newest = (await get(again, '/api/v1/state')).log.newest;
  await again.stop();
  const third = await start(['--input', file, '--fast', '--log', log], { folder });
  await until(third, '/api/v1/state', hasEnded);
  const page = await get(third, '/api/v1/strikes?limit=1000');
  assert.equal(page.strikes.length, newest + 40);
  await third.stop();
});

test('SIGTERM with 20 watchers ends all streams and the daemon within 2 s', async () => {
  const folder = makeFolder();
  const daemon = await start(['--input', 'simulated'], { folder });
  const streams = await Promise.all(Array.from({ length: 20 }, () => watch(daemon).opened));
  await Promise.all(streams.map((stream) => stream.next((event) => event.event === 'level')));
  const begin = process.hrtime.bigint();
  const end = await daemon.stop();
  const ms = Number(process.hrtime.bigint() - begin) / 1e6;
  assert.deepEqual(end, { status: 0, signal: null });
  for (const stream of streams) assert.equal(await within(stream.ended, 'a stream to end'), 'end');
  console.log(`ended in ${ms.toFixed(0)} ms`); // judged by a person: the machine may be busy
});

test('SIGINT at a strike at hand closes and keeps it', async () => {
  const folder = makeFolder();
  const log = path.join(folder, 'log.sqlite');
  const daemon = await start(['--input', 'simulated', '--log', log], { folder });
  const stream = await watch(daemon).opened;
  await stream.next((event) => event.event === 'level' && event.data.ringing);
  assert.equal((await daemon.stop('SIGINT')).status, 0);
  const again = await start(['--log', log], { folder });
  const { strikes } = await get(again, '/api/v1/strikes');
  assert.ok(strikes.length >= 1, 'the strike at hand is in the log');
  await again.stop();
});

test('the simulated bench shows a first strike, forming before, within its ten seconds', async () => {
  const daemon = await start(['--input', 'simulated']);
  const stream = await watch(daemon).opened;
  const forming = await stream.next((event) => event.event === 'forming');
  assert.ok(forming.data.rang_s > 0);
  assert.equal(forming.id, null);
  const strike = await stream.next((event) => event.event === 'strike');
  assert.equal(strike.data.input, 'simulated');
  const state = await get(daemon, '/api/v1/state');
  assert.match(state.log.path, /demo\.sqlite$/);
  await daemon.stop();
});

test('a client that never reads delays nobody, the 201st watcher is told to come back', async () => {
  const folder = makeFolder();
  const config = path.join(folder, 'waned.ini');
  writeFileSync(config, '[serve]\nwatchers_max = 5\n');
  const daemon = await start(['--input', 'simulated', '--config', config], { folder });
  const deaf = await watch(daemon).opened;
  deaf.response.pause();
  const others = await Promise.all([1, 2, 3, 4].map(() => watch(daemon).opened));
  const sixth = await watch(daemon).opened;
  assert.equal(sixth.status, 503);
  assert.ok(Number(sixth.headers['retry-after']) > 0);
  await Promise.all(others.map((stream) => stream.next((event) => event.event === 'strike')));
  [deaf, ...others, sixth].forEach((stream) => stream.close());
  assert.equal((await daemon.stop()).status, 0);
});
