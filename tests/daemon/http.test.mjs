// Every call of the contract's table, and what hostile or clumsy clients send.
import assert from 'node:assert/strict';
import test, { before } from 'node:test';
import net from 'node:net';
import {
  call, get, hasEnded, makeFolder, ring, sendRaw, start, tile, until, wav, watch, within, writeTile,
} from './support.mjs';

let daemon;
before(async () => {
  const folder = makeFolder();
  daemon = await start(['--input', writeTile(folder, 5), '--fast'], { folder });
  await until(daemon, '/api/v1/state', hasEnded);
});

const status = async (method, address, body, headers) =>
  (await call(daemon, method, address, body, headers)).status;

function assertProblem(answer, wanted, pattern) {
  assert.equal(answer.status, wanted, answer.text);
  assert.match(answer.headers.get('content-type'), /^application\/problem\+json/);
  assert.equal(answer.json.status, wanted); // RFC 9457, section 3.1.2
  assert.equal(typeof answer.json.title, 'string');
  if (pattern) assert.match(answer.json.detail, pattern);
}

const raw = (text) => sendRaw(daemon.port, text.replaceAll('HOST', `127.0.0.1:${daemon.port}`));
const statusOf = (answer) => Number(answer.split(' ')[1]);

// --- looking ---

test('pages of strikes are keyset pages that keep the question', async () => {
  const first = await get(daemon, '/api/v1/strikes?limit=2&verdict=good,doubtful,rejected');
  assert.deepEqual(first.strikes.map((strike) => strike.id), [5, 4]);
  assert.match(first.next, /before=4/);
  assert.match(first.next, /verdict=good%2Cdoubtful%2Crejected/);
  const second = await get(daemon, first.next);
  assert.deepEqual(second.strikes.map((strike) => strike.id), [3, 2]);
  const third = await get(daemon, second.next);
  assert.deepEqual(third.strikes.map((strike) => strike.id), [1]);
  assert.equal(third.next, undefined);
  assert.equal(third.revision, first.revision);
});

test('a wrong word of a query is said, with those that exist', async () => {
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes?limt=3'), 400, /limt.*limit/);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes?limit=0'), 400, /limit/);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes?limit=1001'), 400, /limit/);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes?limit=2&limit=3'), 400, /twice/);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes?verdict=fine'), 400, /verdict/);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes?from=yesterday'), 400, /from/);
  assertProblem(await call(daemon, 'GET', '/api/v1/state?x=1'), 400, /x/);
});

test('ids that are none are 404, and so is what does not exist', async () => {
  for (const id of ['0', '-1', '1.5', 'abc', '01', '99999999999999999999', '%00', '1%2f2'])
    assertProblem(await call(daemon, 'GET', `/api/v1/strikes/${id}`), 404);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes/900'), 404, /900/);
  assertProblem(await call(daemon, 'GET', '/api/v1/nothing'), 404);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes/900/plot'), 404);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes/900/wave'), 404);
});

test('the wave of a strike is a WAV file with its samples', async () => {
  const answer = await call(daemon, 'GET', '/api/v1/strikes/1/wave');
  assert.equal(answer.status, 200);
  assert.equal(answer.headers.get('content-type'), 'audio/wav');
  assert.match(answer.headers.get('content-disposition'), /attachment/);
  assert.equal(Buffer.from(answer.bytes.subarray(0, 4)).toString(), 'RIFF');
  assert.ok(answer.bytes.length > 40000);
});

