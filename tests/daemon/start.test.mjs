// What waned says when it cannot start, or finds something odd: one clear line, the right status.
import assert from 'node:assert/strict';
import { chmodSync, mkdirSync, readdirSync, writeFileSync } from 'node:fs';
import path from 'node:path';
import test from 'node:test';
import { get, makeFolder, run, start, hasEnded, until, writeTile } from './support.mjs';

const port0 = ['--listen', '127.0.0.1:0'];

async function refused(words, status, pattern, folder = makeFolder()) {
  const end = await run('waned', [...port0, ...words], {
    env: { ...process.env, XDG_STATE_HOME: folder, XDG_CONFIG_HOME: folder },
  });
  assert.equal(end.stdout, '');
  assert.match(end.stderr, pattern);
  assert.equal(end.status, status, end.stderr);
  assert.doesNotMatch(end.stderr, /\n\n|Sanitizer/);
  return end.stderr;
}

test('wrong words name the nearest right one', async () => {
  await refused(['--inptu', 'simulated'], 2, /--inptu.*--input/);
  await refused(['--rate', 'fast'], 2, /--rate.*fast/);
  await refused(['--channel', '0'], 2, /--channel/);
  await refused(['--listen'], 2, /--listen/);
  await refused(['--listen', '127.0.0.1:70000'], 2, /70000/);
});

test('all that is wrong in a settings file is told of at once, with file and line', async () => {
  const folder = makeFolder();
  const config = path.join(folder, 'bench.ini');
  writeFileSync(
    config,
    '[input]\nnmae = simulated\n\n[triger]\nover_noise_db = 20\n[trigger]\nover_noise_db = 0,5\n' +
      `[serve]\nlisten = here\n[log]\nfile = ${'x'.repeat(300)}\n  megabytes_max = many\n`,
  );
  const said = await refused(['--config', config], 2, /bench\.ini:2:.*nmae.*name/);
  for (const pattern of [/bench\.ini:4:|bench\.ini:5:/, /bench\.ini:7:.*point/, /bench\.ini:9:/,
    /bench\.ini:11:/, /bench\.ini:12:/])
    assert.match(said, pattern);
});

test('a settings file that is missing, a folder, or no text', async () => {
  const folder = makeFolder();
  await refused(['--config', path.join(folder, 'none.ini')], 2, /none\.ini/);
  await refused(['--config', folder], 2, new RegExp(folder));
  const binary = path.join(folder, 'b.ini');
  writeFileSync(binary, Buffer.from([0, 1, 2, 255, 10, 0]));
  await refused(['--config', binary], 2, /b\.ini:1/);
});

test('the default settings are taken from XDG_CONFIG_HOME, words win over them', async () => {
  const folder = makeFolder();
  mkdirSync(path.join(folder, 'wane'));
  writeFileSync(path.join(folder, 'wane', 'waned.ini'),
    '[input]\nname = simulated\n[trigger]\nover_noise_db = 23\n');
  const file = writeTile(folder, 1);
  const daemon = await start(['--input', file, '--fast'], { folder });
  const state = await until(daemon, '/api/v1/state', hasEnded);
  assert.equal(state.input.name, file);
  assert.equal(state.trigger.trigger_db, 23);
  await daemon.stop();
});

test('the commented settings file in configs/ is a right one, as it is and uncommented', async () => {
  const { readFileSync } = await import('node:fs');
  const text = readFileSync(new URL('../../configs/waned.ini', import.meta.url), 'utf8');
  const folder = makeFolder();
  const config = path.join(folder, 'waned.ini');
  const log = path.join(folder, 'log.sqlite');
  writeFileSync(config, text.replace(/^;([a-z_]+ = )/gm, '$1').replace('/var/lib/wane/log.sqlite', log));
  const daemon = await start(['--config', config], { folder });
  const state = await get(daemon, '/api/v1/state');
  assert.equal(state.input.name, 'simulated');
  assert.equal(state.trigger.f_high_hz, 20000);
  assert.equal(state.log.path, log);
  await daemon.stop();
  const plain = await start(['--config', decodeURIComponent(new URL('../../configs/waned.ini', import.meta.url).pathname)]);
  assert.equal((await get(plain, '/api/v1/state')).input.state, 'none');
  await plain.stop();
});

test('a port in use', async () => {
  const daemon = await start([]);
  await refused(['--listen', `127.0.0.1:${daemon.port}`], 1, /port/);
  await daemon.stop();
});

test('an address off this machine is refused without a place for its invitations', async () => {
  const noFolder = path.join(makeFolder(), 'a-file'); // door.test.mjs has the rest
  writeFileSync(noFolder, '');
  const log = path.join(makeFolder(), 'log.sqlite');
  for (const address of ['0.0.0.0:0', '[::]:0'])
    await refused(['--listen', address, '--log', log], 1, /door\.lock.*invitations/, noFolder);
});

test('inputs that do not exist, or are none', async () => {
  const folder = makeFolder();
  await refused(['--input', path.join(folder, 'none.wav')], 1, /none\.wav/);
  const text = path.join(folder, 'text.wav');
  writeFileSync(text, 'not a recording');
  await refused(['--input', text], 1, /text\.wav/);
  await refused(['--input', writeTile(folder, 1), '--channel', '2'], 2, /channel 2/);
});

test('a log that is another program\'s, from a newer version, or cannot be written', async () => {
  const folder = makeFolder();
  const log = path.join(folder, 'log.sqlite');
  const daemon = await start(['--log', log], { folder });
  await refused(['--log', log], 1, /log\.sqlite/); // a second writer
  await daemon.stop();
  const { readFileSync } = await import('node:fs');
  // SQLite file format, section 1.3: user_version at 60, application_id at 68, big-endian.
  const own = readFileSync(log);
  const newer = path.join(folder, 'newer.sqlite');
  const changed = Buffer.from(own);
  changed.writeUInt32BE(9999, 60);
  writeFileSync(newer, changed);
  await refused(['--log', newer], 1, /newer/);
  const foreign = path.join(folder, 'foreign.sqlite');
  const other = Buffer.from(own);
  other.writeUInt32BE(0x12345678, 68);
  writeFileSync(foreign, other);
  await refused(['--log', foreign], 1, /foreign\.sqlite/);
  assert.deepEqual(readFileSync(foreign), other, 'untouched');
  await refused(['--log', '/proc/nowhere/log.sqlite'], 1, /\/proc\/nowhere/);
  if (process.getuid() !== 0) {
    const closed = path.join(folder, 'closed');
    mkdirSync(closed);
    chmodSync(closed, 0o500);
    await refused(['--log', path.join(closed, 'log.sqlite')], 1, /closed/);
  }
});

test('a log of noise is put aside, a new one begun, and people are told', async () => {
  const folder = makeFolder();
  const log = path.join(folder, 'log.sqlite');
  writeFileSync(log, Buffer.alloc(20000, 7));
  let daemon;
  try {
    daemon = await start(['--log', log], { folder });
  } catch (error) {
    assert.match(error.message, /log\.sqlite/); // refusing is fine too: nothing is lost
    return;
  }
  assert.equal((await get(daemon, '/api/v1/strikes')).strikes.length, 0);
  await daemon.stop();
  assert.ok(readdirSync(folder).some((name) => name.includes('corrupt')));
});
