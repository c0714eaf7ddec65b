// The views of the two matrices: rounded numbers, six digits, the formula form, the dot diagram; and what is copied.

import { make } from "./overlay.js";

/** @typedef {{label: string, state: string, because: string, equals: string|null, number: {text: string, whole: string, rest: string, spread: string}, six: string, value: number, sigma: number|null, formula: [string, string][], dot: string, joined: string|null, sum?: string, spoken: string}} Cell */
/** @typedef {"numbers"|"six"|"formula"|"dots"} View */

export const VIEWS = /** @type {View[]} */ (["numbers", "six", "formula", "dots"]);

/** What is asked for, or the rounded numbers where that is no view. @param {string|null|undefined} wanted @returns {View} */
export const chooseView = (wanted) => VIEWS.find((view) => view === wanted) ?? "numbers";

/** A number in three parts, aligned on the point. @param {string} text */
export function splitNumber(text) {
  const [head] = text.split(/(?=×)/);
  const point = head.indexOf(".");
  return point < 0 ? { text, whole: head, rest: text.slice(head.length), spread: "" } : { text, whole: text.slice(0, point), rest: text.slice(point), spread: "" };
}

/** Pairs of places of joined dots, in row order. @param {Cell[]} cells nine of them @returns {[number, number][]} */
export function listLinks(cells) {
  return cells.flatMap((cell, place) => {
    const other = cell.joined ? cells.findIndex((one) => one.label === cell.joined) : -1;
    return other < 0 ? [] : [/** @type {[number, number]} */ ([other, place])];
  });
}

/** The line between two dots, bowed where it would run through the dot between them; a cell is 2 × 2.
 * @param {[number, number]} link */
export function drawLink([from, to]) {
  const at = (/** @type {number} */ place) => [2 * (place % 3) + 1, 2 * Math.floor(place / 3) + 1];
  const [x1, y1] = at(from), [x2, y2] = at(to);
  const far = Math.max(Math.abs(x2 - x1), Math.abs(y2 - y1)) > 2;
  if (!far) return `M${x1} ${y1}L${x2} ${y2}`;
  const size = Math.hypot(x2 - x1, y2 - y1), bow = 1.15;
  return `M${x1} ${y1}Q${(x1 + x2) / 2 + ((y2 - y1) / size) * bow} ${(y1 + y2) / 2 - ((x2 - x1) / size) * bow} ${x2} ${y2}`;
}

const plain = (/** @type {string} */ text) => text.replace(/[\u2212\u2013]/g, "-").replace(/[\u00a0\u2009\u202f]/g, " ");
const columns = (/** @type {Cell[]} */ cells) => [cells.slice(0, 3), cells.slice(3, 6), cells.slice(6, 9)];

/** A matrix as text, with its unit and frame; signs are those that programs read.
 * @param {string} form "table", "python" or "latex" @param {{name: string, unit: string, frame: string, axes: string[], view: View}} about @param {Cell[]} cells */
export function writeCopy(form, { name, unit, frame, axes, view }, cells) {
  const head = plain([name, unit].filter(Boolean).join(", ")), where = plain(frame);
  const written = (/** @type {Cell} */ cell) =>
    view === "six" ? plain(cell.six) : view === "numbers" ? plain(cell.number.text) : plain(cell.formula.map(([run]) => run).join(""));
  if (form === "python") {
    const rows = (/** @type {(cell: Cell) => number} */ take) => columns(cells).map((row) => `    [${row.map((cell) => String(take(cell))).join(", ")}],`).join("\n");
    const known = cells.some((cell) => cell.sigma !== null);
    const spread = known ? `\nsigma = numpy.array([\n${rows((cell) => cell.sigma ?? 0)}\n])\n` : "\n";
    return `# ${head}; ${where}\nimport numpy\n\ntensor = numpy.array([\n${rows((cell) => cell.value)}\n])${spread}`;
  }
  if (form === "latex") {
    const set = (/** @type {Cell} */ cell) =>
      view === "formula" || view === "dots"
        ? cell.formula.map(([run, role]) => (role === "sub" ? `_{${run}}` : plain(run).replace(/ /g, "\\,"))).join("")
        : written(cell).replace(/×10([⁰¹²³⁴⁵⁶⁷⁸⁹⁻]+)/, (_, power) => `\\times10^{${[...power].map((sign) => "0123456789-"["⁰¹²³⁴⁵⁶⁷⁸⁹⁻".indexOf(sign)]).join("")}}`);
    return `% ${head}; ${where}\n\\begin{pmatrix}\n${columns(cells).map((row) => row.map(set).join(" & ")).join(" \\\\\n")}\n\\end{pmatrix}\n`;
  }
  const lines = columns(cells).map((row, k) => [axes[k], ...row.map(written)].join("\t"));
  return `${head}\n${where}\n${["", ...axes].join("\t")}\n${lines.join("\n")}\n`;
}

