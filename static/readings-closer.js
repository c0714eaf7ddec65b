// The panels beneath the readings: a closer look, and the next cuts. Asked for, never kept.

import { clearFaults, showFault } from "./faults.js";
import { readNumber } from "./format.js";
import { currentSample } from "./page.js";
import { askReadings, lookCloser, nextCuts } from "./server.js";

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
    const from = form.elements.max_index.value;
    const asked = { add: number("add", true), sigma: number("sigma", true), direction_sigma: number("direction_sigma", false), goal: number("goal", false), criterion: form.elements.criterion.value, max_index: Number(from) || null, listed: from === "listed" ? form.elements.listed.value : undefined };
    get("next-result").innerHTML = (await nextCuts(currentSample().id, JSON.parse(JSON.stringify(asked)))).result;
  } catch (failure) {
    get("next-result").replaceChildren();
    showFault(form, /** @type {any} */ (failure));
  }
});

/** What a plain form asks: text as it is, numbers read. @param {any} asking */
function collect(asking) {
  /** @type {any} */
  const asked = {};
  for (const field of asking.querySelectorAll("[name]")) {
    const text = field.value.trim();
    if (!text && "number" in field.dataset) continue;
    const parts = "numbers" in field.dataset ? text.split(/[\s;]+/).filter(Boolean) : [text];
    if ("number" in field.dataset || "numbers" in field.dataset) {
      const values = parts.map(readNumber);
      const bad = values.findIndex(Number.isNaN);
      if (bad >= 0) throw { field: field.name, message: `“${parts[bad]}” is not a number.`, hint: "Write it with a decimal point, several with blanks between." };
      asked[field.name] = "numbers" in field.dataset ? values : values[0];
    } else asked[field.name] = text;
  }
  return asked;
}

for (const asking of /** @type {any} */ (document.querySelectorAll("form[data-ask]")))
  asking.addEventListener("submit", async (/** @type {Event} */ event) => {
    event.preventDefault();
    clearFaults(asking);
    const place = asking.nextElementSibling;
    try {
      place.innerHTML = (await askReadings(currentSample().id, asking.dataset.ask, collect(asking))).result;
    } catch (failure) {
      place.replaceChildren();
      showFault(asking, /** @type {any} */ (failure));
    }
  });
