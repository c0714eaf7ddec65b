// The Cut page: every field is taken as it is changed; what follows is set by the server.

import { achievedOf, changeOf, conditionsOf, sightingsOf, spotsOf, stageOf } from "./cut-state.js";
import { clearFaults, showFault } from "./faults.js";
import { currentSample, edit, take as takeChange } from "./page.js";
import { fetchCut, fetchStages, indexSpots, postCut, postStages, seekCut } from "./server.js";
import { typeset } from "./typeset.js";

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const holder = get("cut-form");
let revision = currentSample().revision, own = 0;
/** A change of this page: the event that it causes is answered by what it brings. @type {typeof takeChange} */
const take = async (send) => { own += 1; try { return await takeChange(send); } finally { own -= 1; } };
let part = currentPart(currentSample());
let stage = JSON.parse(get("cut-content").textContent);
const mounting = get("cut-stage");
let sightings = (currentSample().document.sightings ?? []).length;

/** @param {any} sample */
function currentPart(sample) {
  const parts = sample.document.parts ?? [];
  return parts.find((/** @type {any} */ entry) => entry.id === sample.document.looking?.part) ?? parts.at(-1) ?? null;
}

/** @param {any} answer */
function show(answer) {
  const focus = document.activeElement?.id;
  revision = answer.sample.revision;
  part = answer.part;
  get("headline").replaceChildren(...typeset(answer.headline));
  get("second-line").replaceChildren(...typeset(answer.second_line));
  holder.innerHTML = answer.form;
  const unfolded = get("cut-result").querySelector("details")?.open;
  get("cut-result").innerHTML = answer.result;
  if (unfolded) get("cut-result").querySelector("details").open = true;
  const open = get("stage-fold")?.open;
  // What is typed for a new sighting and not yet taken stays.
  const typed = [...mounting.querySelectorAll("tr.new input")].map((input) => input.value);
  const taken = (answer.sample.document.sightings ?? []).length !== sightings;
  sightings = (answer.sample.document.sightings ?? []).length;
  mounting.innerHTML = answer.mounting;
  if (!taken) [...mounting.querySelectorAll("tr.new input")].forEach((input, index) => { input.value = typed[index] ?? ""; });
  get("stage-fold").open = Boolean(open);
  stage = answer.stage;
  if (focus) get(focus)?.focus();
}

/** @param {object} body */
async function send(body) {
  const form = get("part-form");
  if (form) clearFaults(form);
  try {
    show(await take((id, parent) => postCut(id, parent, body)));
  } catch (failure) {
    if (get("part-form")) showFault(get("part-form"), /** @type {any} */ (failure), "change.");
  }
}

holder.addEventListener("change", (/** @type {any} */ event) => {
  try {
    const change = event.target.dataset.achieved
      ? achievedOf({ tilt: get("achieved-tilt").value, toward: get("achieved-toward").value, sigma: get("achieved-sigma").value })
      : changeOf(part, event.target.dataset, event.target.value, event.target.checked);
    if (change) send({ change });
  } catch (fault) {
    clearFaults(get("part-form"));
    showFault(get("part-form"), /** @type {any} */ (fault));
  }
});
holder.addEventListener("submit", (/** @type {Event} */ event) => event.preventDefault());
holder.addEventListener("keydown", (/** @type {KeyboardEvent} */ event) => { if (event.key === "Enter" && /** @type {any} */ (event.target).matches("input")) { event.preventDefault(); /** @type {any} */ (event.target).dispatchEvent(new Event("change", { bubbles: true })); } });
holder.addEventListener("click", (/** @type {any} */ event) => {
  const { act, id } = event.target.dataset ?? {};
  if (act === "make") send({ make: true });
  if (act === "choose") send({ choose: id });
  if (act === "remove") send({ remove: id });
  if (act === "give") send({ give_readings: true });
  if (act === "calibrate") send({ calibrate: true });
});

