// The page's sample: read from the page, changed through the server, told to everyone by the event `sample`.

import { clockTime } from "./format.js";
import { begin, receive, refuse, savedText, send } from "./sample-state.js";
import { enqueue, fetchSample, postEdit, postStep } from "./server.js";

const block = document.getElementById("sample");
/** @type {import("./sample-state.js").PageState} */
let state = begin(JSON.parse(block?.textContent ?? "{}"));
const channel = "BroadcastChannel" in window ? new BroadcastChannel("halfturn-samples") : null;

/** The sample as it stands. */
export const currentSample = () => state.sample;

function paint() {
  const { sample } = state;
  const saved = document.getElementById("saved-text");
  const text = savedText(state, clockTime);
  if (saved && saved.textContent !== text) saved.textContent = text;
  document.getElementById("saved")?.classList.toggle("unsaved", Boolean(state.fault) || state.waiting > 0);
  const name = document.getElementById("sample-name");
  if (name) name.textContent = sample.document.name;
  for (const [id, can] of [["undo", sample.can_undo], ["redo", sample.can_redo]]) {
    const button = /** @type {HTMLButtonElement|null} */ (document.getElementById(id));
    if (button) button.disabled = !can;
  }
}

/** @param {string[]} sentences */
function tell(sentences) {
  const place = document.getElementById("notices");
  place?.replaceChildren(...sentences.map((sentence) => Object.assign(document.createElement("p"), { textContent: sentence })));
}

function announce() {
  paint();
  tell([...(state.sample.notices ?? []), ...state.sample.derived.problems.map((/** @type {any} */ p) => `${p.message} ${p.hint ?? ""}`)]);
  document.dispatchEvent(new CustomEvent("sample", { detail: state.sample }));
}

/** @param {() => Promise<any>} task @returns {Promise<any>} */
function run(task) {
  state = send(state);
  paint();
  return enqueue(task).then(
    (sample) => {
      state = receive(state, sample);
      announce();
      channel?.postMessage({ id: sample.id, revision: sample.revision });
      return sample;
    },
    (error) => {
      state = refuse(state, error);
      paint();
      if (error.status === 409) reload();
      if (error.status === 0 || error.status === 409 || error.status === 503) tell([`${error.message} ${error.hint ?? ""}`]);
      throw error;
    },
  );
}

function reload() {
  return fetchSample(state.sample.id).then((sample) => {
    state = { ...state, sample };
    announce();
  }, () => undefined);
}

/** Change one thing; the promise fails with a ServerError whose field says where. @param {object} change @returns {Promise<any>} */
export const edit = (change) => run(() => postEdit(state.sample.id, state.sample.revision, change));
/** Send a change of another form whose answer carries the new sample; gives the whole answer.
 * @param {(id: string, revision: number) => Promise<any>} send @returns {Promise<any>} */
export async function take(send) {
  let answer;
  await run(async () => { answer = await send(state.sample.id, state.sample.revision); return answer.sample; });
  return answer;
}
/** @param {"undo"|"redo"} way */
export const step = (way) => run(() => postStep(state.sample.id, state.sample.revision, way)).catch((error) => tell([error.message]));

document.getElementById("undo")?.addEventListener("click", () => step("undo"));
document.getElementById("redo")?.addEventListener("click", () => step("redo"));
document.addEventListener("keydown", (event) => {
  if (!(event.ctrlKey || event.metaKey) || event.altKey || event.defaultPrevented) return;
  const target = /** @type {HTMLElement} */ (event.target);
  if (target.closest("input, textarea, select, [contenteditable], dialog")) return;
  const key = event.key.toLowerCase();
  const way = key === "z" && !event.shiftKey ? "undo" : key === "y" || (key === "z" && event.shiftKey) ? "redo" : null;
  if (!way) return;
  event.preventDefault();
  if (way === "undo" ? state.sample.can_undo : state.sample.can_redo) step(way);
});
channel?.addEventListener("message", ({ data }) => {
  if (data.id === state.sample.id && data.revision !== state.sample.revision) reload();
});
paint();
