// The page from a laptop in another room: TLS, invitations, two rights. The laptop is another
// network namespace (ip netns and a veth pair) where that can be made, which needs root; else the
// machine's own address off the loopback.
import assert from 'node:assert/strict';
import { execFileSync, spawn, spawnSync } from 'node:child_process';
import { readFileSync, statSync } from 'node:fs';
import net from 'node:net';
import { networkInterfaces } from 'node:os';
import path from 'node:path';
import test, { after } from 'node:test';
import { buildDir, makeFolder, run, within } from './support.mjs';

const space = `wane${process.pid}`;
const veth = { near: `wn${process.pid}`, far: `wf${process.pid}` };
const ip = (...words) => execFileSync('ip', words, { stdio: 'pipe' });

function makeRoom() {
  const octet = process.pid % 250;
  try {
    ip('netns', 'add', space);
    ip('link', 'add', veth.near, 'type', 'veth', 'peer', 'name', veth.far, 'netns', space);
    ip('addr', 'add', `10.213.${octet}.1/24`, 'dev', veth.near);
    ip('link', 'set', veth.near, 'up');
    ip('-n', space, 'addr', 'add', `10.213.${octet}.2/24`, 'dev', veth.far);
    ip('-n', space, 'link', 'set', veth.far, 'up');
    return { address: `10.213.${octet}.1`, prefix: ['ip', 'netns', 'exec', space] };
  } catch (error) {
    spawnSync('ip', ['netns', 'del', space]);
    const own = Object.values(networkInterfaces()).flat().find((one) => one.family === 'IPv4' && !one.internal);
    const why = String(error.stderr ?? error.message).trim();
    return { address: own?.address, prefix: [], why: `no network namespace (${why})` };
  }
}

const room = makeRoom();
const children = [];
after(() => {
  children.forEach((child) => child.kill('SIGKILL'));
  if (room.prefix.length > 0) {
    spawnSync('ip', ['link', 'del', veth.near]);
    spawnSync('ip', ['netns', 'del', space]);
  }
});
if (room.why) console.log(`# ${room.why}: asking from the machine's own address ${room.address}`);
const skip = room.address ? false : `${room.why}, and no address off the loopback`;

async function startDoor(folder = makeFolder(), listen = room.address, words = []) {
  const env = { ...process.env, XDG_STATE_HOME: folder, XDG_CONFIG_HOME: folder };
  delete env.STATE_DIRECTORY;
  const child = spawn(path.join(buildDir, 'waned'), ['--listen', `${listen}:0`, ...words], { env });
  children.push(child);
  const bench = { child, folder, env, stderr: '', stdout: '' };
  child.stderr.on('data', (data) => (bench.stderr += data));
  bench.ended = new Promise((resolve) => child.on('close', resolve));
  bench.url = await within(new Promise((resolve, reject) => {
    child.stdout.on('data', (data) => {
      bench.stdout += data;
      const match = bench.stdout.match(/^listening on (\S+)\/\n/);
      if (match) resolve(match[1]);
    });
    bench.ended.then(() => reject(new Error(bench.stderr)));
  }), 'the ready line');
  bench.port = Number(new URL(bench.url).port);
  bench.invite = (...more) => run('wane', ['invite', ...more], { env });
  bench.stop = () => (child.kill('SIGTERM'), within(bench.ended, 'the end'));
  return bench;
}

/** Runs in the other room: one request by TLS, printed as JSON. */
const client = `
const { host, port, method, path, headers, body } = JSON.parse(process.argv[1]);
const request = require('node:https').request({ host, port, method, path, headers, rejectUnauthorized: false, agent: false, servername: '' }, (response) => {
  const fingerprint = response.socket.getPeerCertificate().fingerprint256;
  const answer = { status: response.statusCode, headers: response.headers, fingerprint, text: '' };
  const tell = () => { console.log(JSON.stringify(answer)); process.exit(); };
  response.on('data', (data) => { answer.text += data; if (/event-stream/.test(response.headers['content-type'])) tell(); });
  response.on('end', tell);
});
request.on('error', (error) => { console.log(JSON.stringify({ error: error.message })); });
request.end(body);`;

