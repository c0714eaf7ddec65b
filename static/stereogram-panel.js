// The stereogram panel: asks for the drawing while it is unfolded; a press asks, a drag turns, keys move a cursor.

import { currentSample } from "./page.js";
import { postStereogram } from "./server.js";
import * as discs from "./stereogram-state.js";
import { typeset } from "./typeset.js";

const byId = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
const panel = byId("stereogram-panel");
if (panel) install();

function install() {
  const disc = byId("stereogram-disc"), form = byId("stereogram-form"), fault = byId("stereogram-fault");
  const ways = /** @type {Record<string, number[]>} */ ({ ArrowLeft: [-1, 0], ArrowRight: [1, 0], ArrowUp: [0, 1], ArrowDown: [0, -1] });
  let state = discs.begin(), busy = false, again = false;
  /** Pose on the screen and value of the series. @type {any} */
  let shown = { pose: null, at: null };
  /** @type {any} */
  let told = null;
  const frame = () => {
    const centre = form.elements.centre.value;
    return { projection: form.elements.projection.value, centre: centre === "typed" ? form.elements.typed.value.trim() || "x3" : centre };
  };
  const wishTurn = (/** @type {any} */ more, /** @type {boolean} */ keeps) => document.dispatchEvent(new CustomEvent("turn-wish", { detail: { more, keeps } }));

  /** One question at a time; what came meanwhile is asked next. */
  async function ask() {
    if (!panel.open) return;
    if (busy) { again = true; return; }
    busy = true;
    const question = /** @type {any} */ (discs.asked(state));
    const layers = [...form.querySelectorAll("[name=layers]:checked")].map((/** @type {any} */ box) => box.value);
    try {
      const answer = await postStereogram(currentSample().id, { ...frame(), ...shown, ...question, layers, discs: form.elements.discs.value, max_index: Number(form.elements.max_index.value) });
      fault.hidden = true;
      state = discs.receive(state, question, answer.told);
      disc.innerHTML = answer.result;
      showWords(answer.words_piece);
      if (answer.told) tell(answer.told);
    } catch (failure) {
      const error = /** @type {any} */ (failure);
      fault.textContent = [error.message, error.hint].filter(Boolean).join(" ");
      fault.hidden = false;
      if (error.status === 422 && state.steps.some(Boolean)) state = { ...state, steps: [0, 0] };
    }
    busy = false;
    if (again) { again = false; ask(); }
  }
  function showWords(/** @type {string} */ piece) {
    const open = byId("stereogram-words").querySelector("details")?.open;
    byId("stereogram-words").innerHTML = piece;
    if (open) byId("stereogram-words").querySelector("details").open = true;
  }
  function tell(/** @type {any} */ found) {
    told = found;
    const near = [found.normal, found.row].filter(Boolean).map((entry) => (entry.off < 0.05 ? entry.name : `${entry.text} off ${entry.name}`));
    byId("stereogram-told").replaceChildren(...typeset([found.value, ...near].join("; ")), "; direction ", found.text);
    byId("stereogram-put").hidden = false;
    byId("stereogram-offers").replaceChildren(...found.offers.map((/** @type {any} */ offer, /** @type {number} */ number) => {
      const button = document.createElement("button");
      button.type = "button";
      button.className = "button btn";
      button.dataset.offer = String(number);
      button.append(...typeset(offer.name));
      return button;
    }));
  }
  const put = (/** @type {number} */ number) => { if (told) wishTurn({ pose: told.offers[number].poses[form.elements.axis.value], catch: false }, true); };
  byId("stereogram-offers").addEventListener("click", (/** @type {any} */ event) => { const number = event.target.closest("[data-offer]")?.dataset.offer; if (number !== undefined) put(Number(number)); });

  /** Right and up in the disc under the hand, the rim at 1. @param {PointerEvent} event @param {Element|null} drawing */
  const placeIn = (event, drawing) => {
    const box = /** @type {Element} */ (drawing?.querySelector(".stereo-rim")).getBoundingClientRect();
    const half = box.width / 2;
    return [(event.clientX - box.left - half) / half, (box.top + half - event.clientY) / half];
  };
  /** Which of the discs the hand is in, by its place in the row: drawings are replaced under the hand. */
  let number = 0;
  const drawing = () => disc.querySelectorAll("svg.stereogram")[number] ?? null;
  disc.addEventListener("pointerdown", (/** @type {any} */ event) => {
    const target = event.target.closest("svg.stereogram");
    if (event.button || !target || !shown.pose) return;
    number = [...disc.querySelectorAll("svg.stereogram")].indexOf(target);
    state = discs.press(state, placeIn(event, target), target.dataset.side === "far", shown.pose);
    if (state.press) disc.setPointerCapture(event.pointerId);
  });
  disc.addEventListener("pointermove", (/** @type {any} */ event) => {
    if (!state.press) return;
    state = discs.move(state, placeIn(event, drawing()));
    const more = discs.wish(state, frame());
    if (more) wishTurn(more, false);
  });
  disc.addEventListener("pointerup", () => {
    const more = discs.wish(state, frame());
    state = discs.release(state);
    if (more) wishTurn(more, true);
    else ask();
  });
  disc.addEventListener("pointercancel", () => { state = discs.cancel(state); });
  disc.addEventListener("keydown", (/** @type {KeyboardEvent} */ event) => {
    if (event.ctrlKey || event.metaKey || event.altKey) return;
    const way = ways[event.key];
    if (way) {
      event.preventDefault();
      const size = event.shiftKey ? 10 : 1;
      state = discs.step(state, [size * way[0], size * way[1]]);
      ask();
    }
    if (event.key === "Enter") { event.preventDefault(); put(0); }
  });

  panel.addEventListener("toggle", ask);
  form.addEventListener("change", (/** @type {any} */ event) => { if (event.target.name === "typed") form.elements.centre.value = "typed"; if (event.target.name !== "axis") ask(); });
  form.addEventListener("submit", (/** @type {Event} */ event) => { event.preventDefault(); ask(); });
  document.addEventListener("sample", ask);
  document.addEventListener("painted", (event) => {
    const { answer, at } = /** @type {CustomEvent} */ (event).detail;
    const before = JSON.stringify(shown);
    shown = { pose: { matrix: answer.pose.matrix }, at: at ?? null };
    if (JSON.stringify(shown) !== before) ask();
  });
}
