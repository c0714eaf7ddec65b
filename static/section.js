// The panel of sections: asked for while it is unfolded, again for what is typed, slid, turned or probed.

import { clearFaults, showFault } from "./faults.js";
import { currentSample } from "./page.js";
import { postSection } from "./server.js";

const panel = /** @type {any} */ (document.getElementById("section-panel"));
const form = /** @type {any} */ (document.getElementById("section-form"));
const result = /** @type {any} */ (document.getElementById("section-result"));
const slider = /** @type {any} */ (document.getElementById("section-angle"));
/** Pose and place on the screen, and where the probe points. @type {any} */
let shown = { pose: null, at: null }, probed = null;
let busy = false, again = false, fault = "";

function asked() {
  const typed = Object.fromEntries(["normal", "zero"].map((name) => [name, form.elements[name].value.trim()]).filter(([, text]) => text));
  return { ...typed, ...shown, angle: Number(slider.value), toward: probed };
}

/** One question at a time; what came meanwhile is asked next. */
async function ask() {
  if (!panel.open) return;
  if (busy) { again = true; return; }
  busy = true;
  try {
    const answer = await postSection(currentSample().id, asked());
    clearFaults(form);
    fault = "";
    result.innerHTML = answer.result;
    const text = document.getElementById("section-angle-text");
    if (text) text.textContent = answer.point.angle_text;
    if (probed) slider.value = String(answer.point.angle);
  } catch (failure) {
    result.replaceChildren();
    const told = /** @type {any} */ (failure).message;
    // Said once, so that it does not take the focus again while the block turns.
    if (told !== fault) showFault(form, /** @type {any} */ (failure));
    fault = told;
  }
  busy = false;
  if (again) { again = false; ask(); }
}

if (panel) {
  panel.addEventListener("toggle", ask);
  form.addEventListener("change", ask);
  form.addEventListener("submit", (/** @type {Event} */ event) => { event.preventDefault(); ask(); });
  slider.addEventListener("input", () => { probed = null; ask(); });
  document.addEventListener("sample", ask);
  document.addEventListener("painted", (event) => {
    const { answer, at } = /** @type {CustomEvent} */ (event).detail;
    const before = JSON.stringify([shown, probed]);
    shown = { pose: { matrix: answer.pose.matrix }, at: at ?? null };
    if (answer.probe) probed = answer.probe.direction;
    if (JSON.stringify([shown, probed]) !== before) ask();
  });
}
