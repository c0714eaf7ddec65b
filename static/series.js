// The Series page: cells against a variable, a slider over it, and what follows from them.

import { clearFaults, showFault } from "./faults.js";
import { readNumber } from "./format.js";
import { el } from "./matrix.js";
import { currentSample, take as takeChange } from "./page.js";
import { fetchSeries, postCifs, postSeries, useSeries } from "./server.js";
import { typeset } from "./typeset.js";

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const form = get("series-form"), slider = get("at"), side = get("series-side");
let own = 0;
/** A change of this page: the event that it causes is answered by what it brings. @type {typeof takeChange} */
const take = async (send) => { own += 1; try { return await takeChange(send); } finally { own -= 1; } };
let revision = currentSample().revision, typed = false, asking = false, wanted = false;

/** @param {any} answer */
function show(answer) {
  get("headline").replaceChildren(...typeset(answer.headline));
  get("second-line").replaceChildren(...typeset(answer.second_line));
  get("series-answer").innerHTML = answer.result;
  get("slider").hidden = answer.range === null;
  if (answer.range) {
    Object.assign(slider, { min: answer.range[0], max: answer.range[1], step: answer.step });
    if (document.activeElement !== slider) slider.value = answer.at;
    get("at-text").textContent = get("series-answer").querySelector("h2")?.firstChild?.textContent?.replace("Expansion at ", "").trim() ?? "";
  }
  if (!typed) get("series-table").value = answer.table;
  const settings = { degree: answer.series.degree, strain: answer.series.strain, reference: answer.series.reference ?? "", faces: answer.series.faces.map((/** @type {string[]} */ pair) => pair.join("  ")).join("\n") };
  for (const [name, value] of Object.entries(settings)) if (document.activeElement !== get(name)) get(name).value = value;
  revision = answer.sample?.revision ?? revision;
}

/** @param {any} failure */
function refuse(failure) {
  showFault(form, failure, "change.");
  const problems = failure.detail?.problems ?? [];
  if (!problems.length) return;
  const lines = problems.slice(0, 40).map((/** @type {any} */ p) => el("li", {}, `line ${p.line}${p.column ? `, ${p.column}` : ""}: ${p.reason}`));
  get("table-fault").replaceChildren(el("span", {}, failure.message), el("ul", {}, ...lines));
  get("table-fault").hidden = false;
}

/** @param {object} change */
async function send(change) {
  clearFaults(form);
  try {
    const at = get("slider").hidden ? null : Number(slider.value);
    const answer = await take((id, parent) => postSeries(id, parent, change, at));
    typed = typed && !("table" in change);
    show(answer);
    get("series-said").textContent = "taken";
  } catch (failure) {
    refuse(failure);
  }
}

form.addEventListener("submit", (/** @type {Event} */ event) => { event.preventDefault(); send({ table: get("series-table").value }); });
get("series-table").addEventListener("input", () => { typed = true; get("series-said").textContent = "typed, not taken yet"; });
get("degree").addEventListener("change", () => send({ degree: Number(get("degree").value) }));
get("strain").addEventListener("change", () => send({ strain: get("strain").value }));
get("reference").addEventListener("change", () => {
  const text = get("reference").value.trim(), value = readNumber(text);
  if (text && Number.isNaN(value)) return refuse({ field: "reference", message: `“${text}” is not a number.`, hint: "Give the value of one of the states." });
  send({ reference: text ? value : null });
});
get("faces").addEventListener("change", () => {
  const lines = get("faces").value.split("\n").map((/** @type {string} */ line) => line.trim()).filter(Boolean);
  const pairs = lines.map((/** @type {string} */ line) => line.match(/[[(][^\])]*[\])]/g) ?? []);
  const wrong = pairs.findIndex((/** @type {string[]} */ pair) => pair.length !== 2);
  if (wrong >= 0) return refuse({ field: "faces", message: `“${lines[wrong]}” is not a pair of directions.`, hint: "Write two on a line, like (1 0 0) (0 0 1)." });
  send({ faces: pairs });
});

/** The newest place of the slider is asked for; those in between may be passed over. */
async function ask() {
  if (asking) { wanted = true; return; }
  asking = true;
  try { show(await fetchSeries(currentSample().id, Number(slider.value))); } catch { /* the header says that the server is gone */ }
  asking = false;
  if (wanted) { wanted = false; ask(); }
}
slider.addEventListener("input", ask);

get("series-answer").addEventListener("click", (/** @type {any} */ event) => {
  if (event.target.id !== "use-expansion") return;
  take((id, parent) => useSeries(id, parent, Number(slider.value))).then(() => { get("series-said").textContent = "kept as the sample's thermal expansion"; }, refuse);
});

/** @param {FileList|null|undefined} files */
async function takeFiles(files) {
  if (!files?.length) return;
  const texts = await Promise.all([...files].map((file) => file.text()));
  clearFaults(form);
  if (!/\.cif$/i.test(files[0].name) && !/^\s*data_/im.test(texts[0])) {
    get("series-table").value = texts[0];
    typed = true;
    return send({ table: texts[0] });
  }
  try {
    typed = false;
    const answer = await take((id, parent) => postCifs(id, parent, texts));
    show(answer);
    get("series-said").textContent = answer.notes.join(" ");
  } catch (failure) {
    refuse(failure);
  }
}
get("files").addEventListener("change", () => takeFiles(get("files").files));
for (const name of ["dragenter", "dragover"]) side.addEventListener(name, (/** @type {Event} */ event) => { event.preventDefault(); side.classList.add("dropping"); });
side.addEventListener("dragleave", () => side.classList.remove("dropping"));
side.addEventListener("drop", (/** @type {DragEvent} */ event) => { event.preventDefault(); side.classList.remove("dropping"); takeFiles(event.dataTransfer?.files); });
document.addEventListener("sample", (event) => { if (own) return; if (/** @type {CustomEvent} */ (event).detail.revision !== revision) { revision = /** @type {CustomEvent} */ (event).detail.revision; ask(); } });
window.addEventListener("beforeunload", (event) => { if (typed) event.preventDefault(); });
