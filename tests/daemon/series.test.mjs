// The open series through the real waned: labels, statistics, odd strikes, part sheets, the next
// specimen, the report; and what `wane series` and `wane report` say of the same log.
import assert from 'node:assert/strict';
import { readFileSync, writeFileSync } from 'node:fs';
import path from 'node:path';
import { test } from 'node:test';
import { call, get, hasEnded, makeFolder, random, ring, run, start, until, wav, watch } from './support.mjs';

const SHEET = `[part]
name = cup
material = glass

[mode a]
band_hz = 1100 ... 1150
f_hz = 1119 ... 1121
wanted_f = 0.5 %
wanted_q = 5 %

[mode b]
band_hz = 1900 ... 2000
q = 5000 ...
`;

/** Strikes of a cup, 1120 Hz and 1950 Hz; f scatters by 0.01 Hz from strike to strike. */
function writeCup(folder, count, { odd = -1, name = 'cup.wav' } = {}) {
  const next = random(7);
  const strikes = Array.from({ length: count }, (_, i) => ({
    at_s: 0.7 + i * 1.5,
    modes: [
      { f_hz: 1120 + 0.02 * (next() - 0.5) + (i === odd ? 3 : 0), decay_per_s: 4, amplitude: 0.3 },
      { f_hz: 1950 + 0.02 * (next() - 0.5), decay_per_s: 6, amplitude: 0.1 },
    ],
  }));
  const file = path.join(folder, name);
  writeFileSync(file, wav([ring({ seconds: 0.7 + count * 1.5, strikes })]));
  return file;
}

/** A waned that has heard `count` strikes within a series of the part. */
async function hear(count, { odd, part, specimen } = {}) {
  const folder = makeFolder();
  const file = writeCup(folder, count, { odd });
  // The recording's pace leaves time to open the series before its first strike.
  const daemon = await start(['--input', file], { folder });
  if (part) {
    const made = await call(daemon, 'PUT', '/api/v1/parts/cup', { sheet: SHEET }, { 'If-None-Match': '*' });
    assert.equal(made.status, 200, made.text);
  }
  const stream = await watch(daemon).opened;
  const opened = await call(daemon, 'POST', '/api/v1/series', { name: 'cups', part, specimen });
  assert.equal(opened.status, 201, opened.text);
  await until(daemon, '/api/v1/state', hasEnded);
  await until(daemon, `/api/v1/series/${opened.json.id}`, (series) => series.statistics.strikes === count);
  return { daemon, stream, id: opened.json.id, folder };
}

test('strikes join the open series, which tells its statistics on the call and the stream', async () => {
  const { daemon, stream, id } = await hear(5);
  const series = await get(daemon, `/api/v1/series/${id}`);
  const s = series.statistics;
  assert.equal(s.strikes, 5);
  assert.equal(s.counted, 5);
  assert.equal(s.lead, '1');
  const f = s.modes[0].f_hz;
  assert.ok(Math.abs(f.mean - 1120) < 0.01, `mean ${f.mean}`);
  assert.ok(f.sd > 0 && f.sd < 0.02 && f.within_u > 0 && f.half_width > 0, JSON.stringify(f));
  assert.equal(f.limited_by, f.sd > 2 * f.within_u ? 'tapping' : 'noise');
  // Student: t(0.975, 4) = 2.776 (NIST/SEMATECH e-Handbook, table 1.3.6.7.2).
  const half = (2.776 * f.sd) / Math.sqrt(5);
  assert.ok(Math.abs(f.half_width / half - 1) < 1e-3, `${f.half_width} against ${half}`);
  const last = await stream.next((e) => e.event === 'series' && e.data.statistics?.strikes === 5);
  assert.deepEqual(last.data.statistics, s);
  for (const strike of (await get(daemon, `/api/v1/strikes?series=${id}`)).strikes)
    assert.ok(Math.abs(strike.modes.find((m) => m.label === '1').f_hz - 1120) < 1);
  stream.close();
  await daemon.stop();
});

