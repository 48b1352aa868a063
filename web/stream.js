// @ts-check
/* The event stream into the store: one stream a visible tab, reopened with the last id, own back-off.
 * A hidden tab holds none (six connections is all a browser has) unless it is to be heard. */

import { get, Problem } from './api.js';

const OPEN_WITHIN_MS = 3000;
const SILENT_AFTER_MS = 6000; // heartbeats come once a second
const ROW_FIRST = 200;

/** @param {import('./store.js').Store} store */
export function startStream(store) {
  /** @type {EventSource|null} */
  let source = null;
  let delay = 1000;
  let timer = 0;
  let heardAt = performance.now();
  let logToken = '';
  let isLoaded = false;

  const isWanted = () => !document.hidden || store.prefs.sound || store.prefs.speak;

  async function load() {
    const bench = await get('/state');
    store.setBench(bench);
    logToken = bench.log?.token ?? '';
    await fillRow();
    isLoaded = true;
  }

  async function fillRow() {
    const series = store.bench?.series;
    const words = series ? `series=${series.id}&limit=1000` : `limit=${ROW_FIRST}`;
    const page = await get(`/strikes?${words}`);
    store.fillRow(page.strikes);
    store.newest = Math.max(store.newest, store.bench?.log?.newest ?? 0);
  }

  async function open() {
    close();
    if (!isWanted()) return;
    store.setConnection({ nextTry: null });
    try {
      if (!isLoaded) await load();
    } catch (cause) {
      return lost(cause instanceof Problem && cause.status === 503 ? 'full' : 'lost');
    }
    if (source) return;
    const opened = new EventSource(`/api/v1/stream?after=${store.newest}`);
    source = opened;
    heardAt = performance.now();
    const tooLate = setTimeout(() => {
      if (source === opened && opened.readyState !== EventSource.OPEN) diagnose();
    }, OPEN_WITHIN_MS);
    opened.onopen = () => clearTimeout(tooLate);
    opened.onerror = () => {
      clearTimeout(tooLate);
      if (source === opened) diagnose();
    };
    for (const [name, take] of Object.entries(takers)) {
      opened.addEventListener(name, (event) => {
        heardAt = performance.now();
        if (source === opened) take(JSON.parse(/** @type {MessageEvent} */ (event).data));
      });
    }
  }

  function close() {
    clearTimeout(timer);
    source?.close();
    source = null;
  }

  /** Why did the stream end? A refusal cannot be seen from an EventSource. */
  async function diagnose() {
    close();
    try {
      const bench = await get('/state', AbortSignal.timeout(OPEN_WITHIN_MS));
      if (bench.watchers >= bench.watchers_max) return lost('full');
      lost('lost');
    } catch (cause) {
      lost(cause instanceof DOMException ? 'tabs' : 'lost');
    }
  }

  /** @param {'lost'|'full'|'tabs'} state */
  function lost(state) {
    close();
    if (!isWanted()) return;
    const since = store.connection.state === state ? store.connection.since : Date.now();
    store.forming = null;
    store.setConnection({ state, since, nextTry: Date.now() + delay });
    store.touch('forming', 'level');
    timer = setTimeout(open, delay);
    delay = Math.min(10000, delay * 1.6);
  }

  /** @type {Record<string, (data: any) => void>} */
  const takers = {
    hello(hello) {
      delay = 1000;
      if (logToken && hello.log !== logToken) {
        store.forget();
        logToken = hello.log;
        isLoaded = false;
        open();
        return;
      }
      logToken = hello.log;
      if (hello.state) store.setBench({ ...store.bench, ...hello.state, version: hello.version ?? store.bench?.version });
      const missing = hello.newest - store.newest;
      store.setConnection({ state: missing > 0 ? 'catching' : 'open', missing: missing > 0 ? missing : null, since: Date.now(), asOf: Date.now() });
      store.announce('caught-up', null);
    },
    level(level) {
      store.setLevel(level);
      if (store.connection.state === 'catching' && store.newest >= (store.bench?.log?.newest ?? 0)) settle();
    },
    forming: (forming) => store.setForming(forming),
    strike(strike) {
      store.addFinal(strike);
      if (store.connection.state === 'catching' && strike.id >= (store.bench?.log?.newest ?? 0)) settle();
    },
    changed: (strike) => store.change(strike),
    unkept: (strike) => store.addUnkept(strike),
    series(series) {
      const open = series.closed ? (store.bench?.series?.id === series.id ? null : store.bench?.series) : series;
      store.setBench({ ...store.bench, series: open ?? null });
      store.announce('series', series);
    },
    input(input) {
      store.setInput(input);
    },
    notice(notice) {
      store.announce('notice', notice);
      refresh();
    },
    reset() {
      fillRow().then(settle, () => lost('lost'));
      store.touch('filter');
    },
    heartbeat() {},
  };

  function settle() {
    store.setConnection({ state: 'open', missing: null });
  }

  /** The bench's own counts (unread, unkept) stand in /state. */
  function refresh() {
    get('/state').then((bench) => store.setBench(bench), () => {});
  }

  document.addEventListener('visibilitychange', () => {
    if (!isWanted()) close();
    else if (!source) open();
  });
  window.addEventListener('pagehide', close);
  window.addEventListener('pageshow', (event) => {
    if (event.persisted) open();
  });
  setInterval(() => {
    if (document.hidden) return;
    if (source && performance.now() - heardAt > SILENT_AFTER_MS) diagnose();
    const log = store.bench?.log;
    if (source && (log?.unread || (log && log.state !== 'keeping'))) refresh();
  }, 2000);
  store.addEventListener('row-changed', () => {
    store.isFollowing = true;
    store.lead = null;
    fillRow().catch(() => {});
  });
  store.addEventListener('retry', () => {
    delay = 1000;
    open();
  });
  open();
}
