// The Readings page: an editable grid beside what it gives. Every row is taken as soon as one leaves it.

import { el } from "./matrix.js";
import { currentSample, take } from "./page.js";
import * as grids from "./readings-state.js";
import { fetchReadings, postReadings, postTable } from "./server.js";
import { typeset } from "./typeset.js";

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const grid = get("grid"), body = grid.tBodies[0], form = get("table-form"), table = get("table");
/** More rows than a page of fields can hold are edited as text. */
const MOST_ROWS = 400;
const NAMES = /** @type {Record<string, string>} */ (Object.fromEntries([...grid.querySelectorAll("th[data-column]")].map((th) => [th.dataset.column, th.textContent])));

const first = JSON.parse(get("readings-content").textContent);
let state = grids.begin({ ...first, batches: currentSample().document.batches ?? {} }, currentSample().revision);
state = { ...state, batches: Object.fromEntries(Object.entries(state.batches).map(([name, value]) => [name, String(value)])) };
let all = false, sending = false, again = false;
const editable = () => state.rows.length <= MOST_ROWS;

/** @param {string} text */
const say = (text) => { get("grid-said").textContent = text; };
/** @param {string} text */
function tell(text) { get("grid-fault").textContent = text; get("grid-fault").hidden = !text; }

/** @param {number} index */
function makeRow(index) {
  const row = el("tr", { "data-row": String(index) }, el("th", { scope: "row" }, String(index + 1)));
  for (const name of state.columns) {
    const input = el("input", { "data-column": name, "aria-label": `row ${index + 1}, ${NAMES[name]}`, autocomplete: "off", spellcheck: "false", ...(name === "kind" ? { list: "kinds" } : {}) });
    row.append(el("td", { "data-column": name }, input));
  }
  const act = (/** @type {string} */ name, /** @type {string} */ text, /** @type {string} */ label) => el("button", { type: "button", class: "row-act", "data-act": name, "aria-label": `${label} row ${index + 1}`, title: label }, text);
  row.append(el("td", { class: "acts" }, act("aside", "set aside", "Set aside"), act("remove", "×", "Remove"), el("input", { class: "reason", "data-reason": "", "aria-label": `why row ${index + 1} is set aside`, hidden: "" })));
  return row;
}

/** Bring the grid to the state; what has the focus keeps it. */
function paint() {
  get("grid-acts").hidden = false;
  get("add-row").hidden = get("all-columns").hidden = !editable();
  if (!editable()) { get("as-text").open = true; return say(`${state.rows.length} rows: edit them as text.`); }
  if (body.rows.length !== state.rows.length || !body.querySelector("input")) body.replaceChildren(...state.rows.map((_, index) => makeRow(index)));
  const shown = grids.shownColumns(state, all);
  for (const cell of grid.querySelectorAll("[data-column]")) if (cell.tagName !== "INPUT") cell.hidden = !shown.includes(cell.dataset.column);
  state.rows.forEach((row, index) => {
    const line = body.rows[index];
    line.classList.toggle("aside-row", row.set_aside !== null);
    for (const input of line.querySelectorAll("input[data-column]")) {
      const text = row.cells[input.dataset.column] ?? "", fault = state.faults[grids.faultKey(index, input.dataset.column)];
      if (input.value !== text) input.value = text;
      if (fault) { input.setAttribute("aria-invalid", "true"); input.title = fault; } else { input.removeAttribute("aria-invalid"); input.removeAttribute("title"); }
    }
    const reason = line.querySelector("[data-reason]"), button = line.querySelector("[data-act=aside]");
    reason.hidden = row.set_aside === null;
    if (row.set_aside !== null && reason.value !== row.set_aside) reason.value = row.set_aside;
    button.textContent = row.set_aside === null ? "set aside" : "use";
    button.setAttribute("aria-label", `${row.set_aside === null ? "Set aside" : "Take back"} row ${index + 1}`);
    button.title = row.set_aside === null ? "Set aside" : "Take back";
  });
  const names = grids.batchNames(state);
  if (get("batch-list").dataset.names !== JSON.stringify(names)) {
    get("batch-list").dataset.names = JSON.stringify(names);
    get("batch-list").replaceChildren(...(names.length ? [el("p", { class: "note" }, "Calibration error of each batch, as a part of the value (0.01 is one per cent):")] : []), ...names.map((name) => el("label", {}, `${name} `, el("input", { "data-batch": name, inputmode: "decimal", autocomplete: "off" }))));
  }
  for (const input of get("batch-list").querySelectorAll("input")) { const text = state.batches[input.dataset.batch] ?? ""; if (input.value !== text && input !== document.activeElement) input.value = text; }
  get("elsewhere").hidden = !state.theirs;
}