async function ask(bench, address, { method = 'GET', headers = {}, body, host = room.address } = {}) {
  const words = [...room.prefix, process.execPath, '-e', client,
    JSON.stringify({ host, port: bench.port, method, path: address, headers, body })];
  const child = spawn(words[0], words.slice(1), { stdio: ['ignore', 'pipe', 'inherit'] });
  let text = '';
  child.stdout.on('data', (data) => (text += data));
  await within(new Promise((resolve) => child.on('close', resolve)), `an answer to ${address}`);
  const answer = JSON.parse(text);
  if (answer.error) throw new Error(answer.error);
  return answer;
}

const problem = (answer, status, pattern = /./) => {
  assert.equal(answer.status, status, answer.text);
  assert.equal(answer.headers['content-type'], 'application/problem+json');
  assert.match(JSON.parse(answer.text).detail, pattern);
};
const joinPath = (invited) => invited.stdout.trim().replace(/^https:\/\/[^/]+/, '');
async function join(bench, ...words) {
  const answer = await ask(bench, joinPath(await bench.invite(...words)));
  assert.equal(answer.status, 200, answer.text);
  return { Cookie: answer.headers['set-cookie'][0].split(';')[0] };
}
const rename = { method: 'PUT', body: '{"trigger_db":20}' };
const json = { 'Content-Type': 'application/json', 'If-Match': '"none"' };

test('without an invitation nothing is told, by TLS or without', { skip }, async () => {
  const bench = await startDoor();
  for (const address of ['/', '/api/v1/state', '/api/v1/stream', '/metrics', '/api/v1/export.csv'])
    problem(await ask(bench, address), 401, /wane invite/);
  problem(await ask(bench, '/api/v1/trigger', { ...rename, headers: json }), 401);
  assert.equal((await ask(bench, '/healthz')).text, 'ok\n');
  const plain = await within(new Promise((resolve) => {
    const socket = net.connect(bench.port, room.address, () =>
      socket.write(`GET /api/v1/state HTTP/1.1\r\nHost: ${room.address}:${bench.port}\r\n\r\n`));
    let text = '';
    socket.on('data', (data) => (text += data.toString('latin1')));
    socket.on('error', () => resolve(text));
    socket.on('close', () => resolve(text));
  }), 'the end of plain HTTP');
  assert.doesNotMatch(plain, /HTTP|version|state/);
  await bench.stop();
});

test('a code opens once; its cookie looks and changes; files are private and hold no secret', { skip }, async () => {
  const bench = await startDoor();
  const invited = await bench.invite('--qr');
  assert.equal(invited.status, 0, invited.stderr);
  const [address] = invited.stdout.split('\n');
  assert.ok(address.startsWith(`${bench.url}/join?code=`), address);
  assert.match(invited.stdout, /[▀▄█]/);
  const head = await ask(bench, joinPath({ stdout: address }), { method: 'HEAD' });
  assert.equal(head.status, 404); // a preview must not use the code up
  const answer = await ask(bench, joinPath({ stdout: address }));
  assert.equal(answer.status, 200, answer.text);
  const [set] = answer.headers['set-cookie'];
  for (const word of ['HttpOnly', 'Secure', 'SameSite=Strict', 'Path=/']) assert.ok(set.includes(word), set);
  assert.ok(bench.stderr.includes(answer.fingerprint), 'the fingerprint that waned printed is that of the port');
  assert.ok(invited.stderr.includes(answer.fingerprint));
  problem(await ask(bench, joinPath({ stdout: address })), 403, /used/);
  const cookie = { Cookie: set.split(';')[0] };
  const state = await ask(bench, '/api/v1/state', { headers: cookie });
  assert.equal(JSON.parse(state.text).can_change, true);
  assert.match((await ask(bench, '/api/v1/stream', { headers: cookie })).text, /event: hello/);
  assert.equal((await ask(bench, '/metrics', { headers: cookie })).status, 200);
  const { etag } = (await ask(bench, '/api/v1/trigger', { headers: cookie })).headers;
  assert.equal((await ask(bench, '/api/v1/trigger', { ...rename, headers: { ...cookie, ...json, 'If-Match': etag } })).status, 200);
  const kept = path.join(bench.folder, 'wane');
  for (const file of ['door.json', 'door.pem', 'door.lock'])
    assert.equal(statSync(path.join(kept, file)).mode & 0o777, 0o600, file);
  const book = readFileSync(path.join(kept, 'door.json'), 'utf8');
  assert.ok(!book.includes(address.split('=')[1]) && !book.includes(cookie.Cookie.split('=')[1]));
  await bench.stop();
});

