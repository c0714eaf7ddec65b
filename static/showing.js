// Showing to others: the full window, large type, the slow turn between the frames, and a link to what is shown.
// The turn's mathematics is the server's: the page sends which part of the way it wants.

import { currentSample } from "./page.js";
import { nameWay, nextStop, partAt, writeLink } from "./showing-state.js";

if (document.getElementById("showing")) install();

function install() {
  const byId = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
  const page = /** @type {HTMLElement} */ (document.querySelector("main.tensor-page"));
  const still = matchMedia("(prefers-reduced-motion: reduce)");
  const slider = byId("way-part"), turning = byId("slow-turn");
  let run = 0, began = 0, shown = /** @type {any} */ (null), sent = 1;
  document.addEventListener("painted", (event) => {
    shown = /** @type {CustomEvent} */ (event).detail;
    if (shown.answer.way === null || shown.answer.way === undefined) { if (!run) sent = 1; place(1); }
  });
  const place = (/** @type {number} */ part) => { slider.value = String(Math.round(100 * part)); byId("way-said").textContent = nameWay(part); slider.setAttribute("aria-valuetext", nameWay(part)); };
  const show = (/** @type {number} */ part) => { sent = part; place(part); document.dispatchEvent(new CustomEvent("show-part", { detail: part })); };
  const press = (/** @type {HTMLElement} */ button, /** @type {boolean} */ on) => button.setAttribute("aria-pressed", String(on));
  const halt = () => { cancelAnimationFrame(run); run = 0; press(turning, false); turning.textContent = "Turn slowly"; };
  const step = () => {
    const part = partAt(performance.now() - began);
    show(part);
    if (part >= 1) return halt();
    run = requestAnimationFrame(step);
  };
  function turn() {
    if (run) { halt(); return show(1); }
    if (still.matches) { show(nextStop(sent >= 1 ? -1 : sent)); return; }
    began = performance.now();
    press(turning, true);
    turning.textContent = "Stop";
    step();
  }
  slider.addEventListener("input", () => { halt(); show(Number(slider.value) / 100); });
  turning.addEventListener("click", turn);
  // Taking hold of the picture ends the turn; the pose was never left.
  byId("figure").addEventListener("pointerdown", () => { if (run) { halt(); show(1); } }, true);

  const isFull = () => page.classList.contains("showing");
  function setFull(/** @type {boolean} */ full) {
    page.classList.toggle("showing", full);
    document.documentElement.classList.toggle("is-showing", full);
    press(byId("full-window"), full);
    byId("full-window").textContent = full ? "Leave the full window" : "Full window";
    if (!full) setLarge(false);
    dispatchEvent(new Event("resize"));
  }
  const setLarge = (/** @type {boolean} */ large) => { page.classList.toggle("large", large); press(byId("large-type"), large); dispatchEvent(new Event("resize")); };
  async function toggleFull() {
    const full = !isFull();
    setFull(full);
    // Where the browser gives no full screen, the page fills its window all the same.
    try {
      if (full) await page.requestFullscreen?.();
      else if (document.fullscreenElement) await document.exitFullscreen();
    } catch { /* the window is filled already */ }
  }
  document.addEventListener("fullscreenchange", () => { if (!document.fullscreenElement && isFull()) setFull(false); });
  byId("full-window").addEventListener("click", toggleFull);
  byId("large-type").addEventListener("click", () => setLarge(!page.classList.contains("large")));
  byId("copy-link").addEventListener("click", async () => {
    if (!shown) return;
    const sample = currentSample(), { answer, surface, at } = shown;
    const link = writeLink(location.origin, { id: sample.id, revision: sample.revision, property: sample.derived.property?.id ?? null }, { pose: answer.pose.kept, hold: answer.view.hold, view: answer.view.matrix, surface, at });
    try {
      await navigator.clipboard.writeText(link);
      byId("showing-said").textContent = "Link copied. It opens this pose, view, surface and revision on this machine.";
    } catch { byId("showing-said").textContent = link; }
  });
  document.addEventListener("keydown", (event) => {
    const target = /** @type {HTMLElement} */ (event.target);
    if (target.closest("input:not([type=range]), select, textarea, dialog") || event.ctrlKey || event.metaKey || event.altKey || event.defaultPrevented) return;
    const key = event.key.toLowerCase();
    if (key === "t") turn();
    if (key === "w") toggleFull();
    if (key === "l" && isFull()) setLarge(!page.classList.contains("large"));
    if (event.key === "Escape" && isFull() && !document.fullscreenElement && !document.querySelector(":popover-open")) setFull(false);
  });
}
