// The two matrices, the sentence and the column: views as functions with an idempotent update.

import { currentView, drawLinks, fillCell } from "./matrix-views.js";
import { make } from "./overlay.js";
import { typeset } from "./typeset.js";

/** @param {string} name @param {Record<string, string>} [set] @param {(Node|string)[]} [inner] */
export const el = (name, set = {}, ...inner) => {
  const element = document.createElement(name);
  for (const [key, value] of Object.entries(set)) element.setAttribute(key, value);
  element.append(...inner);
  return element;
};
const lock = () => { const svg = make("svg", { class: "lock", viewBox: "0 0 12 14", "aria-hidden": "true" }); svg.append(make("path", { d: "M3 6.2V4a3 3 0 0 1 6 0v2.2" }), make("rect", { x: 1.2, y: 6.2, width: 9.6, height: 7, rx: 1 })); return svg; };
/** @param {any} n */
const number = (n) => [el("span", { class: "i" }, n.whole), el("span", { class: "f" }, n.rest, el("span", { class: "u" }, n.spread))];
/** Changes the texts of a printed number in place. @param {Element} place @param {any} n */
const setNumber = (place, n) => {
  const whole = place.querySelector(":scope > .i"), rest = place.querySelector(":scope > .f")?.firstChild, spread = place.querySelector(".u");
  if (!whole || rest?.nodeType !== Node.TEXT_NODE || !spread) return place.replaceChildren(...number(n));
  for (const [node, text] of /** @type {[Node, string][]} */ ([[whole, n.whole], [rest, n.rest], [spread, n.spread]])) if (node.textContent !== text) node.textContent = text;
};
const byId = (/** @type {string} */ id) => /** @type {HTMLElement} */ (document.getElementById(id));
const tags = /** @type {Record<string, string>} */ ({ symbol: "i", sub: "sub", value: "strong" });

/** @param {any} answer */
export function showPose(answer) {
  byId("sentence").querySelectorAll("span.l1, span.l2").forEach((line, k) => line.replaceChildren(...answer.sentence.lines[k].flatMap((/** @type {any} */ [text, role]) => (tags[role] ? [el(tags[role], {}, text)] : role === "plain" ? typeset(text) : [el("span", { class: "nw" }, text)]))));
  byId("where").replaceChildren(...typeset(answer.where));
  document.querySelectorAll("#specimen-matrix .cell").forEach((cell, k) => {
    const content = answer.cells[Math.floor(k / 3)][k % 3];
    const view = currentView();
    cell.replaceChildren(...(view === "numbers" ? [...number(content.number), ...(content.state === "zero" ? [lock()] : [])] : fillCell(content, view, lock, number)));
    cell.classList.toggle("zero", content.state === "zero");
    cell.setAttribute("aria-label", content.spoken);
    if (cell.classList.contains("shown")) byId("posed-why").replaceChildren(...typeset(explain(content)));
  });
  drawLinks(byId("specimen-matrix"), answer.cells.flat(), currentView());
  byId("along").querySelectorAll("tbody tr").forEach((row, k) => {
    const { value, rod, flux } = answer.along[k];
    const cells = row.querySelectorAll("td");
    setNumber(cells[0], value);
    if (rod) setNumber(cells[1], rod);
    else cells[1].replaceChildren("–");
    cells[1].hidden = byId("other-head").hidden;
    cells[2].textContent = flux;
  });
  showRuler(answer.ruler);
}

/** Why a cell of the specimen frame is what it is; in the formula form and the diagram its value by the crystal's free cells. @param {any} cell */
const explain = (cell) => (["formula", "dots"].includes(currentView()) && cell.state !== "zero" ? cell.sum : cell.because);

/** @param {any} p @param {number} x */
function principalName(p, x) {
  const text = make("text", { class: `name${p.locked ? " locked" : ""}`, x, y: 12 }, "p");
  text.append(make("tspan", { class: "sub", dy: 3 }, p.name));
  return text;
}

let scale = "";

