// @ts-check
/* One curve on the page: a thin wrapper around uPlot that draws a spec, its marks, and zooms. */

import { dress, level } from '../format.js';
import { panRange, zoomRange } from './geometry.js';

/** @type {Promise<any>|null} */
let loading = null;

/** uPlot, or null when npm has not run. Loaded once: its minified build, which is half as large over
 * the wire, else its module. @returns {Promise<any>} */
export function loadCurves() {
  loading ??= loadMinified().catch(async () => (await import('/vendor/uPlot.esm.js')).default).then((found) => {
    document.head.append(Object.assign(document.createElement('link'), { rel: 'stylesheet', href: '/vendor/uPlot.min.css' }));
    return found;
  }).catch(() => null);
  return loading;
}

/** @returns {Promise<any>} */
function loadMinified() {
  return new Promise((resolve, reject) => {
    const script = document.createElement('script');
    script.src = '/vendor/uPlot.iife.min.js';
    script.onload = () => resolve(/** @type {any} */ (window).uPlot);
    script.onerror = reject;
    document.head.append(script);
  });
}

const probe = document.createElement('span');
probe.className = 'probe';
/** @type {Map<string, string>} colours of the theme as it is now: asking for one costs a layout */
const colours = new Map();
let family = '';

/** The theme has changed: canvases must be drawn anew. */
export function forgetColours() {
  colours.clear();
}

/** A colour of the theme as the canvas wants it. @param {string} name */
function colour(name) {
  let value = colours.get(name);
  if (value === undefined) {
    if (!probe.isConnected) document.body.append(probe);
    probe.style.color = `var(--${name})`;
    value = getComputedStyle(probe).color;
    colours.set(name, value);
  }
  return value;
}

/** The page's fonts. */
function fontFamily() {
  family ||= getComputedStyle(document.body).fontFamily;
  return family;
}

/** Dots for the noise. @param {CanvasRenderingContext2D} c @param {number} ratio device pixels */
function dotPattern(c, ratio) {
  const tile = document.createElement('canvas');
  tile.width = tile.height = Math.round(4 * ratio);
  const t = /** @type {CanvasRenderingContext2D} */ (tile.getContext('2d'));
  t.fillStyle = colour('edge');
  t.fillRect(0, 0, 0.8 * ratio, 0.8 * ratio);
  t.fillRect(tile.width / 2, tile.width / 2, 0.8 * ratio, 0.8 * ratio);
  return c.createPattern(tile, 'repeat') ?? colour('sunk');
}

