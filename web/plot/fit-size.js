// @ts-check
/* How large a big figure can be: em widths of its cells, measured once a font. */

/** @type {Map<string, {digit: number, point: number}>} */
const widths = new Map();

/** Widths of a digit and of the decimal sign, in em. @param {string} family @param {number} weight
 * @param {string} decimal */
export function glyphWidths(family, weight, decimal) {
  const key = `${weight} ${family} ${decimal}`;
  let found = widths.get(key);
  if (!found) {
    const context = document.createElement('canvas').getContext('2d');
    found = { digit: 0.65, point: 0.35 };
    if (context) {
      context.font = `${weight} 100px ${family}`;
      const digit = Math.max(...'0123456789'.split('').map((c) => context.measureText(c).width));
      found = { digit: digit / 100, point: context.measureText(decimal).width / 100 };
    }
    widths.set(key, found);
  }
  return found;
}

/** Width in em of a figure of these places. @param {import('../format.js').Places} places
 * @param {{digit: number, point: number}} glyph @param {number} tracking em
 * @param {number} tailScale of the decimals: 1, or smaller where they do not fit */
export function figureEm(places, glyph, tracking, tailScale = 1) {
  const groups = places.int >= 5 ? Math.floor((places.int - 1) / 3) * 0.16 : 0;
  const decimals = places.dec ? (glyph.point + tracking) + places.dec * (glyph.digit + tracking) * tailScale : 0;
  return places.int * (glyph.digit + tracking) + groups + decimals;
}
