// A term's line beside it, on request: by mouse, finger or keyboard; Escape or a press elsewhere puts it away.

import { fetchTerms } from "./server.js";

/** @type {Promise<Record<string, {name: string, line: string, source: string}>>|null} */
let lines = null;
const note = document.createElement("div");
note.id = "term-note";
note.className = "term-note";
note.popover = "auto";
note.tabIndex = -1;
note.setAttribute("role", "note");
(document.querySelector("main") ?? document.body).append(note);

/** @param {HTMLElement} term */
function place(term) {
  const at = term.getBoundingClientRect(), width = Math.min(360, innerWidth - 24);
  note.style.width = `${width}px`;
  note.style.left = `${Math.max(12, Math.min(at.left, innerWidth - width - 12))}px`;
  const below = at.bottom + 6, height = note.offsetHeight;
  note.style.top = `${below + height > innerHeight - 8 ? Math.max(8, at.top - height - 6) : below}px`;
}

document.addEventListener("click", async (event) => {
  const term = /** @type {HTMLElement|null} */ (/** @type {HTMLElement} */ (event.target).closest("a.term"));
  if (!term || event.ctrlKey || event.metaKey || event.shiftKey || !("showPopover" in note)) return;
  event.preventDefault();
  try {
    lines ??= fetchTerms();
    const entry = (await lines)[term.dataset.term ?? ""];
    const name = Object.assign(document.createElement("b"), { textContent: entry.name }), source = Object.assign(document.createElement("span"), { className: "note", textContent: `Source: ${entry.source}.` });
    note.replaceChildren(name, document.createTextNode(` ${entry.line} `), source);
    note.showPopover();
    place(term);
    note.focus({ preventScroll: true });
    note.addEventListener("toggle", (told) => { if (/** @type {any} */ (told).newState === "closed" && (document.activeElement === note || document.activeElement === document.body)) term.focus({ preventScroll: true }); }, { once: true });
  } catch {
    lines = null;
    location.href = /** @type {HTMLAnchorElement} */ (term).href;
  }
});
addEventListener("scroll", () => { if (note.matches(":popover-open")) note.hidePopover(); }, { passive: true });