test('the plot follows the samples, the fit and the noise', async () => {
  const strike = await get(daemon, '/api/v1/strikes/2');
  const plot = await get(daemon, '/api/v1/strikes/2/plot?width=600');
  assert.equal(plot.trace.min.length, 600);
  const peak = Math.max(...plot.trace.max);
  assert.ok(Math.abs(20 * Math.log10(peak) - strike.peak_dbfs) < 0.2, `${peak}`);
  const [decay] = plot.decay;
  assert.equal(decay.label, strike.modes[0].label);
  // A decay of alpha falls 20 log10(e) alpha dB a second (contract.md, tau = 1/alpha).
  const slope =
    (decay.fit_db[1] - decay.fit_db[0]) / (decay.fit_t_s[1] - decay.fit_t_s[0]);
  const wanted = -20 * Math.LOG10E * strike.modes[0].decay_per_s;
  assert.ok(Math.abs(slope / wanted - 1) < 1e-3, `${slope}, ${wanted}`);
  // The demodulated samples lie on the line while it is far over the noise.
  decay.t_s.forEach((t, i) => {
    const line = decay.fit_db[0] + slope * (t - decay.fit_t_s[0]);
    if (line > decay.noise_db + 30) assert.ok(Math.abs(decay.db[i] - line) < 0.5, `${t}`);
  });
  const top = plot.spectrum.db.indexOf(Math.max(...plot.spectrum.db));
  assert.ok(Math.abs(plot.spectrum.f_hz[top] - tile.f_hz) < 3, plot.spectrum.f_hz[top]);
  const nearTop = plot.near.db.indexOf(Math.max(...plot.near.db));
  assert.ok(Math.abs(plot.near.f_hz[nearTop] - tile.f_hz) < 0.5, plot.near.f_hz[nearTop]);
  const { t_s, over_noise } = plot.residual;
  const late = over_noise.filter((_, i) => t_s[i] > 0.05 && t_s[i] < 1.3);
  const mean = late.reduce((sum, value) => sum + value, 0) / late.length;
  assert.ok(mean > 0.8 && mean < 1.2, `residual ${mean} of the noise`);
  const zoom = await get(daemon, '/api/v1/strikes/2/plot?width=100&from=0.1&to=0.2');
  assert.ok(Math.abs(zoom.trace.t0_s - 0.1) < 1e-3);
  assert.ok(Math.abs(zoom.trace.t0_s + 100 * zoom.trace.dt_s - 0.2) < 1e-3);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes/2/plot?width=9'), 400, /width/);
  assertProblem(await call(daemon, 'GET', '/api/v1/strikes/2/plot?from=2&to=1'), 400);
});

test('the last minute heard is a WAV file, as long as asked', async () => {
  const answer = await call(daemon, 'GET', '/api/v1/recent.wav?seconds=2');
  assert.equal(answer.status, 200, answer.text);
  const bytes = Buffer.from(answer.bytes);
  assert.equal(bytes.toString('latin1', 0, 4), 'RIFF');
  assert.equal(bytes.readUInt32LE(54), 2 * 48000 * 4);
  assertProblem(await call(daemon, 'GET', '/api/v1/recent.wav?seconds=61'), 400, /60/);
});

test('metrics end as OpenMetrics wants, healthz is short', async () => {
  const metrics = await call(daemon, 'GET', '/metrics');
  assert.match(metrics.headers.get('content-type'), /^application\/openmetrics-text/);
  assert.ok(metrics.text.endsWith('# EOF\n')); // OpenMetrics 1.0, section "EOF"
  assert.match(metrics.text, /^wane_strikes_read_total 5$/m);
  assert.equal((await call(daemon, 'GET', '/healthz')).text, 'ok\n');
});

test('exports stream the whole selection', async () => {
  const csv = await call(daemon, 'GET', '/api/v1/export.csv');
  assert.equal(csv.status, 200, csv.text);
  assert.ok(csv.text.trim().split(/\r?\n/).length >= 6);
  const json = await call(daemon, 'GET', '/api/v1/export.json?limit=2');
  assert.equal(json.status, 200, json.text);
  assert.ok(json.json !== null, 'one JSON document');
  assertProblem(await call(daemon, 'GET', '/api/v1/export.csv?vedict=good'), 400);
});

// --- changing ---

