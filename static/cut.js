// The Cut page: every field is taken as it is changed; what follows is set by the server.

import { changeOf, conditionsOf } from "./cut-state.js";
import { clearFaults, showFault } from "./faults.js";
import { currentSample, take } from "./page.js";
import { fetchCut, postCut, seekCut } from "./server.js";
import { typeset } from "./typeset.js";

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const holder = get("cut-form");
let revision = currentSample().revision;
let part = currentPart(currentSample());

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
  get("cut-result").innerHTML = answer.result;
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
    const change = changeOf(part, event.target.dataset, event.target.value);
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
});

get("seek-form")?.addEventListener("submit", async (/** @type {Event} */ event) => {
  event.preventDefault();
  const form = get("seek-form");
  clearFaults(form);
  try {
    const conditions = conditionsOf([0, 1].map((n) => ({ property: get(`seek-property-${n}`).value, kind: get(`seek-kind-${n}`).value, value: get(`seek-value-${n}`).value })));
    get("sought").innerHTML = (await seekCut(currentSample().id, conditions)).result;
  } catch (failure) {
    showFault(form, /** @type {any} */ (failure));
  }
});
get("sought").addEventListener("click", async (/** @type {any} */ event) => {
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
document.addEventListener("sample", async (event) => {
  const sample = /** @type {CustomEvent} */ (event).detail;
  if (sample.revision === revision) return;
  revision = sample.revision;
  try { show(await fetchCut(sample.id)); } catch { /* the header says that the server is gone */ }
});
