// Says that an answer is being worked on, where it takes longer than a blink, and puts the word away afterwards.

/** Milliseconds that may pass without a word. */
export const BLINK = 350;

/** Counts requests and tells when the word is to be shown or put away.
 * @param {(shown: boolean) => void} show @param {(act: () => void, after: number) => any} [later] @param {(timer: any) => void} [never] */
export function countWaiting(show, later = setTimeout, never = clearTimeout) {
  let open = 0, timer = /** @type {any} */ (null), shown = false;
  return {
    asked() {
      open += 1;
      if (open === 1) timer = later(() => { shown = true; show(true); }, BLINK);
    },
    answered() {
      open = Math.max(0, open - 1);
      if (open) return;
      never(timer);
      if (shown) show(false);
      shown = false;
    },
  };
}

const word = typeof document === "undefined" ? null : Object.assign(document.createElement("p"), { className: "waiting", hidden: true });
word?.setAttribute("role", "status");
if (word) (document.querySelector("main") ?? document.body).append(word);
const waiting = countWaiting((shown) => {
  if (!word) return;
  word.textContent = shown ? "Working …" : "";
  word.hidden = !shown;
});

/** Runs a task under the word. @template T @param {() => Promise<T>} task @returns {Promise<T>} */
export async function wait(task) {
  waiting.asked();
  try { return await task(); } finally { waiting.answered(); }
}
