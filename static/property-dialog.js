// The picker of property and unit.

import { clearFaults, showFault } from "./faults.js";
import { currentSample, edit } from "./page.js";

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const form = get("property-form");
const catalogue = JSON.parse(get("catalogue").textContent);
const entryOf = () => catalogue.find((/** @type {any} */ entry) => entry.key === get("kind").value);

function listUnits() {
  const entry = entryOf();
  get("units").replaceChildren(...entry.units.map((/** @type {any} */ unit) => new Option(unit.printed, unit.printed)));
  get("kind-note").textContent = [entry.note, entry.sign_limit.sentence].filter(Boolean).join(" ");
}

/** @param {any} sample */
function update(sample) {
  const chosen = sample.derived.property;
  if (chosen) {
    get("kind").value = chosen.key;
    get("unit").value = chosen.unit_printed;
  }
  listUnits();
}

get("kind").addEventListener("change", () => {
  const chosen = currentSample().derived.property;
  get("unit").value = chosen?.key === get("kind").value ? chosen.unit_printed : entryOf().unit.printed;
  listUnits();
});
form.addEventListener("submit", (/** @type {Event} */ event) => {
  event.preventDefault();
  clearFaults(form);
  edit({ property: { kind: get("kind").value, unit: get("unit").value.trim() || "1" } }).then(
    () => get("property-dialog").close(),
    (error) => showFault(form, error, "property."),
  );
});
document.addEventListener("sample", (event) => update(/** @type {CustomEvent} */ (event).detail));
update(currentSample());