/** The rows of the table of sightings as they stand. @param {number} [without] */
const rowsOf = (without = -1) => [...mounting.querySelectorAll("#sightings tbody tr")].filter((_, index) => index !== without).map((row) => [...row.querySelectorAll("input")].map((input) => input.value));
/** Where each row was brought, if not to the line of sight. @param {number} [without] */
const towardOf = (without = -1) => [...mounting.querySelectorAll("#sightings tbody tr")].filter((_, index) => index !== without).map((row) => (row.dataset.toward ? JSON.parse(row.dataset.toward) : null));
/** @type {any[]} */
let assignments = [];
async function takeSpots() {
  const form = get("spots-form");
  clearFaults(form);
  try {
    const angles = spotsOf(get("spots-dials").value.trim().split(/[\s,;]+/).map((/** @type {string} */ text) => `${text} 0`).join("\n")).map(([angle]) => angle);
    const answer = await indexSpots(currentSample().id, { spots: spotsOf(get("spots").value), distance: Number(get("spots-distance").value.replace("−", "-")), side: get("spots-side").value, angles, tolerance: Number(get("spots-tolerance").value) });
    assignments = answer.assignments;
    get("spots-result").innerHTML = answer.result;
  } catch (failure) {
    showFault(form, /** @type {any} */ (failure));
  }
}
/** @param {number} [without] */
async function takeSightings(without) {
  const form = get("sighting-form");
  clearFaults(form);
  try {
    show(await take((id, parent) => postCut(id, parent, { sightings: sightingsOf(rowsOf(without), towardOf(without)) })));
    get("sighting-new-direction").focus();
  } catch (failure) {
    const fault = /** @type {any} */ (failure);
    showFault(form, { ...fault, message: fault.message, hint: fault.hint, field: "sightings" });
  }
}
/** @param {boolean} another */
async function keepStage(another) {
  const form = get("stage-form");
  clearFaults(form);
  try {
    const value = (/** @type {string} */ key) => form.querySelector(`[data-stage="${key}"]`).value;
    const axes = [...form.querySelectorAll("[data-axis]")].map((row) => Object.fromEntries([...row.querySelectorAll("[data-key]")].map((field) => [field.dataset.key, field.value])));
    const made = { ...stageOf(stage, { name: value("name"), sight: value("sight"), blade: value("blade") }, axes), ...(another ? { id: `stage${Date.now()}` } : {}) };
    const all = (await fetchStages()).map((/** @type {any} */ { questions: _asked, ...kept }) => kept);
    await postStages(another ? [...all, made] : all.map((/** @type {any} */ kept) => (kept.id === made.id ? made : kept)));
    show(another ? await take((id, parent) => postCut(id, parent, { stage: made.id })) : await fetchCut(currentSample().id));
  } catch (failure) {
    showFault(form, /** @type {any} */ (failure));
  }
}
mounting.addEventListener("submit", (/** @type {any} */ event) => { event.preventDefault(); if (event.target.id === "stage-form") keepStage(false); else if (event.target.id === "spots-form") takeSpots(); else takeSightings(); });
mounting.addEventListener("change", (/** @type {any} */ event) => { if (event.target.id === "stage-choice") send({ stage: event.target.value }); });
mounting.addEventListener("click", (/** @type {any} */ event) => {
  const { act, row } = event.target.dataset ?? {};
  const chosen = event.target.dataset?.useSpots;
  if (chosen !== undefined) send({ sightings: [...sightingsOf(rowsOf(), towardOf()), ...assignments[Number(chosen)].sightings] });
  if (act === "drop-sighting") takeSightings(Number(row));
  if (act === "copy-stage") keepStage(true);
});

/** What was last searched for. @type {any} */
let sought = null;
get("seek-form")?.addEventListener("submit", async (/** @type {Event} */ event) => {
  event.preventDefault();
  const form = get("seek-form");
  clearFaults(form);
  try {
    const conditions = conditionsOf([0, 1].map((n) => ({ property: get(`seek-property-${n}`).value, kind: get(`seek-kind-${n}`).value, value: get(`seek-value-${n}`).value })));
    get("sought").innerHTML = (await seekCut(currentSample().id, conditions)).result;
    sought = conditions;
  } catch (failure) {
    showFault(form, /** @type {any} */ (failure));
  }
});
for (const place of [get("sought"), get("cut-result")]) place.addEventListener("click", async (/** @type {any} */ event) => {
  if (event.target.dataset?.showSought !== undefined) {
    try {
      await edit({ looking: { sought } });
      get("shown-sought").textContent = "It is on the Tensor page's surface.";
    } catch (failure) { showFault(get("seek-form"), /** @type {any} */ (failure)); }
    return;
  }
  const { cut, cutVector, name } = event.target.dataset ?? {};
  if (!cut && !cutVector) return;
  if (!part) await send({ make: true });
  send({ change: { target: cut ? { by: "direction", direction: cut } : { by: "vector", xyz: JSON.parse(cutVector), name } } });
});
// A plane or row on the stereogram is cut for by pressing it.
for (const name of ["click", "keydown"]) {
  document.querySelector(".cut-answer")?.addEventListener(name, (/** @type {any} */ event) => {
    const put = event.target.closest?.("[data-put]")?.dataset.put;
    if (!put || (event instanceof KeyboardEvent && event.key !== "Enter" && event.key !== " ")) return;
    event.preventDefault();
    if (part) send({ change: { target: { by: "direction", direction: put } } });
  });
}
get("cut-result").addEventListener("change", (/** @type {any} */ event) => { const { wish } = event.target.dataset; if (wish) send({ wishes: { [wish]: event.target.value } }); });
document.addEventListener("sample", async (event) => {
  const sample = /** @type {CustomEvent} */ (event).detail;
  if (own || sample.revision === revision) return;
  revision = sample.revision;
  try { show(await fetchCut(sample.id)); } catch { /* the header says that the server is gone */ }
});
