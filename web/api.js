// @ts-check
/* Calls to the bench. Every answer is parsed; a refusal is thrown as a Problem with the bench's own
 * sentence. */

export const BASE = '/api/v1';

export class Problem extends Error {
  /** @param {string} text @param {number} status 0: the bench was not reached */
  constructor(text, status) {
    super(text);
    this.status = status;
  }
}

/** @param {string} path under /api/v1, or a whole one @param {RequestInit} options */
async function call(path, options = {}) {
  let response;
  try {
    response = await fetch(path.startsWith('/api') ? path : BASE + path, options);
  } catch (cause) {
    throw new Problem(String(cause instanceof Error ? cause.message : cause), 0);
  }
  if (!response.ok) throw new Problem(await problemText(response), response.status);
  return response;
}

/** @param {Response} response */
async function problemText(response) {
  try {
    const problem = await response.json();
    return String(problem.detail || problem.title || response.status);
  } catch {
    return `${response.status} ${response.statusText}`;
  }
}

/** @param {string} path @param {AbortSignal} [signal] */
export async function get(path, signal) {
  return (await call(path, { signal })).json();
}

/** With the ETag that a later change must name. @param {string} path */
export async function getTagged(path) {
  const response = await call(path);
  return { value: await response.json(), etag: response.headers.get('ETag') };
}

/** @param {'POST'|'PUT'|'PATCH'} method @param {string} path @param {object} body
 * @param {string|null} etag */
export async function send(method, path, body, etag = null) {
  /** @type {Record<string, string>} */
  const headers = { 'Content-Type': 'application/json' };
  if (etag) headers['If-Match'] = etag;
  const response = await call(path, { method, headers, body: JSON.stringify(body) });
  return response.status === 204 ? null : response.json();
}

/** Sends a recording; onLine is called with each strike as it is read.
 * @param {File} file @param {(strike: any) => void} onLine @param {AbortSignal} signal */
export async function readRecording(file, onLine, signal) {
  const response = await call(`/recordings?channel=1&name=${encodeURIComponent(file.name)}`, {
    method: 'POST', headers: { 'Content-Type': 'application/octet-stream' }, body: file, signal,
  });
  if (!response.body) return;
  const reader = response.body.pipeThrough(new TextDecoderStream()).getReader();
  let rest = '';
  for (;;) {
    const { value, done } = await reader.read();
    rest += value ?? '';
    const lines = rest.split('\n');
    rest = done ? '' : lines.pop() ?? '';
    for (const line of lines) if (line.trim()) onLine(JSON.parse(line));
    if (done) return;
  }
}

/** Query of a selection of strikes: "?series=3&verdict=good" or "".
 * @param {Record<string, string|number|null|undefined>} words */
export function query(words) {
  const pairs = Object.entries(words).filter(([, v]) => v !== null && v !== undefined && v !== '');
  return pairs.length ? `?${pairs.map(([k, v]) => `${k}=${encodeURIComponent(String(v))}`).join('&')}` : '';
}
