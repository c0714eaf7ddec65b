// Pure transitions of turning and looking: no browser, no server, no physics. Turns are whole turns since the press.

/** @typedef {{hash: string, pose: any, view: any, surface: string, catching: boolean, seq: number, answered: number, press: any}} TurnState */

/** @param {string} hash @param {any} first @returns {TurnState} */
export const begin = (hash, first) => ({ hash, pose: first.pose.kept, view: first.view, surface: first.surface ?? "quadric", catching: true, seq: 0, answered: 0, press: null });

/** Taking hold. @param {TurnState} state @param {string} what "ground", "block", "x", "y" or "z" @returns {TurnState} */
export const press = (state, what) => ({ ...state, press: { what, pose: state.pose, view: state.view, drag: [0, 0], steps: [0, 0, 0] } });

/** One more step of a key while the hand is on the keys: whole steps since the first, so that a fast hand loses none.
 * @param {TurnState} state @param {number[]} way degrees right, up, about z @returns {TurnState} */
export function stepBy(state, way) {
  const held = state.press?.what === "keys" ? state : press(state, "keys");
  return { ...held, press: { ...held.press, steps: held.press.steps.map((/** @type {number} */ part, /** @type {number} */ k) => part + way[k]) } };
}

/** @param {TurnState} state @param {number} right @param {number} up @returns {TurnState} */
export const move = (state, right, up) => (state.press ? { ...state, press: { ...state.press, drag: [right, up] } } : state);

/** @param {TurnState} state @returns {TurnState} */
export const release = (state) => ({ ...state, press: null });

/** The message that asks for the state as it stands. @param {TurnState} state @param {object} [more] */
export function ask(state, more = {}) {
  const held = state.press;
  const base = { type: "turn", hash: state.hash, seq: state.seq + 1, surface: state.surface, pose: held?.pose ?? state.pose, view: held?.view ?? state.view };
  const act = !held ? {} : held.what === "ground" ? { look: held.drag } : held.what === "keys" ? { turn: { steps: held.steps }, catch: state.catching } : { turn: held.what === "block" ? { drag: held.drag } : { drag: held.drag, ring: held.what }, catch: state.catching };
  return { state: { ...state, seq: state.seq + 1 }, message: { ...base, ...act, ...more } };
}

/** An answer; stale ones and those of another tensor change nothing. @param {TurnState} state @param {any} answer @returns {TurnState} */
export const receive = (state, answer) =>
  answer.hash !== state.hash || answer.seq <= state.answered ? state : { ...state, answered: answer.seq, pose: answer.pose.kept, view: answer.view };
