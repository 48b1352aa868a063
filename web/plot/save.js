// @ts-check
/* A plot as a file: PNG of its canvas on paper, SVG of its lines, CSV of its numbers. */

import { dress } from '../format.js';
import { ticks } from './geometry.js';
import { csvOf } from './specs.js';

/** @param {Blob} blob @param {string} name */
function download(blob, name) {
  const link = document.createElement('a');
  link.href = URL.createObjectURL(blob);
  link.download = name;
  link.click();
  setTimeout(() => URL.revokeObjectURL(link.href), 10000);
}

/** @param {HTMLCanvasElement} canvas @param {string} paper @param {string} name */
export function savePng(canvas, paper, name) {
  const copy = document.createElement('canvas');
  copy.width = canvas.width;
  copy.height = canvas.height;
  const context = /** @type {CanvasRenderingContext2D} */ (copy.getContext('2d'));
  context.fillStyle = paper;
  context.fillRect(0, 0, copy.width, copy.height);
  context.drawImage(canvas, 0, 0);
  copy.toBlob((blob) => blob && download(blob, `${name}.png`));
}

/** @param {import('./specs.js').Spec} spec @param {string} name */
export function saveCsv(spec, name) {
  download(new Blob([csvOf(spec)], { type: 'text/csv' }), `${name}.csv`);
}

/** @param {import('./specs.js').Spec} spec @param {string} name @param {(colour: string) => string} paint
 * @param {string} title */
export function saveSvg(spec, name, paint, title) {
  download(new Blob([svgOf(spec, paint, title)], { type: 'image/svg+xml' }), `${name}.svg`);
}

/** @param {string} s */
const escape = (s) => s.replace(/[&<>"]/g, (c) => ({ '&': '&amp;', '<': '&lt;', '>': '&gt;', '"': '&quot;' })[c] ?? c);

/** A figure of its own: axes, lines, marks' words. @param {import('./specs.js').Spec} spec
 * @param {(colour: string) => string} paint a theme colour's value @param {string} title */
export function svgOf(spec, paint, title) {
  const W = 900;
  const H = 420;
  const area = { x: 64, y: 40, w: W - 100, h: H - 90 };
  const px = (/** @type {number} */ x) => area.x + ((x - spec.xRange[0]) / (spec.xRange[1] - spec.xRange[0])) * area.w;
  const py = (/** @type {number} */ y) => area.y + area.h - ((y - spec.yRange[0]) / (spec.yRange[1] - spec.yRange[0])) * area.h;
  const text = (/** @type {number} */ x, /** @type {number} */ y, /** @type {string} */ s, anchor = 'middle', colour = 'ink2') => `<text x="${x.toFixed(1)}" y="${y.toFixed(1)}" text-anchor="${anchor}" fill="${paint(colour)}">${escape(s)}</text>`;
  const out = [`<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 ${W} ${H}" font-family="sans-serif" font-size="12">`, `<title>${escape(title)}</title>`, `<rect width="${W}" height="${H}" fill="${paint('paper')}"/>`, text(area.x, 18, title, 'start', 'ink')];
  for (const y of ticks(...spec.yRange, 5)) out.push(`<path d="M${area.x} ${py(y).toFixed(1)}h${area.w}" stroke="${paint('line')}"/>`, text(area.x - 6, py(y) + 4, dress(String(y)), 'end'));
  for (const x of ticks(...spec.xRange, 8)) out.push(`<path d="M${px(x).toFixed(1)} ${area.y + area.h}v5" stroke="${paint('edge')}"/>`, text(px(x), area.y + area.h + 18, dress(String(x))));
  out.push(text(area.x, area.y - 6, spec.yUnit, 'start'), text(area.x + area.w, H - 10, spec.xUnit, 'end'));
  for (const line of spec.lines) {
    const points = spec.x.map((x, i) => [x, line.data[i]]).filter(([x, y]) => y !== null && y !== undefined && /** @type {number} */ (x) >= spec.xRange[0] && /** @type {number} */ (x) <= spec.xRange[1])
      .map(([x, y]) => `${px(/** @type {number} */ (x)).toFixed(1)},${Math.min(area.y + area.h, Math.max(area.y, py(/** @type {number} */ (y)))).toFixed(1)}`);
    out.push(`<polyline fill="none" stroke="${paint(line.colour)}" stroke-width="${line.width}"${line.dash ? ` stroke-dasharray="${line.dash.join(' ')}"` : ''} points="${points.join(' ')}"/>`);
  }
  for (const m of spec.marks) {
    if (m.text && m.x0 !== undefined && Number.isFinite(m.x0)) out.push(text(px(m.x0), m.y0 !== undefined ? py(m.y0) - 6 : area.y + 12, m.text, m.kind === 'flag' ? 'middle' : 'start', m.colour ?? 'ink'));
  }
  return out.join('') + '</svg>\n';
}