/** What the rows give, as the server set it. @param {any} answer */
function showAnswer(answer) {
  get("headline").replaceChildren(...typeset(answer.headline));
  get("second-line").replaceChildren(...typeset(answer.second_line));
  get("unit").textContent = answer.unit;
  get("fit-side").innerHTML = answer.result;
  form.action = `/samples/${answer.sample.id}/readings?revision=${answer.sample.revision}`;
}

async function send() {
  // Asked for while another is on its way: sent when that is answered.
  if (sending) { again = true; return; }
  if (!state.dirty || state.theirs) return;
  sending = true;
  again = false;
  const typed = state.typed;
  try {
    const { rows, batches } = grids.payload(state);
    const answer = await take((id, revision) => postReadings(id, state.base === revision ? revision : state.base, rows, batches));
    state = grids.taken(state, answer, answer.sample.revision, typed);
    tell("");
    say("taken");
    showAnswer(answer);
  } catch (error) {
    refused(error);
  }
  sending = false;
  paint();
  // What is being typed is sent when one leaves its row.
  if (state.dirty && state.typed !== typed && (again || !body.contains(document.activeElement))) send();
}

/** @param {any} error */
function refused(error) {
  state = grids.refuse(state, error);
  say("typed, not taken");
  if (error.status === 409) reload();
  else tell([error.message, error.hint].filter(Boolean).join(" "));
}

/** A whole table as text takes the place of the readings in use. @param {string} text */
async function takeText(text) {
  try {
    const answer = await take((id, revision) => postTable(id, revision, text));
    state = grids.begin(answer, answer.sample.revision);
    get("table-fault").hidden = true;
    get("as-text").open = false;
    tell("");
    say(`${answer.rows.length} readings taken`);
    showAnswer(answer);
    paint();
  } catch (failure) {
    const error = /** @type {any} */ (failure);
    table.value = text;
    get("as-text").open = true;
    const problems = error.detail?.problems ?? [];
    const lines = problems.slice(0, 40).map((/** @type {any} */ p) => el("li", {}, `line ${p.line}${p.column ? `, ${p.column}` : ""}: ${p.reason}`));
    if (problems.length > 40) lines.push(el("li", {}, `and ${(error.detail.count ?? problems.length) - 40} more`));
    get("table-fault").replaceChildren(el("p", {}, [error.message, error.hint].filter(Boolean).join(" ")), el("ul", {}, ...lines));
    get("table-fault").hidden = false;
    table.setAttribute("aria-invalid", "true");
    table.setAttribute("aria-describedby", "table-fault");
    table.focus();
  }
}

async function reload() {
  try {
    const answer = await fetchReadings(currentSample().id);
    const before = state;
    state = grids.learn(state, answer, answer.sample.revision);
    if (state.theirs === null && state !== before) { showAnswer(answer); tell(""); say(""); }
    paint();
  } catch { /* the header says that the server is gone */ }
}

