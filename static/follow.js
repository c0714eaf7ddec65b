// The slider of the front page over the variable of the property's series.

const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));

/** Show what the subject follows. @param {any} followed */
export function showFollowed(followed) {
  get("follow").hidden = !followed;
  if (!followed) return;
  const slider = get("follow-at");
  Object.assign(slider, { min: followed.low, max: followed.high, step: followed.step });
  if (document.activeElement !== slider) slider.value = followed.place;
  get("follow-symbol").textContent = followed.symbol;
  get("follow-text").textContent = followed.at === null ? "as kept" : followed.text;
  get("follow-back").hidden = followed.at === null;
  get("follow-beyond").textContent = followed.beyond;
}

/**
 * The newest place is asked for when the one before is answered. @param {(at: number|null) => void} ask
 * @returns {{at: () => number|null, answered: () => void, release: () => void}}
 */
export function followWith(ask) {
  let at = /** @type {number|null} */ (null), busy = false, wanted = false;
  const start = new URLSearchParams(location.search).get("at");
  if (start !== null && Number.isFinite(Number(start))) at = Number(start);
  const send = () => { if (busy) { wanted = true; return; } busy = true; ask(at); };
  get("follow-at").addEventListener("input", () => { at = Number(get("follow-at").value); send(); });
  get("follow-back").addEventListener("click", () => { at = null; send(); });
  return { at: () => at, release: () => { at = null; }, answered: () => { busy = false; if (wanted) { wanted = false; send(); } } };
}