test('a note and setting aside are kept, announced, and taken back', async () => {
  const stream = await watch(daemon).opened;
  await stream.next((event) => event.event === 'hello');
  const before_it = await get(daemon, '/api/v1/strikes/3');
  const set = await call(daemon, 'PATCH', '/api/v1/strikes/3', {
    note: 'held by hand\n<script>', set_aside: 'touched',
  });
  assert.equal(set.status, 200, set.text);
  assert.equal(set.json.note, 'held by hand\n<script>');
  assert.equal(set.json.set_aside, 'touched');
  assert.ok(set.json.revision > before_it.revision);
  const event = await stream.next((e) => e.event === 'changed' && e.data.id === 3);
  assert.deepEqual(event.data, set.json);
  assert.equal(event.id, null, 'no id: it would move Last-Event-ID');
  const back = await call(daemon, 'PATCH', '/api/v1/strikes/3', { note: null, set_aside: null });
  assert.equal(back.json.note, null);
  assert.equal(back.json.set_aside, null);
  const stale = await call(daemon, 'PATCH', '/api/v1/strikes/3', { note: 'x' }, {
    'If-Match': set.headers.get('etag'),
  });
  assertProblem(stale, 412);
  assertProblem(await call(daemon, 'PATCH', '/api/v1/strikes/900', { note: 'x' }), 404);
  const changed = await get(daemon, `/api/v1/strikes?changed_since=${before_it.revision}`);
  assert.ok(changed.strikes.some((strike) => strike.id === 3));
  stream.close();
});

test('a reread with the same settings gives the same digits', async () => {
  const old = await get(daemon, '/api/v1/strikes/2');
  const again = await call(daemon, 'POST', '/api/v1/strikes/2/reread', {});
  assert.equal(again.status, 200, again.text);
  assert.deepEqual(again.json.modes, old.modes);
  assert.equal(again.json.onset_s, old.onset_s);
  const narrow = await call(daemon, 'POST', '/api/v1/strikes/4/reread', { f_high_hz: 1000 });
  assert.equal(narrow.status, 200, narrow.text);
  assert.ok(narrow.json.modes.every((mode) => mode.f_hz <= 1000));
  assertProblem(await call(daemon, 'POST', '/api/v1/strikes/2/reread', { f_hi: 1 }), 400, /f_hi/);
});

test('a series is opened, named and closed', async () => {
  const made = await call(daemon, 'POST', '/api/v1/series', {
    name: 'tiles of Tuesday', part: 'tile', specimen: '17',
  });
  assert.equal(made.status, 201, made.text);
  const { id } = made.json;
  assert.equal((await get(daemon, '/api/v1/state')).series.id, id);
  const named = await call(daemon, 'PATCH', `/api/v1/series/${id}`, { name: 'tiles, again' });
  assert.equal(named.json.name, 'tiles, again');
  const closed = await call(daemon, 'PATCH', `/api/v1/series/${id}`, { close: true });
  assert.notEqual(closed.json.closed, null);
  assert.equal((await get(daemon, '/api/v1/state')).series, null);
  assert.ok((await get(daemon, '/api/v1/series')).series.some((series) => series.id === id));
  assertProblem(await call(daemon, 'GET', '/api/v1/series/900'), 404);
});

test('a part sheet needs the tag of the version that it changes', async () => {
  const sheet = '[part]\nname = tile\n';
  const address = '/api/v1/parts/tile';
  assertProblem(await call(daemon, 'PUT', address, { sheet }), 428, /If-Match/);
  const made = await call(daemon, 'PUT', address, { sheet }, { 'If-None-Match': '*' });
  assert.equal(made.status, 200, made.text);
  const read = await call(daemon, 'GET', address);
  assert.equal(read.text, sheet);
  const etag = read.headers.get('etag');
  assert.equal(etag, made.headers.get('etag'));
  const changed = await call(daemon, 'PUT', address, { sheet: sheet + '; 2\n' }, { 'If-Match': etag });
  assert.equal(changed.status, 200, changed.text);
  assertProblem(await call(daemon, 'PUT', address, { sheet }, { 'If-Match': etag }), 412);
  assert.equal((await get(daemon, '/api/v1/parts')).parts[0].name, 'tile');
  assertProblem(await call(daemon, 'GET', '/api/v1/parts/none'), 404);
});