/** @param {any} uPlot @param {HTMLElement} box @param {{onCursor?: (x: number|null) => void, onZoom?: (range: [number, number]) => void, decimal: string, rightPad?: number}} options */
export function makeCurve(uPlot, box, options) {
  /** @type {any} */
  let u = null;
  /** @type {import('./specs.js').Spec|null} */
  let spec = null;
  let signature = '';
  /** @type {[number, number]} */
  let view = [0, 1];
  const pxr = () => devicePixelRatio || 1;
  const font = (/** @type {string} */ weight = '') => `${weight} ${Math.round(11 * scale())}px ${fontFamily()}`;
  const scale = () => parseFloat(getComputedStyle(document.documentElement).fontSize) / 16 || 1;

  function build(/** @type {import('./specs.js').Spec} */ s) {
    u?.destroy();
    const k = scale();
    const axis = { stroke: colour('ink2'), font: font(), ticks: { stroke: colour('edge'), size: 4, width: 1 }, border: { show: true, stroke: colour('edge'), width: 1 } };
    const isTrace = s.lines.length === 2 && s.lines[0].name === 'max';
    u = new uPlot({
      width: Math.max(60, box.clientWidth), height: Math.max(40, box.clientHeight), padding: [14 * k, (options.rightPad ?? 10) * k, s.hidesX ? 4 * k : 0, 0], legend: { show: false },
      cursor: { drag: { x: true, y: false, setScale: true }, points: { show: false }, y: false, bind: { dblclick: () => () => { reset(); return null; } } },
      scales: { x: { time: false, range: (/** @type {any} */ _, /** @type {number} */ min, /** @type {number} */ max) => [min ?? view[0], max ?? view[1]] }, y: { range: () => spec?.yRange ?? [0, 1] } },
      axes: [
        { ...axis, show: !s.hidesX, grid: { show: false }, size: 30 * k, gap: 2, space: 46 * k, values: (/** @type {any} */ _, /** @type {number[]} */ ticks) => tickTexts(ticks, options.decimal) },
        { ...axis, grid: { stroke: colour('line'), width: 1 }, size: 42 * k, gap: 2, space: Math.max(22 * k, box.clientHeight / 7), ...(s.yStep ? { incrs: [1, 2, 3, 4].map((m) => m * (s.yStep ?? 1)) } : {}), values: (/** @type {any} */ _, /** @type {number[]} */ ticks) => tickTexts(ticks, options.decimal), border: { show: false } },
      ],
      series: [{}, ...s.lines.map((line) => ({ stroke: colour(line.colour), width: line.width, dash: line.dash, spanGaps: true, points: { show: false }, fill: line.fillTo === undefined ? undefined : colour('sunk'), fillTo: line.fillTo }))],
      bands: isTrace ? [{ series: [1, 2], fill: colour('trace') }] : [],
      hooks: {
        drawClear: [(/** @type {any} */ p) => drawUnder(p)], draw: [(/** @type {any} */ p) => drawOver(p)],
        setCursor: [(/** @type {any} */ p) => options.onCursor?.(p.cursor.left >= 0 ? p.posToVal(p.cursor.left, 'x') : null)],
        setScale: [(/** @type {any} */ p, /** @type {string} */ key) => { if (key === 'x') took(p); }],
      },
    }, [s.x, ...s.lines.map((l) => l.data)], box);
    u.over.addEventListener('wheel', (/** @type {WheelEvent} */ event) => {
      event.preventDefault();
      const x = u.posToVal(event.offsetX, 'x');
      if (event.shiftKey) show(panRange(view, ((event.deltaY || event.deltaX) / 500) * (view[1] - view[0]), limits()));
      else show(zoomRange(view, event.deltaY > 0 ? 1.25 : 0.8, x, limits()));
    }, { passive: false });
    bindPan(u);
  }

  /** Shift and drag pans, where a plain drag marks what to zoom to. @param {any} p */
  function bindPan(p) {
    p.over.addEventListener('pointerdown', (/** @type {PointerEvent} */ event) => {
      if (!event.shiftKey) return;
      const from = event.clientX;
      const start = view;
      const follow = (/** @type {PointerEvent} */ e) => show(panRange(start, -((e.clientX - from) / p.over.clientWidth) * (start[1] - start[0]), limits()));
      addEventListener('pointermove', follow);
      addEventListener('pointerup', () => removeEventListener('pointermove', follow), { once: true });
    });
  }

  /** @param {any} p */
  function took(p) {
    const { min, max } = p.scales.x;
    if (min === null || (min === view[0] && max === view[1])) return;
    view = [min, max];
    options.onZoom?.(view);
  }

  /** @returns {[number, number]} */
  function limits() {
    const s = /** @type {import('./specs.js').Spec} */ (spec);
    return [Math.min(s.xRange[0], s.x[0] ?? s.xRange[0]), Math.max(s.xRange[1], s.x[s.x.length - 1] ?? s.xRange[1])];
  }

  /** @param {[number, number]} range */
  function show(range) {
    if (!u || !(range[1] > range[0])) return;
    u.setScale('x', { min: range[0], max: range[1] });
  }

  function reset() {
    if (spec) show(spec.xRange);
  }

  /** @param {any} p @param {import('./specs.js').Mark} m */
  function boxOf(p, m) {
    const clamp = (/** @type {number} */ v, /** @type {number} */ a, /** @type {number} */ b) => Math.min(b, Math.max(a, v));
    const { left, top, width, height } = p.bbox;
    const px = (/** @type {number} */ v) => (v === -Infinity ? left : v === Infinity ? left + width : clamp(p.valToPos(v, 'x', true), left, left + width));
    const py = (/** @type {number} */ v) => (v === -Infinity ? top + height : v === Infinity ? top : clamp(p.valToPos(v, 'y', true), top, top + height));
    return { x0: px(m.x0 ?? -Infinity), x1: px(m.x1 ?? Infinity), y0: py(m.y0 ?? -Infinity), y1: py(m.y1 ?? Infinity) };
  }

  /** @param {any} p */
  function drawUnder(p) {
    const c = p.ctx;
    for (const m of spec?.marks ?? []) {
      if (m.kind !== 'band' && m.kind !== 'dots') continue;
      const b = boxOf(p, m);
      c.save();
      if (m.kind === 'band') {
        c.fillStyle = colour(m.colour ?? 'sunk');
        c.fillRect(b.x0, b.y1, b.x1 - b.x0, b.y0 - b.y1);
      } else {
        c.fillStyle = dotPattern(c, pxr());
        c.fillRect(b.x0, b.y1, b.x1 - b.x0, b.y0 - b.y1);
      }
      c.restore();
    }
  }

  /** @param {any} p */
  function drawOver(p) {
    if (!spec) return;
    const c = p.ctx;
    const k = pxr() * scale();
    const { left, top, width, height } = p.bbox;
    c.save();
    c.font = `${11 * k}px ${fontFamily()}`;
    c.fillStyle = colour('ink2');
    c.textBaseline = 'alphabetic';
    c.textAlign = 'left';
    c.fillText(spec.yUnit, Math.max(0, left - 36 * k), top - 4 * k);
    c.textAlign = 'right';
    c.textBaseline = 'bottom';
    if (!spec.hidesX) c.fillText(spec.xUnit, left + width, p.ctx.canvas.height);
    for (const m of spec.marks) drawMark(p, c, k, m, { left, top, width, height });
    c.restore();
  }

  /** @param {any} p @param {CanvasRenderingContext2D} c @param {number} k @param {import('./specs.js').Mark} m @param {any} area */
  function drawMark(p, c, k, m, area) {
    if (m.kind === 'band' || m.kind === 'dots') return;
    const x = m.x0 === undefined ? area.left : p.valToPos(m.x0, 'x', true);
    if (m.kind !== 'bracket' && (x < area.left - 1 || x > area.left + area.width + 1)) return;
    const b = boxOf(p, m);
    c.fillStyle = c.strokeStyle = colour(m.colour ?? 'ink');
    c.font = `650 ${11 * k}px ${fontFamily()}`;
    c.textBaseline = 'middle';
    c.textAlign = 'left';
    c.lineWidth = k;
    if (m.kind === 'label') c.fillText(m.text ?? '', b.x0 + 5 * k, b.y0 + (x > area.left + area.width - 2 ? 0 : -5 * k));
    if (m.kind === 'level') c.strokeRect(area.left, b.y0, area.width, 0);
    if (m.kind === 'flag') {
      const y = Math.max(area.top + 16 * k, b.y0 - 5 * k);
      c.beginPath();
      c.moveTo(b.x0, y);
      c.lineTo(b.x0 - 4.5 * k, y - 6 * k);
      c.lineTo(b.x0 + 4.5 * k, y - 6 * k);
      c.fill();
      c.textAlign = 'center';
      c.fillText(m.text ?? '', b.x0, y - 12 * k);
    }
    if (m.kind === 'upright') {
      c.fillRect(b.x0 - k, area.top, 2 * k, area.height);
      c.fillText(m.text ?? '', b.x0 + 5 * k, area.top + 4 * k);
    }
    if (m.kind === 'bracket') {
      const y = area.top + area.height - 5 * k;
      c.lineWidth = 1.5 * k;
      c.beginPath();
      c.moveTo(b.x0, y - 5 * k);
      c.lineTo(b.x0, y);
      c.lineTo(b.x1, y);
      c.lineTo(b.x1, y - 5 * k);
      c.stroke();
      c.font = `${11 * k}px ${fontFamily()}`;
      c.textAlign = 'right';
      c.fillText(m.text ?? '', b.x1 - 4 * k, y - 9 * k);
    }
  }

  const observer = new ResizeObserver(() => requestAnimationFrame(() => {
    if (u && box.clientWidth && box.clientHeight) u.setSize({ width: box.clientWidth, height: box.clientHeight });
  }));
  observer.observe(box);

  return {
    /** @param {import('./specs.js').Spec} s @param {boolean} keepsView */
    set(s, keepsView = false) {
      const now = JSON.stringify([s.lines.map((l) => [l.colour, l.width, l.dash, l.fillTo]), s.hidesX, s.yStep, scale(), colour('paper'), pxr()]);
      spec = s;
      const range = keepsView ? view : s.view ?? s.xRange;
      if (!u || now !== signature) {
        signature = now;
        view = range;
        build(s);
      } else {
        u.setData([s.x, ...s.lines.map((l) => l.data)], false);
      }
      view = range;
      u.setScale('x', { min: range[0], max: range[1] });
      if (s.view && !keepsView) options.onZoom?.(range);
    },
    /** @param {number} factor 0: the whole */
    zoom(factor) {
      if (factor === 0 || !spec) return reset();
      const at = u?.cursor.left >= 0 ? u.posToVal(u.cursor.left, 'x') : (view[0] + view[1]) / 2;
      show(zoomRange(view, factor, at, limits()));
    },
    /** @param {number} share of the view */
    pan(share) {
      if (spec) show(panRange(view, share * (view[1] - view[0]), limits()));
    },
    /** Moves the cursor by a share of the view. @param {number} share */
    step(share) {
      if (!u) return;
      const now = u.cursor.left >= 0 ? u.cursor.left : u.over.clientWidth / 2;
      u.setCursor({ left: Math.min(u.over.clientWidth, Math.max(0, now + share * u.over.clientWidth)), top: 5 });
    },
    leave() {
      u?.setCursor({ left: -10, top: -10 });
    },
    view: () => view,
    canvas: () => /** @type {HTMLCanvasElement|null} */ (u?.ctx.canvas ?? null),
    spec: () => spec,
    destroy() {
      observer.disconnect();
      u?.destroy();
      u = null;
    },
  };
}

/** Tick words with as many decimals as their step needs. @param {number[]} ticks @param {string} d */
export function tickTexts(ticks, d) {
  const numbers = ticks.filter((x) => x !== null);
  const step = numbers.length > 1 ? Math.abs(numbers[1] - numbers[0]) : 1;
  let decimals = 0;
  while (decimals < 9 && Math.abs(step * 10 ** decimals - Math.round(step * 10 ** decimals)) > 1e-6 * step * 10 ** decimals) decimals++;
  return ticks.map((x) => (x === null ? '' : decimals ? level(x, d, decimals) : dress(String(Math.round(x)), d)));
}
