// The panels beneath the readings: a closer look, and the next cuts. Asked for, never kept.

import { clearFaults, showFault } from "./faults.js";
import { readNumber } from "./format.js";
import { currentSample } from "./page.js";
import { lookCloser, nextCuts } from "./server.js";

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const panel = get("closer"), form = get("next-form");

async function look() {
  if (!panel?.open) return;
  try {
    get("closer-result").innerHTML = (await lookCloser(currentSample().id)).result;
  } catch (failure) {
    const error = /** @type {any} */ (failure);
    get("closer-result").textContent = [error.message, error.hint].filter(Boolean).join(" ");
  }
}
panel?.addEventListener("toggle", look);
document.addEventListener("sample", look);

form?.addEventListener("submit", async (/** @type {Event} */ event) => {
  event.preventDefault();
  clearFaults(form);
  const number = (/** @type {string} */ name, /** @type {boolean} */ needed) => {
    const text = form.elements[name].value.trim();
    if (!text && !needed) return undefined;
    const value = readNumber(text);
    if (Number.isNaN(value)) throw { field: name, message: text ? `“${text}” is not a number.` : "A number is missing here.", hint: "Write it with a decimal point." };
    return value;
  };
  try {
    const asked = { add: number("add", true), sigma: number("sigma", true), direction_sigma: number("direction_sigma", false), goal: number("goal", false), criterion: form.elements.criterion.value, max_index: form.elements.max_index.value === "any" ? null : Number(form.elements.max_index.value) };
    get("next-result").innerHTML = (await nextCuts(currentSample().id, JSON.parse(JSON.stringify(asked)))).result;
  } catch (failure) {
    get("next-result").replaceChildren();
    showFault(form, /** @type {any} */ (failure));
  }
});