test('who may only look is refused when changing, and told so', { skip }, async () => {
  const bench = await startDoor();
  const cookie = await join(bench, '--look-only');
  const state = await ask(bench, '/api/v1/state', { headers: cookie });
  assert.equal(JSON.parse(state.text).can_change, false);
  assert.match((await ask(bench, '/api/v1/stream', { headers: cookie })).text, /"can_change":false/);
  problem(await ask(bench, '/api/v1/trigger', { ...rename, headers: { ...cookie, ...json } }), 403, /look, not to change/);
  await bench.stop();
});

test('scripts use a token; a revoked one is shut out, and a stranger too', { skip }, async () => {
  const bench = await startDoor();
  const made = await bench.invite('--token', '--look-only');
  const headers = { Authorization: `Bearer ${made.stdout.trim()}` };
  assert.equal((await ask(bench, '/api/v1/state', { headers })).status, 200);
  const list = await bench.invite('--list');
  assert.match(list.stdout, /^ +1 +look /);
  assert.equal((await bench.invite('--revoke', '1')).status, 0);
  problem(await ask(bench, '/api/v1/state', { headers }), 401);
  const again = await bench.invite('--revoke', '1');
  assert.equal(again.status, 1);
  assert.match(again.stderr, /no invitation 1/);
  await bench.stop();
});

test('a code that is too old opens nothing; wrong tries are slowed and told of, right tokens pass', { skip }, async () => {
  const folder = makeFolder();
  const config = path.join(folder, 'w.ini');
  (await import('node:fs')).writeFileSync(config, '[serve]\ninvite_valid_s = 0.001\n');
  const bench = await startDoor(folder, room.address, ['--config', config]);
  problem(await ask(bench, joinPath(await bench.invite())), 403, /too old/);
  const headers = { Authorization: `Bearer ${(await bench.invite('--token')).stdout.trim()}` };
  let last;
  for (let i = 0; i < 10; i++) last = await ask(bench, '/join?code=0123');
  problem(last, 429, /wait a minute/);
  assert.ok(last.headers['retry-after']);
  assert.equal((await ask(bench, '/api/v1/state', { headers })).status, 200);
  assert.match(bench.stderr, /a wrong invitation from /);
  await bench.stop();
});

test('a foreign Host or Origin is refused even with a right cookie', { skip }, async () => {
  const folder = makeFolder();
  const config = path.join(folder, 'w.ini');
  (await import('node:fs')).writeFileSync(config, '[serve]\nnames = bench.workshop.example\n');
  const bench = await startDoor(folder, '0.0.0.0', ['--config', config]);
  const cookie = await join(bench);
  const state = (more) => ask(bench, '/api/v1/state', { headers: { ...cookie, ...more } });
  problem(await state({ Host: `evil.example:${bench.port}` }), 421);
  problem(await state({ Host: `${room.address}:1` }), 421);
  assert.equal((await state({ Host: `bench.workshop.example:${bench.port}` })).status, 200);
  assert.equal((await state({ Origin: `https://${room.address}:${bench.port}` })).status, 200);
  for (const Origin of ['https://evil.example', `http://${room.address}:${bench.port}`, 'null'])
    problem(await state({ Origin }), 403);
  problem(await state({ 'Sec-Fetch-Site': 'cross-site' }), 403);
  // From the machine itself no invitation is needed, but for what a proxy on it passes on.
  const { prefix } = room;
  room.prefix = [];
  assert.equal((await ask(bench, '/api/v1/state', { host: '127.0.0.1' })).status, 200);
  problem(await ask(bench, '/api/v1/state', { host: '127.0.0.1', headers: { 'X-Forwarded-For': '10.1.1.1' } }), 401);
  problem(await ask(bench, '/api/v1/state', { host: '127.0.0.1', headers: { Host: `bench.workshop.example:${bench.port}` } }), 401);
  room.prefix = prefix;
  await bench.stop();
});
