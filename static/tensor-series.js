// The series of the property that is looked at: a table or readings, a degree, and a slider over the variable.

import { clearFaults, showFault } from "./faults.js";
import { el } from "./matrix.js";
import { currentSample, take } from "./page.js";
import { fetchTensorSeries, postTensorSeries, useTensorSeries } from "./server.js";

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const form = get("tensor-series-form"), slider = get("tensor-at"), answer = get("tensor-series-answer");
let revision = currentSample().revision, own = 0, asking = false, wanted = false, typed = false;

/** @param {any} given */
function show(given) {
  revision = given.sample.revision;
  if (!typed) {
    get("tensor-table").value = given.table;
    get("tensor-source").value = given.series.source;
    get("tensor-degree").value = given.series.degree;
  }
  answer.innerHTML = given.result;
  get("tensor-slider").hidden = given.range === null;
  if (!given.range) return;
  Object.assign(slider, { min: given.range[0], max: given.range[1], step: given.step });
  if (document.activeElement !== slider) slider.value = given.at;
  get("tensor-at-text").textContent = given.text;
}

/** @param {any} failure */
function refuse(failure) {
  showFault(form, failure, "change.");
  const problems = failure.detail?.problems ?? [];
  if (!problems.length) return;
  const lines = problems.slice(0, 40).map((/** @type {any} */ p) => el("li", {}, `line ${p.line}${p.column ? `, ${p.column}` : ""}: ${p.reason}`));
  get("tensor-table-fault").replaceChildren(el("span", {}, failure.message), el("ul", {}, ...lines));
  get("tensor-table-fault").hidden = false;
}

/** The newest place of the slider is asked for; those in between may be passed over. */
async function ask() {
  if (asking) { wanted = true; return; }
  asking = true;
  try { show(await fetchTensorSeries(currentSample().id, Number(slider.value))); } catch { /* the header says that the server is gone */ }
  asking = false;
  if (wanted) { wanted = false; ask(); }
}

if (form) {
  form.addEventListener("submit", async (/** @type {Event} */ event) => {
    event.preventDefault();
    clearFaults(form);
    const source = get("tensor-source").value;
    const change = { source, degree: Number(get("tensor-degree").value), ...(source === "table" ? { table: get("tensor-table").value } : {}) };
    try {
      const place = get("tensor-slider").hidden ? null : Number(slider.value);
      own += 1;
      const given = await take((id, parent) => postTensorSeries(id, parent, change, place));
      typed = false;
      show(given);
      get("tensor-said").textContent = "taken";
    } catch (failure) {
      refuse(failure);
    } finally {
      own -= 1;
    }
  });
  document.addEventListener("sample", (event) => { if (!own && /** @type {CustomEvent} */ (event).detail.revision !== revision) ask(); });
  get("tensor-table").addEventListener("input", () => { typed = true; get("tensor-said").textContent = "typed, not taken yet"; });
  slider.addEventListener("input", ask);
  answer.addEventListener("click", (/** @type {any} */ event) => {
    if (event.target.id !== "use-tensor") return;
    take((id, parent) => useTensorSeries(id, parent, Number(slider.value))).then(() => { get("tensor-said").textContent = "kept as the sample's tensor"; }, refuse);
  });
  window.addEventListener("beforeunload", (event) => { if (typed) event.preventDefault(); });
}
