// Small printed forms; no physics.

const MINUS = "\u2212";

/** Local time of day of an ISO moment. @param {string} iso @returns {string} */
export function clockTime(iso) {
  const moment = new Date(iso);
  if (Number.isNaN(moment.getTime())) return "";
  return `${String(moment.getHours()).padStart(2, "0")}:${String(moment.getMinutes()).padStart(2, "0")}`;
}

/** A number as short as it reads back to so many digits, with a true minus. @param {number} value @param {number} [digits] @returns {string} */
export function printNumber(value, digits = 6) {
  if (Math.abs(value) < 1e-12) return "0";
  return String(Number(value.toPrecision(digits))).replace(/-/g, MINUS);
}

/** What was typed as a number, or NaN; every sign for a minus is read. @param {string} text @returns {number} */
export function readNumber(text) {
  const plain = text.trim().replace(/[\u2212\u2013]/g, "-");
  return /^[+-]?(\d+\.?\d*|\.\d+)(e[+-]?\d+)?$/i.test(plain) ? Number(plain) : NaN;
}

/** The cell in one line: angles only where they are not held. @param {number[]|null} cell @param {{state: string, symbol: string}[]} locks @returns {string} */
export function printCell(cell, locks) {
  if (!cell) return "none";
  const angles = [3, 4, 5]
    .filter((index) => !locks[index] || locks[index].state === "free")
    .map((index) => `${"αβγ"[index - 3]}\u00a0${printNumber(cell[index])}°`);
  return [cell.slice(0, 3).map((edge) => printNumber(edge)).join("\u2002") + "\u00a0Å", ...angles].join("\u2002");
}
