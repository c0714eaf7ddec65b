// Pure transitions of a page's sample: no browser, no server.

/**
 * @typedef {{sample: any, waiting: number, fault: null|{message: string, hint: string|null, status: number}}} PageState
 */

/** @param {any} sample @returns {PageState} */
export const begin = (sample) => ({ sample, waiting: 0, fault: null });

/** An edit was sent. @param {PageState} state @returns {PageState} */
export const send = (state) => ({ ...state, waiting: state.waiting + 1 });

/** The server answered with a sample; one of another id is not ours. @param {PageState} state @param {any} sample @returns {PageState} */
export const receive = (state, sample) => ({
  sample: sample.id === state.sample.id ? sample : state.sample,
  waiting: Math.max(0, state.waiting - 1),
  fault: null,
});

/** The server refused. @param {PageState} state @param {{message: string, hint?: string|null, status?: number}} error @returns {PageState} */
export const refuse = (state, error) => ({
  ...state,
  waiting: Math.max(0, state.waiting - 1),
  fault: { message: error.message, hint: error.hint ?? null, status: error.status ?? 0 },
});

/** What the header says. @param {PageState} state @param {(iso: string) => string} clock @returns {string} */
export function savedText(state, clock) {
  if (state.waiting) return "saving …";
  if (state.fault && (state.fault.status === 0 || state.fault.status === 503)) return "not saved";
  return `saved ${clock(state.sample.saved_at)}, revision ${state.sample.revision}`;
}

/** The field of a form that an error belongs to: the longest listed path that the error's path starts with.
 * @param {string|null} field @param {string[]} known @returns {string} */
export function placeFault(field, known) {
  const path = (field ?? "").replace(/^change\./, "");
  const fits = known.filter((name) => name && (path === name || path.startsWith(`${name}.`) || path.startsWith(`${name}[`)));
  return fits.sort((one, other) => other.length - one.length)[0] ?? "";
}
