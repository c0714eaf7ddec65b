// Symbols within plain sentences: x₁ and p₂ with subscripts, axes in italics. The server paints by the same rule.

const SYMBOLS = /(?<![\w(\[])(?:([xp])([1-3])(?!\w)|([xyz])(?![\w)\]])|(?:(?<=along )|(?<=unique )|(?<=across ))([abc])(\*?)(?![\w)\]]))/g;

/** A sentence as runs of text and role: "plain", "symbol" or "sub". @param {string} text @returns {[string, string][]} */
export function splitSymbols(text) {
  /** @type {[string, string][]} */
  const runs = [];
  let at = 0;
  const add = (/** @type {string|undefined} */ part, /** @type {string} */ role) => { if (part) runs.push([part, role]); };
  for (const found of text.matchAll(SYMBOLS)) {
    add(text.slice(at, found.index), "plain");
    add(found[1] ?? found[3] ?? found[4], "symbol");
    add(found[2], "sub");
    add(found[5], "plain");
    at = found.index + found[0].length;
  }
  add(text.slice(at), "plain");
  return runs;
}

/** The same as nodes of a page. @param {string} text @returns {Node[]} */
export const typeset = (text) =>
  splitSymbols(text).map(([run, role]) =>
    role === "plain" ? document.createTextNode(run) : Object.assign(document.createElement(role === "sub" ? "sub" : "i"), { textContent: run }));