test('a sheet names the modes and decides each strike and the series; what is set aside no longer counts', async () => {
  const { daemon, stream, id, folder } = await hear(4, { part: 'cup', specimen: 'C-09' });
  const { statistics: s, specimen } = await get(daemon, `/api/v1/series/${id}`);
  assert.equal(specimen, 'C-09');
  const log = path.join(folder, 'wane', 'log.sqlite');
  const shown = await run('wane', ['series', '--log', log, 'show', String(id), '--json']);
  assert.deepEqual(JSON.parse(shown.stdout).statistics, s, 'the shell tells the same');
  const report = await call(daemon, 'GET', `/api/v1/series/${id}/report`);
  assert.equal(report.status, 200, report.text.slice(0, 300));
  assert.match(report.headers.get('content-type'), /text\/html/);
  assert.match(report.text, /<td class="w out">outside<\/td>/);
  assert.deepEqual(s.modes.map((m) => m.label), ['a', 'b']);
  assert.equal(s.more, 0);
  const of = (limits, label) => limits.find((l) => l.label === label).decision;
  assert.equal(of(s.limits, 'a'), 'inside');
  assert.equal(of(s.limits, 'b'), 'outside'); // Q is 1021
  assert.equal(s.decision, 'outside');
  const { strikes } = await get(daemon, `/api/v1/strikes?series=${id}`);
  for (const strike of strikes) {
    assert.equal(strike.decision, 'outside');
    assert.equal(of(strike.limits, 'a'), 'inside');
    assert.deepEqual(strike.modes.slice(0, 2).map((m) => m.label), ['a', 'b']);
  }
  const told = await stream.next((e) => e.event === 'strike' && e.data.id === strikes[0].id);
  assert.deepEqual(told.data, { ...strikes[0], ...told.data });
  assert.equal(told.data.decision, 'outside');
  const address = `/api/v1/strikes/${strikes[1].id}`;
  const aside = await call(daemon, 'PATCH', address, { set_aside: 'held <badly>' }, { 'If-Match': '*' });
  assert.equal(aside.status, 200, aside.text);
  const after = await stream.next((e) => e.event === 'series' && e.data.statistics?.set_aside === 1);
  assert.equal(after.data.statistics.counted, 3);
  const file = path.join(folder, 'report.html');
  const made = await run('wane', ['report', '--log', log, String(id), '-o', file]);
  assert.equal(made.status, 0, made.stderr);
  const page = readFileSync(file, 'utf8');
  assert.match(page, /held &lt;badly&gt;/, 'texts are escaped, reasons are listed');
  assert.doesNotMatch(page, /<badly>|src=|href=/);
  assert.equal((page.match(/<tr( class="off")?><th scope="row">\d+<\/th><td class="w">20/g) ?? []).length, 4);

  const next = await call(daemon, 'PATCH', `/api/v1/series/${id}`, { next_specimen: true });
  assert.equal(next.status, 200, next.text);
  assert.equal(next.json.specimen, 'C-10');
  assert.equal(next.json.part, 'cup');
  assert.notEqual(next.json.id, id);
  assert.notEqual((await get(daemon, `/api/v1/series/${id}`)).closed, null);
  const shell = (...words) => run('wane', [...words.slice(0, 1), '--log', log, ...words.slice(1)]);
  const list = await shell('series');
  assert.match(list.stdout, /open +0 +cup +C-10\b/);
  assert.match(list.stdout, /closed +4 +cup +C-09\b/);
  assert.match((await shell('series', 'compare', String(id), String(next.json.id))).stdout, /share no mode/);
  assert.match((await shell('series', 'compare', String(id), String(id))).stdout, /no more than strikes differ among themselves/);
  assert.match((await shell('report', 'strike', String(strikes[0].id))).stdout, /<h1>Ring-down of strike \d+<\/h1>/);
  assert.equal((await shell('series', 'show', '99')).status, 1);
  assert.equal((await shell('series', 'shwo')).status, 2);
  assert.equal((await shell('report', 'x')).status, 2);
  const typed = await call(daemon, 'PATCH', `/api/v1/series/${next.json.id}`, { specimen: 'X' });
  assert.equal(typed.json.specimen, 'X');
  assert.equal((await call(daemon, 'PATCH', `/api/v1/series/${id}`, { next_specimen: true })).status, 412);
  assert.equal((await call(daemon, 'PATCH', `/api/v1/series/${id}`, { specimen: 'Y', close: true })).status, 400);
  stream.close();
  await daemon.stop();
});

test('an odd strike is marked in the log and told as a change', async () => {
  const { daemon, stream, id } = await hear(7, { odd: 4 });
  const changed = await stream.next((e) => e.event === 'changed' && e.data.odd === true);
  const s = (await get(daemon, `/api/v1/series/${id}`)).statistics;
  assert.ok(s.odd.includes(changed.data.id));
  for (const strike of (await get(daemon, `/api/v1/strikes?series=${id}`)).strikes)
    assert.equal(strike.odd, s.odd.includes(strike.id));
  assert.equal(changed.data.strike, 5);
  assert.equal(s.counted, 7, 'an odd strike counts');
  assert.ok(s.modes[0].f_hz.sd_without_odd < s.modes[0].f_hz.sd / 10);
  stream.close();
  await daemon.stop();
});

test('a sheet with mistakes is refused with every complaint and its line', async () => {
  const daemon = await start(['--input', 'simulated', '--log', path.join(makeFolder(), 'log.sqlite')]);
  const put = await call(daemon, 'PUT', '/api/v1/parts/cup', { sheet: '[part]\nname = cup\n[mode 1]\nband_hz = 9 ... x\nqq = 3\n' }, { 'If-None-Match': '*' });
  assert.equal(put.status, 422);
  assert.match(put.headers.get('content-type'), /application\/problem\+json/);
  assert.match(put.json.detail, /^cup:4: /);
  assert.ok(put.json.complaints.some((c) => /^cup:5: .*qq/.test(c)), put.text);
  const { parts } = await get(daemon, '/api/v1/parts');
  const goblet = parts.find((p) => p.name === 'goblet');
  assert.ok(goblet.file, 'sheets that came with the program are listed');
  const sheet = await call(daemon, 'GET', '/api/v1/parts/goblet');
  assert.equal(sheet.headers.get('etag'), goblet.etag);
  const own = await call(daemon, 'PUT', '/api/v1/parts/goblet', { sheet: sheet.text + '; ours\n' }, { 'If-Match': goblet.etag });
  assert.equal(own.status, 200, own.text);
  assert.match((await call(daemon, 'GET', '/api/v1/parts/goblet')).text, /; ours\n$/);
  await daemon.stop();
});