/** The scale and its principal values stay while a tensor is turned; only the marks of the axes move. @param {any} ruler */
function showRuler(ruler) {
  const at = (/** @type {number} */ part) => 8 + 300 * part;
  const svg = byId("ruler"), asked = JSON.stringify([ruler.ticks, ruler.principal]);
  if (scale !== asked) {
    const still = [make("path", { d: "M8 36H308V62H8Z" + ruler.ticks.map((/** @type {any} */ t) => `M${at(t.at)} 36v${t.text ? 9 : 4}`).join("") })];
    for (const tick of ruler.ticks) if (tick.text) still.push(make("text", { x: at(tick.at), y: 58 }, tick.text));
    for (const p of ruler.principal) still.push(make("path", { class: `mark${p.locked ? " locked" : ""}`, d: `M${at(p.at)} 17l5 5-5 5-5-5ZM${at(p.at)} 27v9` }), principalName(p, at(p.at)));
    const axes = ruler.axes.flatMap((/** @type {any} */ a) => [make("path", { class: "mark", "data-axis": a.name }), make("text", { class: "name", "data-axis": a.name, y: 88 }, a.name)]);
    svg.replaceChildren(...still, ...axes);
    scale = asked;
  }
  for (const a of ruler.axes) {
    const [mark, name] = svg.querySelectorAll(`[data-axis="${a.name}"]`);
    mark.setAttribute("d", `M${at(a.at)} 62l4 10h-8Z`);
    name.setAttribute("x", String(at(a.at)));
  }
}

/** @param {any} subject */
export function showSubject(subject) {
  byId("frame-sentence").replaceChildren(...typeset(subject.frame));
  for (const cell of subject.cells.flat()) {
    const button = document.querySelector(`[data-cell="${cell.label}"]`);
    if (!button) continue;
    button.className = `cell ${cell.state}`;
    button.setAttribute("aria-label", cell.spoken);
    if (currentView() !== "numbers") button.replaceChildren(...fillCell(cell, currentView(), lock, number), ...(cell.state === "tied" && currentView() === "six" ? [el("span", { class: "eq" }, lock(), `= ${cell.equals}`)] : []));
    else if (cell.state === "zero") button.replaceChildren(el("span", { class: "i" }, "0"), el("span", { class: "f" }, lock()));
    else button.replaceChildren(...number(cell.number), ...(cell.state === "tied" ? [el("span", { class: "eq" }, lock(), `= ${cell.equals}`)] : []));
  }
  drawLinks(byId("crystal-matrix"), subject.cells.flat(), currentView());
  byId("shape").textContent = subject.shape;
  byId("other-head").textContent = subject.other ?? "";
  byId("other-head").hidden = !subject.other;
  byId("region-note").hidden = !subject.has_region;
  byId("answer-note").hidden = !subject.answer;
  byId("answer-words").replaceChildren(...typeset(subject.answer ?? ""));
  byId("settling-note").hidden = !subject.settling;
  byId("settling-note").replaceChildren(...typeset(subject.settling ?? ""));
  byId("principal").replaceChildren(...subject.principal.map((/** @type {any} */ p) => el("div", p.locked ? { class: "lk" } : {}, el("dt", {}, el("i", {}, "p"), el("sub", {}, p.name)), el("dd", {}, el("b", {}, p.value), el("span", {}, ...(p.locked ? [lock()] : []), ...[].concat(p.lines).flatMap((line, k) => [...(k ? [el("br")] : []), ...typeset(line)]))))));
  const entry = (/** @type {any[]} */ paths, /** @type {string} */ text) => { const svg = make("svg", { viewBox: "0 0 46 14", "aria-hidden": "true" }); svg.append(...paths.map(([name, d]) => make("path", { class: name, d }))); return el("li", {}, svg, text); };
  byId("key").replaceChildren(
    entry([["axis", "M2 7h32"], ["head", "M46 7l-14-5 3 5-3 5z"]], "specimen"), entry([["crystal", "M2 7h33"], ["ring", "M35 7a5 5 0 1 0 10 0a5 5 0 1 0-10 0Z"]], "crystal"), entry([["principal", "M2 7h34"], ["diamond", "M40 1.5l5.5 5.5-5.5 5.5-5.5-5.5z"]], "principal"),
    ...(subject.mirrors.length ? [entry([["mirror", "M2 7h42"]], `mirror across ${subject.mirrors.join(", ")}`)] : []), entry([["cross", "M2 3h42M2 11h42"], ["axis", "M2 7h42"]], `value, every ${subject.step}`));
}

