// Which frame did they mean? Nine cells as printed, weighed against the readings of the sample.

import { clearFaults, showFault } from "./faults.js";
import { readNumber } from "./format.js";
import { currentSample } from "./page.js";
import { askFrame } from "./server.js";

const form = /** @type {any} */ (document.getElementById("frame-form"));
const result = /** @type {any} */ (document.getElementById("frame-result"));

form?.addEventListener("submit", async (/** @type {Event} */ event) => {
  event.preventDefault();
  clearFaults(form);
  try {
    const read = (/** @type {any} */ field) => {
      const value = readNumber(field.value);
      if (Number.isNaN(value)) throw { field: field.name, message: field.value.trim() ? `“${field.value}” is not a number.` : "A number is missing here.", hint: "Write it with a decimal point." };
      return value;
    };
    const nine = [...form.querySelectorAll(".nine input")].map(read);
    const matrix = [0, 1, 2].map((row) => nine.slice(3 * row, 3 * row + 3));
    const answer = await askFrame(currentSample().id, { matrix, any_edges: form.elements.any_edges.checked, unsure: form.elements.unsure.checked });
    result.innerHTML = answer.result;
  } catch (failure) {
    result.replaceChildren();
    showFault(form, /** @type {any} */ (failure));
  }
});
