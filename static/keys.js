// The list of keys on `?`, and the settings that stand in it: kept by the browser, read before anything is shown.

const STORE = "halfturn-shown";

/** What is kept, or the usual settings. @param {string|null} text @returns {{letters: boolean, bars: boolean}} */
export function readSettings(text) {
  try {
    const kept = JSON.parse(text ?? "{}");
    return { letters: kept?.letters !== false, bars: kept?.bars !== false };
  } catch { return { letters: true, bars: true }; }
}

/** Whether a key is a single sign that may be switched off: not in a field, no other key held.
 * @param {{key: string, ctrlKey: boolean, metaKey: boolean, altKey: boolean}} event */
export const isLetter = (event) => event.key.length === 1 && event.key !== " " && !event.ctrlKey && !event.metaKey && !event.altKey;

if (typeof document !== "undefined") install();

function install() {
  const dialog = /** @type {HTMLDialogElement|null} */ (document.getElementById("keys-dialog"));
  if (!dialog) return;
  let kept = null;
  try { kept = localStorage.getItem(STORE); } catch { kept = null; }
  let settings = readSettings(kept);
  const box = (/** @type {string} */ id) => /** @type {HTMLInputElement} */ (document.getElementById(id));
  const show = () => {
    document.documentElement.classList.toggle("minus-indices", !settings.bars);
    box("letters-act").checked = settings.letters;
    box("bars-over").checked = settings.bars;
  };
  const open = () => { if (!dialog.open) dialog.showModal(); };
  document.getElementById("keys-open")?.addEventListener("click", open);
  for (const [id, name] of [["letters-act", "letters"], ["bars-over", "bars"]])
    box(id).addEventListener("change", () => {
      settings = { ...settings, [name]: box(id).checked };
      try { localStorage.setItem(STORE, JSON.stringify(settings)); } catch { /* holds for this page alone */ }
      show();
    });
  // Before every other listener, so that a letter that is switched off reaches none of them.
  addEventListener("keydown", (event) => {
    const target = /** @type {HTMLElement} */ (event.target);
    if (target.closest?.("input:not([type=range], [type=checkbox], [type=radio]), select, textarea, [contenteditable]") || !isLetter(event)) return;
    // In the picture itself the keys belong to what has the focus.
    if (!settings.letters && target.id !== "figure") { event.stopImmediatePropagation(); return; }
    if (event.key === "?" && !target.closest?.("dialog")) { event.preventDefault(); open(); }
  }, true);
  show();
}
