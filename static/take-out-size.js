// How many pixels a picture has: pure, so that it is tested without a browser.

export const DOTS_PER_INCH = 300;
export const MOST_PIXELS = 100e6;
const LOWEST = 100, HIGHEST = 8000;

/**
 * The width in pixels of a picture whose width was typed, at 300 dots per inch where it was typed in mm.
 * @param {number} width @param {"mm"|"px"} unit @returns {number}
 * @throws {{field: string, message: string, hint: string}} out of bounds
 */
export function pixelWidth(width, unit) {
  const pixels = Math.round(unit === "mm" ? (width / 25.4) * DOTS_PER_INCH : width);
  if (!(pixels >= LOWEST && pixels <= HIGHEST)) {
    throw { field: "width", message: `A PNG ${Number.isFinite(pixels) ? pixels : "of no number of"} pixels wide cannot be made.`, hint: `Give ${LOWEST} to ${HIGHEST} px, or ${Math.ceil((LOWEST / DOTS_PER_INCH) * 25.4)} to ${Math.floor((HIGHEST / DOTS_PER_INCH) * 25.4)} mm; an SVG may be wider.` };
  }
  return pixels;
}

/**
 * Both sides in whole pixels. @param {number} width @param {number} ratio height over width @returns {[number, number]}
 * @throws {{field: string, message: string, hint: string}} more pixels than a browser can hold
 */
export function pixelSize(width, ratio) {
  const height = Math.round(width * ratio);
  if (!(height >= 1 && width * height <= MOST_PIXELS)) throw { field: "width", message: `A PNG of ${width} × ${height} pixels is too large for a browser.`, hint: "Give a smaller width, or take the SVG." };
  return [width, height];
}