/** Name and unit of what is shown. @param {any} property @param {string} unit */
export function showProperty(property, unit) {
  if (!property) return;
  byId("property-line").textContent = [property.name.slice(0, 1).toUpperCase() + property.name.slice(1), unit].filter(Boolean).join(", ");
  byId("along-unit").textContent = unit;
}

/** What the surface's radius means. @param {any} subject @param {string} kind */
export function showSurfaceWords(subject, kind) {
  const { lead, words } = subject.surfaces[kind];
  byId("surface-name").textContent = { quadric: "Quadric", value: "Value surface", flux: "Flux surface" }[kind] ?? "";
  byId("quadric").textContent = kind === "quadric" ? subject.quadric : `quadric: ${subject.quadric}`;
  byId("lead").textContent = lead;
  byId("words").replaceChildren(...typeset(words));
}

/** The kept poses, each a button that turns there and one that forgets it. @param {{name: string, pose: any}[]} poses */
export function showPoses(poses) {
  byId("poses").replaceChildren(...poses.map(({ name }) => el("li", {}, el("button", { type: "button", class: "button btn", "data-pose": name }, name), el("button", { type: "button", class: "row-act", "data-forget": name, "aria-label": `Forget the pose ${name}` }, "×"))));
}

/** The specimen frame's cells say on focus or under the pointer what makes them so. @param {() => any} answer */
export function explainPosed(answer) {
  const table = byId("specimen-matrix");
  const tell = (/** @type {Event} */ event) => {
    const button = /** @type {HTMLElement} */ (event.target)?.closest?.("[data-posed]");
    if (!button) return;
    table.querySelectorAll(".shown").forEach((other) => other.classList.remove("shown"));
    button.classList.add("shown");
    const cell = answer().cells.flat().find((/** @type {any} */ c) => c.label === /** @type {any} */ (button).dataset.posed);
    byId("posed-why").replaceChildren(...typeset(explain(cell)));
  };
  table.addEventListener("focusin", tell);
  table.addEventListener("mouseover", tell);
}

/** Cells of the crystal frame: free ones are typed into, locked ones say why. @param {(label: string, text: string) => Promise<any>} take @param {() => any} subject */
export function makeEditable(take, subject) {
  const table = byId("crystal-matrix");
  const find = (/** @type {string} */ label) => subject().cells.flat().find((/** @type {any} */ c) => c.label === label);
  const tell = (/** @type {Event} */ event) => {
    const button = /** @type {HTMLElement} */ (event.target)?.closest?.("[data-cell]");
    if (!button) return;
    table.querySelectorAll(".shown").forEach((other) => other.classList.remove("shown"));
    const cell = find(/** @type {any} */ (button).dataset.cell);
    byId("why").replaceChildren(...typeset(cell.state === "free" ? "" : cell.because));
    if (cell.state !== "free") button.classList.add("shown");
  };
  table.addEventListener("focusin", tell);
  table.addEventListener("mouseover", tell);
  table.addEventListener("click", (event) => {
    const button = /** @type {any} */ (event.target).closest("[data-cell]");
    if (!button || find(button.dataset.cell).state !== "free") return;
    const label = button.dataset.cell, old = find(label).number.text;
    const input = /** @type {HTMLInputElement} */ (el("input", { class: "cell-input", "aria-label": `cell ${label}`, "aria-describedby": "hint", value: old }));
    button.hidden = true;
    button.after(input);
    input.select();
    byId("hint").textContent = `${label}: Enter takes it, Esc leaves ${old}`;
    const leave = () => { input.remove(); button.hidden = false; byId("hint").textContent = ""; button.focus(); };
    input.addEventListener("keydown", (key) => {
      key.stopPropagation();
      if (key.key === "Escape") leave();
      if (key.key === "Enter") take(label, input.value).then(leave, (error) => { input.setAttribute("aria-invalid", "true"); byId("hint").textContent = `${error.message} ${error.hint ?? ""}`; });
    });
  });
}
