// @ts-check
/* Level, noise floor and trigger; the trigger can be dragged, or moved by arrows and kept by Enter. */

import { el, setAttr, setText, svg } from '../dom.js';
import { dress, known, level as levelText, plainAt } from '../format.js';
import { decimal, t } from '../lang.js';
import { getTagged, send } from '../api.js';
import { AUTOMATIC_TRIGGER_DB, benchState, overNoise } from '../sentences.js';

const LOW = -96;
const LEAST_DB = 6;
const MOST_DB = 60;
const PEAK_FALL_DB_PER_S = 20;
const CLIP_MS = 1000;
const BAR_TOP = 8;
const BAR_HEIGHT = 9;

/** @param {HTMLElement} element @param {import('../store.js').Store} store */
export function mount(element, store) {
  const parts = {
    ground: svg('rect', { class: 'ground', y: BAR_TOP, height: BAR_HEIGHT }),
    noiseEdge: svg('rect', { class: 'noise-edge', y: BAR_TOP, height: BAR_HEIGHT }),
    noise: svg('rect', { class: 'noise', y: BAR_TOP, height: BAR_HEIGHT }),
    now: svg('rect', { class: 'now', y: BAR_TOP, height: BAR_HEIGHT }),
    peak: svg('rect', { class: 'peak', y: BAR_TOP, height: BAR_HEIGHT, width: 2 }),
    clip: svg('rect', { class: 'clip', y: BAR_TOP - 4, height: BAR_HEIGHT + 8, width: 4 }),
    clipWord: svg('text', { class: 'clip-word', y: BAR_TOP - 1 }),
    flag: svg('path', { class: 'flag' }),
    labels: svg('g'),
  };
  const meter = svg('svg', { class: 'meter', role: 'slider', tabindex: 0, 'aria-label': t('triggerLabel'), 'aria-valuemin': LOW, 'aria-valuemax': 0, 'aria-orientation': 'horizontal' });
  meter.append(parts.ground, parts.noiseEdge, parts.now, parts.noise, parts.peak, parts.labels, parts.clip, parts.clipWord, parts.flag);
  const noise = el('b');
  const trigger = el('b');
  const lost = el('b');
  const settings = el('button', { type: 'button', class: 'figures first', onclick: () => store.openSheet('trigger') },
    t('noise') + ' ', noise, ' · ' + t('trigger') + ' ', trigger, ' dBFS');
  element.append(meter, settings, el('span', { class: 'figures second' }, t('samplesLost') + ' ', lost));

  const calm = matchMedia('(prefers-reduced-motion: reduce)');
  const view = { width: 176, peak: LOW, peakAt: performance.now(), paintedAt: 0 };
  /** @type {number|null} the trigger while it is being moved */
  let pending = null;
  const x = (/** @type {number} */ db) => ((Math.min(0, Math.max(LOW, db)) - LOW) / -LOW) * view.width;

  new ResizeObserver(([entry]) => {
    view.width = Math.max(60, entry.contentRect.width);
    setAttr(meter, 'viewBox', `0 0 ${view.width} 36`);
    setAttr(meter, 'preserveAspectRatio', 'none'); // the wide view makes it taller
    setAttr(parts.ground, 'width', view.width);
    setAttr(parts.clip, 'x', view.width - 4);
    setAttr(parts.clipWord, 'x', view.width - 6);
    parts.labels.replaceChildren(...[-96, -72, -48, -24, 0].map((db) => svg('text', {
      x: Math.min(view.width - 4, Math.max(11, x(db))), y: 34, text: dress(String(db)),
    })));
    store.touch('level');
  }).observe(meter);

  function paint() {
    const now = performance.now();
    if (calm.matches && now - view.paintedAt < 250) return; // 4 Hz
    view.paintedAt = now;
    const l = benchState(store).hasLevel ? store.level : null;
    const dbfs = l?.dbfs ?? LOW;
    view.peak = Math.max(dbfs, view.peak - ((now - view.peakAt) / 1000) * PEAK_FALL_DB_PER_S);
    view.peakAt = now;
    const px = (/** @type {number} */ db) => Math.round(x(db) * 2) / 2;
    setAttr(parts.now, 'width', px(dbfs));
    setAttr(parts.noise, 'width', px(l?.noise_dbfs ?? LOW));
    setAttr(parts.noiseEdge, 'width', px(l?.noise_dbfs ?? LOW));
    setAttr(parts.peak, 'x', px(view.peak));
    parts.peak.toggleAttribute('hidden', !l || view.peak <= LOW + 1);
    const isClipped = Boolean(l) && now - store.clippedAt < CLIP_MS;
    parts.clip.toggleAttribute('hidden', !isClipped);
    setText(parts.clipWord, isClipped ? t('clipped') : '');
    const at = pending ?? l?.trigger_dbfs ?? store.level?.trigger_dbfs;
    parts.flag.toggleAttribute('hidden', !known(at));
    if (known(at)) {
      const f = px(at);
      setAttr(parts.flag, 'd', `M${f - 1} 1h9l-7 6.5v14h-2z`);
      setAttr(meter, 'aria-valuenow', Math.round(at));
      const over = overNoise(store.bench?.trigger, pending !== null && known(l?.trigger_dbfs) ? pending - l.trigger_dbfs : 0);
      setAttr(meter, 'aria-valuetext', t('triggerText', { level: levelText(at, decimal(), 0), over }));
    } else {
      setAttr(meter, 'aria-valuenow', LOW);
      setAttr(meter, 'aria-valuetext', t('notKnown'));
    }
    setText(noise, levelText(l?.noise_dbfs, decimal(), 0));
    setText(trigger, levelText(at, decimal(), 0));
    setText(lost, known(store.bench?.input?.lost_frames) ? dress(plainAt(store.bench.input.lost_frames, 0)) : '–');
  }

  /** @param {number} dbfs */
  function move(dbfs) {
    pending = Math.min(0, Math.max(LOW, dbfs));
    store.touch('level');
  }

  async function keep() {
    const from = store.level?.trigger_dbfs;
    const to = pending;
    pending = null;
    if (known(from) && to !== null && Math.abs(to - from) >= 0.5) await setTrigger(store, to - from);
    store.touch('level');
  }

  function leave() {
    pending = null;
    store.touch('level');
  }

  meter.addEventListener('keydown', (event) => {
    const e = /** @type {KeyboardEvent} */ (event);
    const from = pending ?? store.level?.trigger_dbfs;
    const step = (e.shiftKey ? 6 : 1) * (/** @type {Record<string, number>} */ ({ ArrowLeft: -1, ArrowDown: -1, ArrowRight: 1, ArrowUp: 1 })[e.key] ?? 0);
    if (step && known(from)) move(Math.round(from) + step);
    else if (e.key === 'Enter') keep();
    else if (e.key === 'Escape') {
      leave();
      /** @type {SVGElement} */ (meter).blur();
    } else return;
    e.preventDefault();
    e.stopPropagation();
  });
  meter.addEventListener('blur', leave);
  meter.addEventListener('pointerdown', (event) => {
    const e = /** @type {PointerEvent} */ (event);
    if (!known(store.level?.trigger_dbfs) || !store.bench?.can_change) return;
    meter.setPointerCapture(e.pointerId);
    const box = meter.getBoundingClientRect();
    const follow = (/** @type {Event} */ m) => move(LOW + ((/** @type {PointerEvent} */ (m).clientX - box.left) / box.width) * -LOW);
    meter.addEventListener('pointermove', follow);
    meter.addEventListener('pointerup', () => {
      meter.removeEventListener('pointermove', follow);
      keep();
    }, { once: true });
  });
  store.addEventListener('focus-level', () => /** @type {SVGElement} */ (meter).focus());
  return store.watch(['level', 'bench', 'connection'], paint);
}

/** Moves the trigger by so many dB against what the bench has now, with its version checked.
 * @param {import('../store.js').Store} store @param {number} by */
async function setTrigger(store, by) {
  try {
    const { value, etag } = await getTagged('/trigger');
    const db = Math.round((value.trigger_db ?? AUTOMATIC_TRIGGER_DB) + by);
    const trigger = await send('PUT', '/trigger', { ...value, trigger_db: Math.min(MOST_DB, Math.max(LEAST_DB, db)) }, etag);
    store.setBench({ ...store.bench, trigger: trigger ?? value });
  } catch (cause) {
    store.announce('refused', cause instanceof Error ? cause.message : String(cause));
  }
}
