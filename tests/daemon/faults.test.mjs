// A log that takes nothing, fits that fall behind, many watchers: nothing is lost in silence.
import assert from 'node:assert/strict';
import { spawn } from 'node:child_process';
import { writeFileSync } from 'node:fs';
import path from 'node:path';
import test from 'node:test';
import {
  buildDir, call, get, hasEnded, makeFolder, start, until, watch, within, writeTile,
} from './support.mjs';

test('a log that cannot grow: heard strikes are shown as unkept, and the daemon goes on', async () => {
  const folder = makeFolder();
  const log = path.join(folder, 'log.sqlite');
  // Makes the log, so that only strikes have to fit under the limit.
  await (await start(['--log', log], { folder })).stop();
  const file = writeTile(folder, 30);
  // A limit on the size of files does what a full disk does (SQLITE_FULL or an I/O error).
  const shim = path.join(folder, 'waned');
  writeFileSync(shim, `#!/bin/sh\nulimit -f 1200\nexec '${buildDir}/waned' "$@"\n`, { mode: 0o755 });
  const daemon = await start(['--input', file, '--fast', '--log', log], { folder, program: shim });
  const stream = await watch(daemon, '/api/v1/stream?after=0').opened;
  const unkept = await stream.next((event) => event.event === 'unkept');
  assert.equal(unkept.id, null);
  assert.equal(unkept.data.id, null);
  assert.ok(unkept.data.modes.length >= 1, 'with its reading');
  const state = await get(daemon, '/api/v1/state');
  assert.equal(state.log.state, 'full');
  assert.ok(state.log.unkept >= 1);
  assert.notEqual(state.log.unkept_since, null);
  const refused = await call(daemon, 'PATCH', '/api/v1/strikes/1', { note: 'x' });
  assert.ok([200, 503].includes(refused.status), refused.text);
  const kept = await get(daemon, '/api/v1/strikes?limit=100');
  const announced = stream.list.filter((event) => event.event === 'strike').map((e) => e.data.id);
  for (const id of announced) assert.ok(kept.strikes.some((strike) => strike.id === id));
  stream.close();
  assert.equal((await daemon.stop()).status, 0);
  // With room again the log is sound and goes on.
  const again = await start(['--log', log], { folder });
  assert.ok((await get(again, '/api/v1/strikes')).strikes.length >= announced.length);
  await again.stop();
});

test('two hundred watchers all see the strike, and the daemon ends with them there', async () => {
  const folder = makeFolder();
  const file = writeTile(folder, 2);
  const daemon = await start(['--input', file], { folder });
  const streams = await Promise.all(Array.from({ length: 200 }, () => watch(daemon, '/api/v1/stream?after=0').opened));
  assert.ok(streams.every((stream) => stream.status === 200));
  assert.equal((await watch(daemon).opened).status, 503);
  assert.equal((await call(daemon, 'GET', '/healthz')).status, 200, 'others are still answered');
  const events = await Promise.all(
    streams.map((stream) => stream.next((event) => event.id === '1')),
  );
  for (const event of events) assert.deepEqual(event.data, events[0].data);
  assert.deepEqual(await daemon.stop(), { status: 0, signal: null });
  for (const stream of streams) assert.equal(await within(stream.ended, 'an end'), 'end');
});

test('requests under way when the daemon ends are answered', async () => {
  const folder = makeFolder();
  const daemon = await start(['--input', writeTile(folder, 3), '--fast'], { folder });
  await until(daemon, '/api/v1/state', hasEnded);
  const asked = Array.from({ length: 24 }, (_, i) =>
    call(daemon, 'GET', `/api/v1/strikes/${1 + (i % 3)}/plot?width=1000`).then(
      (answer) => answer.status,
      () => 'cut',
    ),
  );
  await Promise.race(asked);
  assert.equal((await daemon.stop()).status, 0);
  for (const status of await Promise.all(asked)) assert.ok([200, 503, 'cut'].includes(status));
});

test('the service manager is told', async () => {
  const folder = makeFolder();
  const socket = path.join(folder, 'notify');
  // A datagram socket that prints what it gets: what systemd does (sd_notify(3)).
  const listener = spawn('/usr/bin/python3', [
    '-u', '-c',
    'import socket,sys\ns=socket.socket(socket.AF_UNIX,socket.SOCK_DGRAM)\ns.bind(sys.argv[1])\n' +
      'print("bound")\nwhile True: print(s.recv(4096).decode(),flush=True)',
    socket,
  ]);
  let told = '';
  const has = (word) =>
    within(
      new Promise((resolve) => {
        const look = () => told.includes(word) && resolve();
        listener.stdout.on('data', look);
        look();
      }),
      word,
    );
  listener.stdout.on('data', (data) => (told += data));
  await has('bound');
  const daemon = await start(['--input', 'simulated'], {
    folder, env: { NOTIFY_SOCKET: socket, WATCHDOG_USEC: '30000000' },
  });
  await has('READY=1');
  await has('WATCHDOG=1');
  await has('STATUS=listening: simulated');
  await daemon.stop();
  await has('STOPPING=1');
  listener.kill();
});