const span = (/** @type {string} */ name, /** @type {(Node|string)[]} */ ...inner) => {
  const element = document.createElement("span");
  element.className = name;
  element.append(...inner);
  return element;
};
const setRun = ([/** @type {string} */ run, /** @type {string} */ role]) =>
  role === "plain" ? document.createTextNode(run) : Object.assign(document.createElement(role === "sub" ? "sub" : "i"), { textContent: run });

/** What stands in a cell's button. @param {Cell} cell @param {View} view @param {() => Node} lock @param {(n: any) => Node[]} number @returns {Node[]} */
export function fillCell(cell, view, lock, number) {
  if (view === "dots") {
    const svg = make("svg", { class: "dot", viewBox: "-8 -8 16 16", "aria-hidden": "true" });
    if (cell.dot === "ringed") svg.append(make("circle", { class: "ring", r: 7 }), make("circle", { class: "heavy", r: 3.6 }));
    else svg.append(make("circle", cell.dot === "zero" ? { class: "small", r: 2 } : { class: cell.dot, r: 5 }));
    return [svg];
  }
  if (view === "formula") return [span("formula", ...(cell.state === "free" ? [] : [lock()]), ...(cell.state === "tied" && cell.formula.at(-1)?.[0] !== cell.label ? ["= "] : []), ...cell.formula.map(setRun))];
  if (view === "six") return cell.state === "zero" ? [span("i", "0"), span("f", lock())] : number(splitNumber(cell.six));
  return [];
}

/** The joining lines behind the dots of a matrix. @param {HTMLElement} matrix @param {Cell[]} cells @param {View} view */
export function drawLinks(matrix, cells, view) {
  let svg = matrix.querySelector("svg.links");
  if (view !== "dots") return svg?.remove();
  if (!svg) {
    svg = make("svg", { class: "links", viewBox: "0 0 6 6", preserveAspectRatio: "none", "aria-hidden": "true" });
    matrix.querySelector("table")?.before(svg);
  }
  const table = /** @type {HTMLElement} */ (matrix.querySelector("table")), first = /** @type {HTMLElement} */ (table.querySelector("tbody td"));
  Object.assign(/** @type {SVGElement} */ (svg).style, { left: `${first.offsetLeft + table.offsetLeft}px`, top: `${table.offsetTop + first.offsetTop}px`, width: `${table.offsetWidth - first.offsetLeft}px`, height: `${table.offsetHeight - first.offsetTop}px` });
  svg.replaceChildren(...listLinks(cells).map((link) => make("path", { d: drawLink(link) })));
}

const STORE = "halfturn-matrix-view";
let current = /** @type {View} */ ("numbers");
/** The view that is shown. */
export const currentView = () => current;

/** The buttons of the views and the copies. @param {() => void} repaint @param {(frame: string) => {about: any, cells: Cell[]}} take */
export function installViews(repaint, take) {
  const views = document.getElementById("views");
  if (!views) return;
  const show = (/** @type {View} */ view) => {
    current = view;
    views.querySelectorAll("[data-matrix-view]").forEach((button) => button.setAttribute("aria-pressed", String(/** @type {HTMLElement} */ (button).dataset.matrixView === view)));
    document.querySelectorAll(".mat").forEach((mat) => { /** @type {HTMLElement} */ (mat).dataset.shows = view; });
    repaint();
    const dots = new Set(["crystal", "specimen"].flatMap((frame) => take(frame).cells.map((cell) => cell.dot)));
    views.querySelectorAll("#signs li").forEach((entry) => {
      const { for: places = "", sign } = /** @type {HTMLElement} */ (entry).dataset;
      /** @type {HTMLElement} */ (entry).hidden = !places.split(" ").includes(view) || (sign !== undefined && !dots.has(sign));
    });
  };
  views.addEventListener("click", async (event) => {
    const target = /** @type {HTMLElement} */ (event.target), said = document.getElementById("copy-said");
    const view = target.closest("[data-matrix-view]"), copy = target.closest("[data-copy]");
    if (view) {
      show(chooseView(/** @type {HTMLElement} */ (view).dataset.matrixView));
      try { sessionStorage.setItem(STORE, current); } catch { /* a private window keeps nothing */ }
    }
    if (!copy || !said) return;
    const frame = /** @type {HTMLElement} */ (copy).dataset.copy ?? "crystal", form = /** @type {HTMLSelectElement} */ (document.getElementById("copy-form"));
    const { about, cells } = take(frame);
    try {
      await navigator.clipboard.writeText(writeCopy(form.value, { ...about, view: current }, cells));
      said.textContent = `Copied: ${frame} frame, as ${form.selectedOptions[0].textContent}.`;
    } catch { said.textContent = "The browser does not let this page write to the clipboard. Select the matrix and copy it."; }
  });
  addEventListener("resize", repaint);
  let kept = null;
  try { kept = sessionStorage.getItem(STORE); } catch { kept = null; }
  show(chooseView(kept));
}