test('the trigger is changed only by who has seen it', async () => {
  const seen = await call(daemon, 'GET', '/api/v1/trigger');
  const etag = seen.headers.get('etag');
  assertProblem(await call(daemon, 'PUT', '/api/v1/trigger', { trigger_db: 20 }), 428);
  const set = await call(daemon, 'PUT', '/api/v1/trigger', { trigger_db: 20 }, { 'If-Match': etag });
  assert.equal(set.status, 200, set.text);
  assert.equal(set.json.trigger_db, 20);
  const late = await call(daemon, 'PUT', '/api/v1/trigger', { trigger_db: 9 }, { 'If-Match': etag });
  assertProblem(late, 412);
  const wrong = await call(daemon, 'PUT', '/api/v1/trigger', { trigger_db: 99 }, { 'If-Match': '*' });
  assertProblem(wrong, 400, /trigger_db/);
  const auto = await call(daemon, 'PUT', '/api/v1/trigger', {}, { 'If-Match': '*' });
  assert.deepEqual(auto.json, seen.json);
});

test('a measurement is taken', async () => {
  const made = await call(daemon, 'POST', '/api/v1/measurements', {
    name: 'temperature', value: 21.5, unit: '°C',
  });
  assert.equal(made.status, 201, made.text);
  assertProblem(await call(daemon, 'POST', '/api/v1/measurements', { name: 'x' }), 400, /value/);
  assertProblem(
    await call(daemon, 'POST', '/api/v1/measurements', { name: 'a\nb', value: 1 }), 400);
});

test('a recording that is sent is read, and nonsense is said to be none', async () => {
  const file = wav([ring({ seconds: 2.5, strikes: [{ at_s: 0.7, modes: [tile] }] })]);
  const answer = await call(daemon, 'POST', '/api/v1/recordings?channel=all&name=sent.wav', file, {
    'Content-Type': 'application/octet-stream',
  });
  assert.equal(answer.status, 200, answer.text);
  assert.match(answer.headers.get('content-type'), /ndjson/);
  assert.equal(JSON.parse(answer.text.trim()).strike, 1);
  const newest = (await get(daemon, '/api/v1/strikes?limit=1')).strikes[0].id;
  assert.equal(newest, 5, 'not stored');
  const silent = await call(daemon, 'POST', '/api/v1/recordings', wav([new Float32Array(48000)]), {
    'Content-Type': 'audio/wav',
  });
  assert.equal(silent.status, 200, silent.text);
  assert.equal(silent.text, '');
  const text = await call(daemon, 'POST', '/api/v1/recordings?name=notes.wav', 'hello there', {
    'Content-Type': 'audio/wav',
  });
  assertProblem(text, 422, /^notes\.wav/);
  const empty = await call(daemon, 'POST', '/api/v1/recordings', new Uint8Array(0), {
    'Content-Type': 'audio/wav',
  });
  assertProblem(empty, 422);
  const form = await call(daemon, 'POST', '/api/v1/recordings', 'x', { 'Content-Type': 'text/plain' });
  assertProblem(form, 415);
});

