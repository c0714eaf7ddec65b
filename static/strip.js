// The crystal strip: cell, group, frame rule and CIF. What it shows comes from the event `sample`.

import { clearFaults, showFault } from "./faults.js";
import { printCell, printNumber, readNumber } from "./format.js";
import { currentSample, edit } from "./page.js";
import { call } from "./server.js";
import { typeset } from "./typeset.js";
import "./convert-dialog.js";
import "./property-dialog.js";

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const strip = get("crystal");
const form = get("crystal-form");
const NAMES = ["alpha", "beta", "gamma"];
const inputs = ["a", "b", "c", ...NAMES].map((name) => get(`cell-${name}`));
const SHORT = ["2", "m", "2/m"];
/** @type {number[]|null} */
let sigma = null;
let group = "";

/** @param {any} sample */
function update(sample) {
  const { crystal } = sample.document;
  const shown = sample.derived.crystal;
  const locks = shown?.cell_locks ?? [];
  get("strip-cell").textContent = printCell(crystal.cell, locks);
  get("strip-group").replaceChildren(...typeset(crystal.group + (shown?.unique_axis ? `, unique ${shown.unique_axis}` : "")));
  get("strip-frame").replaceChildren(...typeset(shown?.frame.sentence ?? crystal.frame));
  fill(crystal);
  showLocks(locks);
  get("cell-note").textContent = shown?.frame.volume ? `Volume ${printNumber(shown.frame.volume, 5)} Å³. ${shown.cell_sentence}` : "A limiting group has no cell.";
  const operations = shown?.operations ?? [];
  get("group-note").textContent = `${operations.slice(0, 6).join(", ")}${operations.length > 6 ? ", …" : ""}.${shown?.order ? ` ${shown.order} ${shown.order === 1 ? "operation" : "operations"}.` : ""}`;
  get("frame-drawing").innerHTML = shown?.drawing ?? "";
}

/** @param {any} crystal */
function fill(crystal) {
  inputs.forEach((input, index) => (input.value = crystal.cell ? String(crystal.cell[index]) : ""));
  sigma = crystal.cell_sigma ?? null;
  group = crystal.group;
  get("group").value = crystal.group;
  get("unique").value = crystal.unique_axis ?? "b";
  get("frame").value = crystal.frame ?? "x3=c x2=b*";
  showUnique();
}

/** @param {{state: string, equals: string|null}[]} locks */
function showLocks(locks) {
  for (const row of form.querySelectorAll("[data-parameter]")) {
    const lock = locks[Number(row.dataset.parameter)];
    const held = Boolean(lock && lock.state !== "free") && get("group").value === group;
    row.classList.toggle("is-held", held);
    row.querySelector(".held").hidden = !held;
    if (held) row.querySelector(".held-text").textContent = lock.equals;
  }
}

function showUnique() {
  get("unique-row").hidden = !SHORT.includes(get("group").value.replace(/\s/g, ""));
}

/** The crystal as typed; a parameter that cannot be read is told at its place. */
function typed() {
  const symbol = get("group").value.trim();
  const limiting = /^(∞|inf)/.test(symbol);
  const texts = inputs.map((input) => input.value.trim());
  /** @type {any} */
  const crystal = { group: symbol, cell: limiting || texts.every((text) => !text) ? null : texts.map(readNumber) };
  const wrong = crystal.cell?.findIndex(Number.isNaN) ?? -1;
  if (wrong >= 0) throw { field: `cell[${wrong}]`, message: `“${texts[wrong]}” is not a number.`, hint: "Write it with a decimal point, like 9.83." };
  if (crystal.cell) hold(crystal.cell);
  if (!limiting) crystal.frame = get("frame").value.trim() || "x3=c x2=b*";
  if (!get("unique-row").hidden) crystal.unique_axis = get("unique").value;
  if (sigma && crystal.cell) crystal.cell_sigma = sigma;
  return crystal;
}

