// The panel of consequences: asked for when it is unfolded, when a field changes and when the sample does.

import { clearFaults, showFault } from "./faults.js";
import { readNumber } from "./format.js";
import { currentSample } from "./page.js";
import { postConsequences } from "./server.js";

const panel = /** @type {any} */ (document.getElementById("consequences"));
const form = /** @type {any} */ (document.getElementById("consequences-form"));
const result = /** @type {any} */ (document.getElementById("consequences-result"));

/** What the fields say; an empty one has its usual value. */
function typed() {
  /** @type {Record<string, any>} */
  const asked = {};
  for (const field of form.querySelectorAll("input")) {
    const text = field.value.trim();
    if (!text || field.closest("[hidden]")) continue;
    if (field.dataset.number === undefined) { asked[field.name] = text; continue; }
    const value = readNumber(text);
    if (Number.isNaN(value)) throw { field: field.name, message: `“${text}” is not a number.`, hint: "Write it with a decimal point." };
    asked[field.name] = value;
  }
  return asked;
}

async function ask() {
  if (!panel?.open) return;
  clearFaults(form);
  const kind = currentSample().derived.property?.key ?? "";
  for (const row of form.querySelectorAll("[data-for]")) row.hidden = !row.dataset.for.split(" ").includes(kind) && row.dataset.for !== "all";
  try {
    result.innerHTML = (await postConsequences(currentSample().id, typed())).result;
  } catch (failure) {
    result.replaceChildren();
    showFault(form, /** @type {any} */ (failure));
  }
}

panel?.addEventListener("toggle", ask);
form?.addEventListener("change", ask);
form?.addEventListener("submit", (/** @type {Event} */ event) => { event.preventDefault(); ask(); });
document.addEventListener("sample", ask);