test('an input that is a file, or none, is refused, and the bench can be chosen', async () => {
  for (const name of ['/etc/passwd', 'x.wav', '-', '', 'no such card'])
    assert.ok((await status('PUT', '/api/v1/input', { name })) >= 400, name);
  const stream = await watch(daemon).opened;
  const hello = await stream.next((event) => event.event === 'hello');
  const put = await call(daemon, 'PUT', '/api/v1/input', { name: 'simulated' });
  assert.equal(put.status, 200, put.text);
  assert.equal(put.json.state, 'listening');
  assert.equal(await within(stream.ended, 'the stream of the old log to end'), 'end');
  const other = await watch(daemon).opened;
  const again = await other.next((event) => event.event === 'hello');
  assert.notEqual(again.data.log, hello.data.log, 'invented strikes have a log of their own');
  assert.match((await get(daemon, '/api/v1/state')).log.path, /demo\.sqlite$/);
  await other.next((event) => event.event === 'level' && event.data.dbfs !== null);
  other.close();
});

// --- hostile ---

test('exactly one Host, and it is ours', async () => {
  const ask = (head) => raw(`GET /healthz HTTP/1.1\r\n${head}Connection: close\r\n\r\n`);
  assert.equal(statusOf(await ask('Host: HOST\r\n')), 200);
  assert.equal(statusOf(await ask(`Host: localhost:${daemon.port}\r\n`)), 200);
  assert.equal(statusOf(await ask('')), 400);
  assert.equal(statusOf(await ask('Host: HOST\r\nHost: HOST\r\n')), 400);
  assert.equal(statusOf(await ask('Host: HOST\r\nhost: evil.example\r\n')), 400);
  assert.equal(statusOf(await ask('Host: evil.example\r\n')), 421);
  assert.equal(statusOf(await ask('Host: 127.0.0.1:1\r\n')), 421);
  assert.equal(statusOf(await ask('Host: 127.0.0.1\r\n')), 421);
});

test('a body has one length', async () => {
  const answer = await raw(
    'POST /api/v1/measurements HTTP/1.1\r\nHost: HOST\r\nContent-Type: application/json\r\n' +
      'Content-Length: 2\r\nTransfer-Encoding: chunked\r\nConnection: close\r\n\r\n0\r\n\r\n',
  );
  assert.equal(statusOf(answer), 400);
});

test('other sites are refused, a link to look at is not', async () => {
  const foreign = [
    { Origin: 'http://evil.example' },
    { Origin: 'null' },
    { Origin: `https://127.0.0.1:${daemon.port}` },
    { 'Sec-Fetch-Site': 'cross-site' },
    { 'Sec-Fetch-Site': 'same-site' },
  ];
  for (const headers of foreign) {
    const text = Object.entries(headers).map(([key, value]) => `${key}: ${value}\r\n`).join('');
    const post = await raw(
      `POST /api/v1/measurements HTTP/1.1\r\nHost: HOST\r\n${text}` +
        'Content-Type: application/json\r\nContent-Length: 2\r\nConnection: close\r\n\r\n{}',
    );
    assert.equal(statusOf(post), 403, text);
  }
  const link = await raw(
    'GET / HTTP/1.1\r\nHost: HOST\r\nSec-Fetch-Site: cross-site\r\nSec-Fetch-Mode: navigate\r\n' +
      'Connection: close\r\n\r\n',
  );
  assert.equal(statusOf(link), 200);
  const own = await call(daemon, 'POST', '/api/v1/measurements', { name: 'x', value: 1 }, {
    Origin: daemon.url, 'Sec-Fetch-Site': 'same-origin',
  });
  assert.equal(own.status, 201);
  assert.equal(own.headers.get('access-control-allow-origin'), null);
});

