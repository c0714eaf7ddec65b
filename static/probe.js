// The probe on the surface: where the hand or the keys put it; what it finds comes with the answers of the live channel.

const WAYS = /** @type {Record<string, number[]>} */ ({ ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] });

/**
 * @param {HTMLElement} figure @param {() => void} request asks for the picture again
 * @param {() => number} unit pixels of a world length
 */
export function installProbe(figure, request, unit) {
  const byId = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
  const toggle = byId("probe-toggle"), panel = byId("probe-panel");
  let on = false, held = false, keyed = false, reach = 0.6;
  /** Where it was last settled, and all that moved it since: a message that is overtaken loses nothing. @type {any} */
  let direction = null, at = null, steps = [0, 0];
  const set = (/** @type {boolean} */ wanted) => {
    on = wanted;
    toggle.setAttribute("aria-pressed", String(on));
    panel.hidden = !on;
    request();
  };
  toggle.addEventListener("click", () => set(!on));
  document.addEventListener("keydown", (event) => {
    const target = /** @type {HTMLElement} */ (event.target);
    if (target.closest("input, select, textarea, dialog") || event.ctrlKey || event.metaKey || event.altKey) return;
    if (event.key.toLowerCase() === "p") set(!on);
    const way = WAYS[event.key];
    if (target !== panel || !way) return;
    event.preventDefault();
    keyed = true;
    const size = event.shiftKey ? 10 : 1;
    steps = [steps[0] + size * way[0], steps[1] + size * way[1]];
    request();
  });
  const letGo = () => { if (keyed) { keyed = false; request(); } };
  panel.addEventListener("keyup", letGo);
  panel.addEventListener("blur", letGo);
  const place = (/** @type {PointerEvent} */ event) => {
    const box = /** @type {Element} */ (figure.querySelector(".stage")).getBoundingClientRect();
    return [(event.clientX - box.left - box.width / 2) / unit(), (box.top + box.height / 2 - event.clientY) / unit()];
  };
  figure.addEventListener("pointermove", (event) => { if (held) { at = place(event); request(); } });
  const end = () => { held = false; };
  figure.addEventListener("pointerup", end);
  figure.addEventListener("pointercancel", end);
  return {
    /** Whether a press moves the probe: one on the surface, not on a ring. @param {PointerEvent} event */
    takes(event) {
      const hold = /** @type {any} */ (event.target).dataset?.holdOn;
      const [right, up] = place(event);
      if (!on || (hold && hold !== "block") || Math.hypot(right, up) > reach * 1.02) return false;
      held = true;
      at = [right, up];
      figure.setPointerCapture(event.pointerId);
      request();
      return true;
    },
    /** What a message says of the probe. */
    asked() {
      if (!on) return {};
      const probe = at ? { at } : { direction, ...(steps.some(Boolean) ? { steps } : {}) };
      return { probe };
    },
    /** @param {any} found */
    show(found) {
      if (!found || !on) return;
      reach = found.reach;
      const same = (/** @type {any} */ one, /** @type {any} */ other) => JSON.stringify(one) === JSON.stringify(other);
      if (!held && !keyed && same(found.at, at) && (at || same(found.steps ?? [0, 0], steps))) { direction = found.direction; at = null; steps = [0, 0]; }
      const near = [found.row, found.normal].filter(Boolean).map((entry) => (entry.off < 0.05 ? entry.name : `${entry.text} off ${entry.name}`));
      byId("probe-place").textContent = near.join(", ") || found.direction.map((/** @type {number} */ part) => part.toFixed(3).replace("-", "−")).join(" ");
      byId("probe-value").textContent = found.value;
      byId("probe-flux").textContent = `${found.size}, ${found.flux_text} off the probe`.replace("there is none off the probe", "no direction");
    },
  };
}
