// The list of samples.

import { clearFaults, showFault } from "./faults.js";
import { createSample, markSample, renameSample } from "./server.js";

const fresh = /** @type {HTMLFormElement} */ (document.getElementById("new-sample"));
fresh.addEventListener("submit", (event) => {
  event.preventDefault();
  clearFaults(fresh);
  const name = /** @type {HTMLInputElement} */ (document.getElementById("new-name")).value;
  createSample({ name }).then((sample) => location.assign(`/samples/${sample.id}/tensor`), (error) => showFault(fresh, error));
});

/** @type {Record<string, (id: string) => Promise<any>>} */
const acts = {
  duplicate: (id) => createSample({ from: id }),
  archive: (id) => markSample(id, { archived: true }),
  restore: (id) => markSample(id, { archived: false }),
  delete: (id) => markSample(id, { deleted: true }),
};

for (const item of /** @type {NodeListOf<HTMLElement>} */ (document.querySelectorAll(".sample-item"))) {
  const id = item.dataset.id ?? "";
  const rename = /** @type {HTMLFormElement} */ (item.querySelector("form.rename"));
  item.addEventListener("click", (event) => {
    const act = /** @type {HTMLElement} */ (event.target).closest("[data-act]")?.getAttribute("data-act");
    if (act === "rename") {
      rename.hidden = !rename.hidden;
      rename.querySelector("input")?.focus();
    } else if (act === "delete") removeWithUndo(item, id);
    else if (act) acts[act](id).then(() => location.reload(), tell);
  });
  rename.addEventListener("submit", (event) => {
    event.preventDefault();
    renameSample(id, rename.querySelector("input")?.value ?? "").then(() => location.reload(), (error) => showFault(rename, error));
  });
}

/** Deleting keeps everything and offers to take it back. @param {HTMLElement} item @param {string} id */
function removeWithUndo(item, id) {
  acts.delete(id).then(() => {
    const back = Object.assign(document.createElement("button"), { type: "button", className: "button go", textContent: "Take the deletion back" });
    back.addEventListener("click", () => markSample(id, { deleted: false }).then(() => location.reload(), tell));
    item.replaceChildren(Object.assign(document.createElement("p"), { textContent: "Deleted; its revisions stay in the file." }), back);
    back.focus();
  }, tell);
}

/** @param {{message: string, hint: string|null}} error */
function tell(error) {
  const place = document.getElementById("samples-fault");
  if (!place) return;
  place.textContent = [error.message, error.hint].filter(Boolean).join(" ");
  place.hidden = false;
}
