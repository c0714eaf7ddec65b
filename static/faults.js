// Errors of the server at the field they belong to.

import { placeFault } from "./sample-state.js";

/** @param {HTMLElement} form */
export function clearFaults(form) {
  for (const place of form.querySelectorAll("[data-fault]")) {
    place.textContent = "";
    /** @type {HTMLElement} */ (place).hidden = true;
  }
  for (const field of form.querySelectorAll("[aria-invalid]")) {
    field.removeAttribute("aria-invalid");
    field.removeAttribute("aria-describedby");
  }
}

let count = 0;

/** Show an error; what was typed stays. @param {HTMLElement} form @param {{field: string|null, message: string, hint: string|null}} error @param {string} [prefix] taken off the path */
export function showFault(form, error, prefix = "") {
  clearFaults(form);
  const path = (error.field ?? "").replace(/^change\./, "").replace(prefix, "");
  const places = /** @type {HTMLElement[]} */ ([...form.querySelectorAll("[data-fault]")]);
  const name = placeFault(path, places.map((place) => place.dataset.fault ?? ""));
  const place = places.find((entry) => (entry.dataset.fault ?? "") === name) ?? places[0];
  if (!place) return;
  place.id ||= `fault-${(count += 1)}`;
  place.textContent = [error.message, error.hint].filter(Boolean).join(" ");
  place.hidden = false;
  const fields = /** @type {HTMLInputElement[]} */ ([...form.querySelectorAll("input[name], select[name]")]);
  const names = fields.map((entry) => entry.name);
  const exact = fields[names.indexOf(placeFault(path, names))] ?? fields.find((entry) => name && entry.name.startsWith(name));
  if (exact) {
    exact.setAttribute("aria-invalid", "true");
    exact.setAttribute("aria-describedby", place.id);
    exact.focus();
  }
}