const place = (/** @type {any} */ node) => ({ row: Number(node.closest("tr").dataset.row), column: node.dataset.column });
body.addEventListener("input", (/** @type {any} */ event) => {
  const { row, column } = place(event.target);
  state = column ? grids.setCell(state, row, column, event.target.value) : grids.setAside(state, row, event.target.value);
  event.target.removeAttribute("aria-invalid");
  say("typed, not taken yet");
});
body.addEventListener("focusout", (/** @type {FocusEvent} */ event) => {
  const from = /** @type {any} */ (event.target).closest("tr"), to = /** @type {any} */ (event.relatedTarget)?.closest?.("tr");
  if (from !== to) send();
});
body.addEventListener("keydown", (/** @type {KeyboardEvent} */ event) => {
  const input = /** @type {any} */ (event.target);
  if (!input.dataset?.column) return;
  const { row, column } = place(input);
  const down = event.key === "Enter" || event.key === "ArrowDown" ? 1 : event.key === "ArrowUp" ? -1 : 0;
  if (!down || (column === "kind" && event.key !== "Enter")) return;
  event.preventDefault();
  if (down === 1 && row === state.rows.length - 1 && event.key === "Enter") { state = grids.addRow(state, row); paint(); column && focusCell(row + 1, "kind"); return; }
  focusCell(row + down, column);
});
const focusCell = (/** @type {number} */ row, /** @type {string} */ column) => body.rows[row]?.querySelector(`input[data-column="${column}"]`)?.focus();
body.addEventListener("paste", (/** @type {ClipboardEvent} */ event) => {
  const input = /** @type {any} */ (event.target), text = event.clipboardData?.getData("text/plain") ?? "";
  if (!input.dataset?.column || !/[\t\n]/.test(text.trim())) return;
  event.preventDefault();
  if (grids.isTable(text)) return takeText(text);
  const { row, column } = place(input);
  state = grids.insertBlock(state, row, column, text);
  paint();
  send();
});
body.addEventListener("click", (/** @type {any} */ event) => {
  const act = event.target.dataset?.act;
  if (!act) return;
  const row = Number(event.target.closest("tr").dataset.row);
  if (act === "remove") state = grids.removeRow(state, row);
  else state = grids.setAside(state, row, state.rows[row].set_aside === null ? grids.NO_REASON : null);
  paint();
  if (act === "remove") (focusCell(Math.min(row, state.rows.length - 1), "kind"), get("add-row"));
  else if (state.rows[row].set_aside !== null) body.rows[row].querySelector("[data-reason]").select();
  send();
});
get("add-row").addEventListener("click", () => { state = grids.addRow(state, state.rows.length - 1); paint(); focusCell(state.rows.length - 1, "kind"); });
get("all-columns").addEventListener("click", () => { all = !all; get("all-columns").setAttribute("aria-pressed", String(all)); paint(); });
get("batch-list").addEventListener("change", (/** @type {any} */ event) => { state = grids.setBatch(state, event.target.dataset.batch, event.target.value); send(); });
get("show-theirs").addEventListener("click", () => { state = { ...state, dirty: false }; reload(); });
get("keep-mine").addEventListener("click", () => { state = grids.keepMine(state); paint(); send(); });

form.addEventListener("submit", (/** @type {Event} */ event) => { event.preventDefault(); takeText(table.value); });
const takeFile = async (/** @type {FileList|null|undefined} */ files) => { if (files?.length) takeText(await files[0].text()); };
get("file").addEventListener("change", () => takeFile(get("file").files).then(() => { get("file").value = ""; }));
const side = get("table-side");
for (const name of ["dragenter", "dragover"]) side.addEventListener(name, (/** @type {Event} */ event) => { event.preventDefault(); side.classList.add("dropping"); });
side.addEventListener("dragleave", () => side.classList.remove("dropping"));
side.addEventListener("drop", (/** @type {DragEvent} */ event) => { event.preventDefault(); side.classList.remove("dropping"); takeFile(event.dataTransfer?.files); });

// A change made elsewhere, an undo for one, shows what stands now; what is typed and not taken stays.
document.addEventListener("sample", (event) => { if (/** @type {CustomEvent} */ (event).detail.revision !== state.base && !sending) reload(); });
window.addEventListener("beforeunload", (event) => { if (state.dirty) event.preventDefault(); });
paint();
