// Pure transitions of the stereogram panel: a press becomes a drag or a tap, keys move a cursor. No browser, no physics.

/** Parts of the disc's radius that a hand may stray before a press counts as a drag. */
export const STRAY = 0.03;

/** @typedef {{press: any, cursor: number[]|null, place: any, steps: number[]}} DiscState */

/** @returns {DiscState} */
export const begin = () => ({ press: null, cursor: null, place: null, steps: [0, 0] });

/** Taking hold of a place of a disc. @param {DiscState} state @param {number[]} place right and up, the rim at 1 @param {boolean} far @param {any} pose @returns {DiscState} */
export const press = (state, place, far, pose) => (Math.hypot(place[0], place[1]) > 1.08 ? state : { ...state, press: { start: place, end: place, far, pose, drags: false } });

/** @param {DiscState} state @param {number[]} place @returns {DiscState} */
export function move(state, place) {
  if (!state.press) return state;
  const { start, drags } = state.press;
  const far = Math.hypot(place[0] - start[0], place[1] - start[1]) > STRAY;
  return { ...state, press: { ...state.press, end: place, drags: drags || far } };
}

/** Letting go: a tap asks about its place, a drag has turned already. @param {DiscState} state @returns {DiscState} */
export function release(state) {
  const held = state.press;
  if (!held) return state;
  return held.drags ? { ...state, press: null } : { ...state, press: null, cursor: null, steps: [0, 0], place: { place: held.start, far: held.far } };
}

/** A press that the browser took away turns nothing more. @param {DiscState} state @returns {DiscState} */
export const cancel = (state) => ({ ...state, press: null });

/** A key of the cursor: whole steps since the last answer, so that a fast hand loses none. @param {DiscState} state @param {number[]} way degrees right and up @returns {DiscState} */
export const step = (state, way) => ({ ...state, steps: [state.steps[0] + way[0], state.steps[1] + way[1]] });

/** What a drag asks of the live channel; nothing where none is on. @param {DiscState} state @param {{projection: string, centre: string}} frame */
export const wish = (state, frame) => (state.press?.drags ? { pose: state.press.pose, turn: { disc: { ...frame, start: state.press.start, end: state.press.end, far: state.press.far } } } : null);

/** What is asked about a place. @param {DiscState} state */
export const asked = (state) => ({ ...(state.place ?? (state.cursor ? { cursor: state.cursor } : {})), ...(state.steps.some(Boolean) ? { steps: state.steps } : {}) });

/** An answer settles the cursor; steps that came meanwhile stay to be asked. @param {DiscState} state @param {any} question what was asked @param {any} told @returns {DiscState} */
export function receive(state, question, told) {
  if (!told) return state;
  const taken = question.steps ?? [0, 0];
  const same = JSON.stringify(state.place) === JSON.stringify(question.place ? { place: question.place, far: question.far } : null);
  return same ? { ...state, place: null, cursor: told.direction, steps: [state.steps[0] - taken[0], state.steps[1] - taken[1]] } : state;
}