test('bad JSON, a wrong type, and a body that is too large', async () => {
  const address = '/api/v1/measurements';
  for (const body of ['', '{', '[]', '"x"', 'null', '{"a":1,"a":2}', '{"name":"a\\u0000b"}',
    '[' .repeat(5000), '{"value":1e999}'])
    assertProblem(await call(daemon, 'POST', address, body), 400);
  assert.equal(await status('POST', address, '{}', { 'Content-Type': 'text/plain' }), 415);
  assertProblem(await call(daemon, 'POST', address, `{"name":"${'x'.repeat(70000)}"}`), 413);
  const chunked = await raw(
    `POST ${address} HTTP/1.1\r\nHost: HOST\r\nContent-Type: application/json\r\n` +
      'Transfer-Encoding: chunked\r\nConnection: close\r\n\r\n' +
      `${(70000).toString(16)}\r\n${'x'.repeat(70000)}\r\n0\r\n\r\n`,
  );
  assert.equal(statusOf(chunked), 413);
  const huge = await raw(
    'POST /api/v1/recordings HTTP/1.1\r\nHost: HOST\r\nContent-Type: audio/wav\r\n' +
      'Content-Length: 99999999999\r\nConnection: close\r\n\r\n',
  );
  assert.equal(statusOf(huge), 413);
});

test('a wrong method says which are right', async () => {
  for (const [method, address, allow] of [
    ['DELETE', '/api/v1/strikes/1', 'GET, HEAD, PATCH'],
    ['POST', '/api/v1/state', 'GET, HEAD'],
    ['PUT', '/api/v1/series', 'GET, HEAD, POST'],
    ['GET', '/api/v1/input', 'PUT'],
    ['POST', '/', 'GET, HEAD'],
  ]) {
    const answer = await call(daemon, method, address, method === 'GET' ? undefined : {});
    assertProblem(answer, 405);
    assert.equal(answer.headers.get('allow'), allow); // RFC 9110, section 15.5.6
  }
  assert.equal(statusOf(await raw('BREW / HTTP/1.1\r\nHost: HOST\r\nConnection: close\r\n\r\n')), 405);
});

test('no address leads out of the web folder', async () => {
  for (const path of ['/../CMakeLists.txt', '/%2e%2e/CMakeLists.txt', '/..%2fCMakeLists.txt',
    '//etc/passwd', '/plot/../../README.md', '/.git/config', '/package.json', '/%00', '/index.html%00.js',
    '/vendor/../../../etc/passwd'])
    assert.equal(
      statusOf(await raw(`GET ${path} HTTP/1.1\r\nHost: HOST\r\nConnection: close\r\n\r\n`)), 404, path);
});

test('a page has a policy, a tag, and no sniffing', async () => {
  const page = await call(daemon, 'GET', '/');
  assert.equal(page.status, 200);
  assert.match(page.headers.get('content-security-policy'), /default-src 'none'/);
  assert.doesNotMatch(page.headers.get('content-security-policy'), /unsafe/);
  assert.equal(page.headers.get('x-content-type-options'), 'nosniff');
  const etag = page.headers.get('etag');
  if (etag) assert.equal(await status('GET', '/', undefined, { 'If-None-Match': etag }), 304);
});

test('headers without end, half a request, and silence hurt nobody else', async () => {
  const long = await raw(
    `GET /healthz HTTP/1.1\r\nHost: HOST\r\nX: ${'y'.repeat(100000)}\r\nConnection: close\r\n\r\n`);
  assert.ok([400, 413, 431].includes(statusOf(long)), long.slice(0, 40));
  const address = await raw(`GET /${'a'.repeat(60000)} HTTP/1.1\r\nHost: HOST\r\n\r\n`);
  assert.ok([404, 414, 431].includes(statusOf(address)), address.slice(0, 40));
  const idle = Array.from({ length: 30 }, () => net.connect(daemon.port, '127.0.0.1'));
  idle.forEach((socket) => {
    socket.on('error', () => {});
    socket.write('GET /healthz HT');
  });
  assert.equal((await call(daemon, 'GET', '/healthz')).status, 200);
  idle.forEach((socket) => socket.destroy());
});

test('HEAD gives the headers of GET and no body', async () => {
  const answer = await call(daemon, 'HEAD', '/api/v1/state');
  assert.equal(answer.status, 200);
  assert.equal(answer.text, '');
});
