// Symbols within plain sentences: x₁ and p₂ with subscripts, axes in italics, a bar over a negative index. The server
// paints by the same rule (app/web/typesetting.py), and one table of cases holds for both.

const INDICES = /((?<![\d.])(?:\((?=[^)]*−)(?:(?:−?\d){3,4}|−?\d\d?(?: −?\d\d?){2,3})\)|\[(?=[^\]]*−)(?:(?:−?\d){3,4}|−?\d\d?(?: −?\d\d?){2,3})\]))/;
const LETTERS = /(?<![\w(\[])(?:([xp])([1-3])(?!\w)|([xyz])(?![\w)\]])|(?:(?<=along )|(?<=unique )|(?<=across ))([abc])(\*?)(?![\w)\]]))/;
const SYMBOLS = new RegExp(`${INDICES.source}|${LETTERS.source}`, "g");

/** A sentence as runs of text and role: "plain", "symbol", "sub" or "indices". @param {string} text @returns {[string, string][]} */
export function splitSymbols(text) {
  /** @type {[string, string][]} */
  const runs = [];
  let at = 0;
  const add = (/** @type {string|undefined} */ part, /** @type {string} */ role) => { if (part) runs.push([part, role]); };
  for (const found of text.matchAll(SYMBOLS)) {
    add(text.slice(at, found.index), "plain");
    add(found[1], "indices");
    add(found[2] ?? found[4] ?? found[5], "symbol");
    add(found[3], "sub");
    add(found[6], "plain");
    at = found.index + found[0].length;
  }
  add(text.slice(at), "plain");
  return runs;
}

/** What a screen reader says of an index form. @param {string} form @returns {string} */
export const speakIndices = (form) =>
  `${form[0] === "(" ? "plane" : "row"} ${[...form.matchAll(form.includes(" ") ? /−?\d+/g : /−?\d/g)].map(([word]) => word.replace("−", "minus ")).join(" ")}`;

/** Bars over negative indices; the minus sign stays in the text for whoever copies it. @param {string} form */
function barIndices(form) {
  const span = Object.assign(document.createElement("span"), { className: "indices" });
  span.setAttribute("role", "img");
  span.setAttribute("aria-label", speakIndices(form));
  for (const [part] of form.matchAll(form.includes(" ") ? /−\d+|[^−]/g : /−\d|[^−]/g)) {
    if (part[0] !== "−") { span.append(part); continue; }
    const over = Object.assign(document.createElement("span"), { className: "over" });
    over.append(Object.assign(document.createElement("span"), { className: "minus", textContent: "−" }), part.slice(1));
    span.append(over);
  }
  span.normalize();
  return span;
}

/** The same as nodes of a page. @param {string} text @returns {Node[]} */
export const typeset = (text) =>
  splitSymbols(text).map(([run, role]) =>
    role === "plain" ? document.createTextNode(run) : role === "indices" ? barIndices(run) : Object.assign(document.createElement(role === "sub" ? "sub" : "i"), { textContent: run }));
