// The front page: joins the kept sample, the live channel, the scene, the overlay and the matrices.

import { followWith, showFollowed } from "./follow.js";
import { openLive } from "./live.js";
import { installViews } from "./matrix-views.js";
import { explainPosed, makeEditable, showPose, showPoses, showProperty, showSubject, showSurfaceWords } from "./matrix.js";
import { drawOverlay } from "./overlay.js";
import { currentSample, edit, step } from "./page.js";
import { installProbe } from "./probe.js";
import { makeScene, unpack } from "./scene.js";
import * as turns from "./turn-state.js";

const block = document.getElementById("tensor-content");
if (block) start(JSON.parse(block.textContent ?? "{}"));

/** @param {any} content */
function start({ subject, first }) {
  const byId = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
  const figure = byId("figure"), back = figure.querySelector(".back"), front = figure.querySelector(".front");
  let state = turns.begin(subject.hash, first);
  let last = first, waiting = /** @type {any} */ (null), saving = /** @type {any} */ (null), revision = currentSample().revision;
  const startPose = state.pose;
  const scene = makeScene(byId("plot"), () => { byId("no-picture").hidden = false; });
  const paint = (/** @type {any} */ answer) => { last = answer; scene.look(answer.camera); showPose(answer); drawOverlay(back, front, answer.overlay); probe.show(answer.probe); tellPainted(answer); };
  // Whoever shows or links what is drawn hears of every picture.
  const tellPainted = (/** @type {any} */ answer) => document.dispatchEvent(new CustomEvent("painted", { detail: { answer, surface: state.surface, at: follow.at() } }));
  const probe = installProbe(figure, () => request(), () => unit());
  const paintSubject = (/** @type {any} */ given) => { subject = given; showSubject(given); showProperty(currentSample().derived.property, given.unit); showSurfaceWords(given, state.surface); showFollowed(given.followed); };
  const live = openLive({
    onOpen: () => askSubject(),
    onBinary: (data) => scene.show(unpack(data)),
    onMessage: (answer) => {
      if (answer.type === "subject") {
        follow.answered();
        const same = answer.hash === state.hash;
        state = { ...state, hash: answer.hash, answered: same ? state.answered : 0 };
        paintSubject(answer);
        live.send({ type: "surface", hash: state.hash, surface: state.surface });
        request();
      } else if (answer.type === "need") askSubject();
      else if (answer.type === "error") { follow.answered(); fault(`${answer.error.message} ${answer.error.hint ?? ""}`); waiting = null; }
      else if (answer.type === "state") {
        const before = state;
        state = turns.receive(state, answer);
        if (state === before) return;
        requestAnimationFrame(() => { if (answer.seq === state.answered) paint(answer); });
        if (waiting && answer.seq >= waiting.seq) { waiting = null; fault(""); save(answer); }
      }
    },
  });
  const askSubject = () => live.send({ type: "tensor", sample: currentSample().id, revision: currentSample().revision, at: follow.at() });
  const follow = followWith(askSubject);
  const fault = (/** @type {string} */ text) => { byId("turn-fault").textContent = text; byId("turn-fault").hidden = !text; };
  function request(more = {}, keeps = false) {
    const asked = turns.ask(state, { ...probe.asked(), ...more });
    state = asked.state;
    if (keeps) waiting = { seq: state.seq };
    live.turn(asked.message);
  }
  function save(/** @type {any} */ answer) {
    byId("said").textContent = answer.caught ?? answer.rest;
    clearTimeout(saving);
    saving = setTimeout(() => edit({ pose: answer.pose.kept }).catch((error) => fault(error.message)), 250);
  }
  document.addEventListener("sample", (event) => {
    const sample = /** @type {CustomEvent} */ (event).detail;
    if (sample.revision === revision) return;
    revision = sample.revision;
    if (!state.press && !waiting) state = { ...state, pose: sample.document.pose };
    askSubject();
  });
  explainPosed(() => last);
  // A typed cell is one of the kept tensor, so the picture goes back to it.
  makeEditable((label, text) => { follow.release(); return edit({ free: { [label]: text } }); }, () => subject);

  let from = [0, 0];
  const unit = () => figure.querySelector(".stage").getBoundingClientRect().height / 2 / 1.2;
  figure.addEventListener("pointerdown", (/** @type {PointerEvent} */ event) => {
    if (event.button || !(/** @type {Element} */ (event.target).closest(".stage"))) return;
    const what = /** @type {any} */ (event.target).dataset?.holdOn ?? "ground";
    if (probe.takes(event)) return;
    state = turns.press(state, what);
    from = [event.clientX, event.clientY];
    figure.setPointerCapture(event.pointerId);
  });
  figure.addEventListener("pointermove", (/** @type {PointerEvent} */ event) => {
    if (!state.press) return;
    state = turns.move(state, (event.clientX - from[0]) / unit(), (from[1] - event.clientY) / unit());
    request();
  });
  const end = () => {
    if (!state.press) return;
    const turned = state.press.what !== "ground" && state.press.drag.some(Boolean);
    request({}, turned);
    state = turns.release(state);
  };
  figure.addEventListener("pointerup", end);
  figure.addEventListener("pointercancel", end);

  const choose = (/** @type {string} */ attribute, /** @type {string} */ value) => document.querySelectorAll(`[data-${attribute}]`).forEach((button) => button.setAttribute("aria-pressed", String(/** @type {any} */ (button).dataset[attribute] === value)));
  // A part of the way to the pose is shown, and nothing is kept of it.
  document.addEventListener("show-part", (event) => { if (!state.press) request({ way: /** @type {CustomEvent} */ (event).detail }); });
  // Another panel turns the specimen: a pose or a turn from one, kept where the hand has let go.
  document.addEventListener("turn-wish", (event) => { const { more, keeps } = /** @type {CustomEvent} */ (event).detail; if (!state.press) request({ catch: state.catching, ...more }, keeps); });
  const setSurface = (/** @type {string} */ kind) => { state = { ...state, surface: kind }; choose("surface", kind); showSurfaceWords(subject, kind); live.send({ type: "surface", hash: state.hash, surface: kind }); request(); };
  document.querySelectorAll("[data-surface]").forEach((b) => b.addEventListener("click", () => setSurface(/** @type {any} */ (b).dataset.surface)));
  document.querySelectorAll("[data-hold]").forEach((b) => b.addEventListener("click", () => { const hold = /** @type {any} */ (b).dataset.hold; choose("hold", hold); request({ hold }); }));
  const reset = () => { state = { ...state, pose: startPose, view: { hold: state.view.hold } }; request({}, true); };
  byId("reset").addEventListener("click", reset);
  byId("undo-turn").addEventListener("click", () => step("undo"));
  const setCatch = (/** @type {boolean} */ on) => { state = { ...state, catching: on }; byId("catch").checked = on; byId("said").textContent = on ? "Gentle catch on" : "Gentle catch off"; };
  byId("catch").addEventListener("change", (/** @type {any} */ event) => setCatch(event.target.checked));
  const arrows = /** @type {Record<string, number[]>} */ ({ ArrowLeft: [-1, 0, 0], ArrowRight: [1, 0, 0], ArrowUp: [0, 1, 0], ArrowDown: [0, -1, 0], ",": [0, 0, -1], ".": [0, 0, 1] });
  document.addEventListener("keydown", (event) => {
    const target = /** @type {HTMLElement} */ (event.target);
    if (target.closest("input, select, textarea, dialog") || event.ctrlKey || event.metaKey || event.altKey) return;
    const surface = { q: "quadric", v: "value", f: "flux" }[event.key.toLowerCase()];
    if (surface) setSurface(surface);
    if (target !== figure) return;
    const way = arrows[event.key];
    if (way) {
      event.preventDefault();
      if (event.shiftKey) return request({ look: [way[0] / 12, way[1] / 12] });
      state = turns.stepBy(state, way);
      request({}, true);
    }
    if (event.key === "Home") { event.preventDefault(); reset(); }
    if (event.key.toLowerCase() === "c") setCatch(!state.catching);
  });
  // The steps count from the first key on; they begin anew when the hand leaves the keys.
  const letGo = (/** @type {Event} */ event) => {
    if (state.press?.what !== "keys" || (event instanceof KeyboardEvent && !arrows[event.key])) return;
    request({}, true);
    state = turns.release(state);
  };
  figure.addEventListener("keyup", letGo);
  figure.addEventListener("blur", letGo);
  const onForm = (/** @type {string} */ id, /** @type {(f: any) => void} */ act) => byId(id).addEventListener("submit", (/** @type {Event} */ event) => { event.preventDefault(); act(byId(id).elements); });
  const number = (/** @type {any} */ field) => Number(field.value.replace("−", "-"));
  const typed = (/** @type {any} */ pose) => { request({ pose }, true); };
  onForm("put", (f) => request({ put: { axis: byId("put-axis").value, on: f.on.value } }, true));
  onForm("put-two", (f) => request({ put: { axis: "z", on: f.on.value, toward: ["x", f.toward.value] } }, true));
  onForm("tilt", (f) => typed({ from: f.from.value, tilt: number(f.tilt), toward: f.toward.value }));
  onForm("bunge", (f) => typed({ bunge: [number(f.phi1), number(f.PHI), number(f.phi2)] }));
  byId("more-ways").addEventListener("click", () => { const shut = byId("turn-ways").hidden; byId("turn-ways").hidden = !shut; byId("more-ways").setAttribute("aria-expanded", String(shut)); if (shut) byId("turn-ways").querySelector("input").focus(); });
  const refuse = (/** @type {any} */ error) => fault([error.message, error.hint].filter(Boolean).join(" "));
  onForm("block-form", (f) => { edit({ part: ["x", "y", "z"].map((name) => number(f[name])) }).then(() => fault(""), refuse); });
  onForm("keep-pose", (f) => { edit({ poses: { [f.name.value.trim()]: state.pose } }).then(() => { f.name.value = ""; fault(""); }, refuse); });
  byId("answer-away").addEventListener("click", () => edit({ looking: { sought: null } }).catch(refuse));
  byId("poses").addEventListener("click", (/** @type {any} */ event) => {
    const { pose, forget } = event.target.dataset ?? {};
    if (forget) edit({ poses: { [forget]: null } }).catch(refuse);
    if (pose) typed(currentSample().document.poses.find((/** @type {any} */ entry) => entry.name === pose).pose);
  });
  document.addEventListener("sample", (event) => showPoses(/** @type {CustomEvent} */ (event).detail.document.poses ?? []));
  showPoses(currentSample().document.poses ?? []);
  paintSubject(subject);
  paint(first);
  installViews(() => { showSubject(subject); showPose(last); }, (frame) => {
    const name = currentSample().derived.property.name;
    return frame === "crystal" ? { about: { name, unit: subject.unit, frame: `crystal frame: ${subject.frame}`, axes: ["x1", "x2", "x3"] }, cells: subject.cells.flat() } : { about: { name, unit: subject.unit, frame: `specimen frame: ${last.where}`, axes: ["x", "y", "z"] }, cells: last.cells.flat() };
  });
  const loaded = () => { if (/** @type {any} */ (window).Plotly) live.send({ type: "surface", hash: state.hash, surface: state.surface }); };
  window.addEventListener("load", loaded);
  matchMedia("(prefers-color-scheme: dark)").addEventListener("change", () => loaded());
}