/** A parameter that is tied and cannot be typed follows the one that it equals. @param {number[]} cell */
function hold(cell) {
  const locks = currentSample().derived.crystal?.cell_locks ?? [];
  if (get("group").value !== group) return;
  locks.forEach((/** @type {any} */ lock, /** @type {number} */ index) => {
    const source = locks.findIndex((/** @type {any} */ entry) => entry.symbol === lock.equals);
    if (lock.state === "tied" && source >= 0) cell[index] = cell[source];
  });
}

form.addEventListener("submit", (/** @type {Event} */ event) => {
  event.preventDefault();
  clearFaults(form);
  let crystal;
  try {
    crystal = typed();
  } catch (error) {
    showFault(form, /** @type {any} */ (error));
    return;
  }
  edit({ crystal }).catch((error) => showFault(form, error, "crystal."));
});
form.addEventListener("reset", (/** @type {Event} */ event) => {
  event.preventDefault();
  clearFaults(form);
  update(currentSample());
});
form.addEventListener("keydown", (/** @type {KeyboardEvent} */ event) => {
  if (event.key === "Escape") form.reset();
});
get("group").addEventListener("input", () => {
  showUnique();
  showLocks(currentSample().derived.crystal?.cell_locks ?? []);
});

// Picking by system, class and setting fills the symbol in.
const choices = JSON.parse(get("groups").textContent);
const option = (/** @type {string} */ text, /** @type {string} */ value = text) => new Option(text, value);
const unique = (/** @type {string[]} */ list) => [...new Set(list)];
function listClasses() {
  const fits = choices.filter((/** @type {any} */ entry) => entry.system === get("pick-system").value);
  get("pick-class").replaceChildren(...unique(fits.map((/** @type {any} */ entry) => entry.class)).map((text) => option(text)));
  listSettings();
}
function listSettings() {
  const fits = choices.filter((/** @type {any} */ entry) => entry.system === get("pick-system").value && entry.class === get("pick-class").value);
  get("pick-setting").replaceChildren(...fits.map((/** @type {any} */ entry) => option(entry.unique_axis ? `${entry.group}, unique ${entry.unique_axis}` : entry.group, String(choices.indexOf(entry)))));
  explain();
}
function explain() {
  const chosen = choices[Number(get("pick-setting").value)];
  get("pick-note").textContent = chosen ? `${chosen.words}.` : "";
  return chosen;
}
function pick() {
  const chosen = explain();
  get("group").value = chosen.group;
  if (chosen.unique_axis) get("unique").value = chosen.unique_axis;
  get("group").dispatchEvent(new Event("input"));
}
get("pick-system").replaceChildren(...unique(choices.map((/** @type {any} */ entry) => entry.system)).map((text) => option(text)));
get("pick-system").addEventListener("change", () => (listClasses(), pick()));
get("pick-class").addEventListener("change", () => (listSettings(), pick()));
get("pick-setting").addEventListener("change", pick);
listClasses();

/** @param {File|undefined} file */
async function takeCif(file) {
  if (!file) return;
  clearFaults(form);
  try {
    const found = await call("cif", { text: await file.text() });
    fill({ frame: get("frame").value, ...found.crystal });
    get("group").dispatchEvent(new Event("input"));
    get("cif-note").textContent = [`Read ${found.block ?? file.name}; look at it, then take it.`, ...(found.notes ?? [])].join(" ");
  } catch (error) {
    showFault(form, /** @type {any} */ (error));
  }
}
get("cif").addEventListener("change", () => takeCif(get("cif").files[0]));
for (const name of ["dragover", "drop"]) {
  strip.addEventListener(name, (/** @type {DragEvent} */ event) => {
    event.preventDefault();
    if (name === "drop") takeCif(event.dataTransfer?.files[0]);
  });
}

// Dialogs open from any page by data-open.
document.addEventListener("click", (event) => {
  const target = /** @type {HTMLElement} */ (event.target);
  const opener = target.closest("[data-open]")?.getAttribute("data-open");
  if (opener) get(opener)?.showModal();
  if (target.closest("[data-close]")) target.closest("dialog")?.close();
});
document.addEventListener("sample", (event) => update(/** @type {CustomEvent} */ (event).detail));
update(currentSample());
