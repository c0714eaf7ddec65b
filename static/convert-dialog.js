// A tensor as published in another setting: list the ways, audit one, take it.

import { clearFaults, showFault } from "./faults.js";
import { printNumber, readNumber } from "./format.js";
import { currentSample, edit } from "./page.js";
import { call } from "./server.js";

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const form = get("convert-form");
const make = (/** @type {string} */ tag, /** @type {object} */ values = {}, /** @type {Node[]} */ ...children) => {
  const node = Object.assign(document.createElement(tag), values);
  node.append(...children);
  return node;
};

/** @returns {any} */
function typed() {
  const read = (/** @type {string} */ field, /** @type {string} */ text) => {
    const value = readNumber(text);
    if (Number.isNaN(value)) throw { field, message: text.trim() ? `“${text}” is not a number.` : "A number is missing here.", hint: "Write it with a decimal point." };
    return value;
  };
  const cell = get("from-cell").value.trim().split(/[\s,;]+/).map((/** @type {string} */ text) => read("from.cell", text));
  const matrix = [1, 2, 3].map((row) => [1, 2, 3].map((column) => read(`tensor.matrix[${row - 1}][${column - 1}]`, get(`from-${row}${column}`).value)));
  /** @type {any} */
  const from = { cell, group: get("from-group").value.trim(), frame: get("from-frame").value.trim() };
  if (get("from-axis").value) from.unique_axis = get("from-axis").value;
  const { document: kept, derived } = currentSample();
  return { from, to: kept.crystal, tensor: { matrix, parity: derived.property?.parity ?? "polar", intrinsic: derived.property?.intrinsic ?? "symmetric" } };
}

/** @param {number[][]} basis */
const words = (basis) =>
  [0, 1, 2].map((j) => {
    const sum = [0, 1, 2].filter((i) => basis[i][j]).map((i) => `${basis[i][j] < 0 ? "−" : "+"}${Math.abs(basis[i][j]) === 1 ? "" : Math.abs(basis[i][j])}${"abc"[i]}`).join("");
    return `${"abc"[j]}′ = ${sum.replace(/^\+/, "")}`;
  }).join(", ");

/** @param {any} body @param {any} way */
async function audit(body, way) {
  try {
    const found = await call("convert", { ...body, basis: way.basis });
    const rows = found.audit.map((/** @type {any} */ entry) =>
      make("tr", {}, make("th", { scope: "row", textContent: entry.cell }), make("td", { textContent: Object.entries(entry.from).map(([label, factor]) => `${printNumber(/** @type {number} */ (factor), 5)}·${label}`).join(" + ").replaceAll("+ −", "− ") || "0" }), make("td", { textContent: printNumber(entry.value) })));
    const use = make("button", { type: "button", className: "button go", textContent: "Use this tensor" });
    use.addEventListener("click", () => edit({ tensor: { matrix: found.matrix, source: `Published in another setting: ${words(way.basis)}` } }).then(() => get("convert-dialog").close(), (error) => showFault(form, error)));
    get("audit").replaceChildren(make("h3", { textContent: "Audit, cell by cell" }), make("table", { className: "audit" }, make("thead", {}, make("tr", {}, ...["cell", "from the printed cells", "value"].map((text) => make("th", { scope: "col", textContent: text })))), make("tbody", {}, ...rows)), use);
    use.focus();
  } catch (error) {
    showFault(form, /** @type {any} */ (error));
  }
}

form.addEventListener("submit", async (/** @type {Event} */ event) => {
  event.preventDefault();
  clearFaults(form);
  get("ways").replaceChildren();
  get("audit").replaceChildren();
  try {
    const body = typed();
    const { candidates } = await call("convert", body);
    const items = candidates.map((/** @type {any} */ way) => {
      const button = make("button", { type: "button", className: "button", textContent: `${words(way.basis)}; misfit ${printNumber(100 * way.misfit, 2)} %` });
      button.addEventListener("click", () => audit(body, way));
      return button;
    });
    get("ways").replaceChildren(make("p", { className: "note", textContent: items.length ? `${items.length} ${items.length === 1 ? "way" : "ways"}, best first. Several can fit the cell; only the print can say which is meant.` : "No way leads from the printed cell to this one within 2 %. Look at the cell and its setting." }), ...items);
  } catch (error) {
    showFault(form, /** @type {any} */ (error));
  }
});
