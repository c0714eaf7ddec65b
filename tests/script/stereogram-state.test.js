// The stereogram panel's transitions: a tap asks, a drag turns from the press on, keys lose no step.

import assert from "node:assert/strict";
import test from "node:test";

import * as discs from "../../static/stereogram-state.js";

const POSE = { matrix: [[1, 0, 0], [0, 1, 0], [0, 0, 1]] };
const FRAME = { projection: "area", centre: "z" };

test("a tap asks about its place and turns nothing", () => {
  let state = discs.press(discs.begin(), [0.3, -0.2], true, POSE);
  state = discs.move(state, [0.31, -0.2]);
  assert.equal(discs.wish(state, FRAME), null);
  state = discs.release(state);
  assert.deepEqual(discs.asked(state), { place: [0.3, -0.2], far: true });
});

test("a drag is told from its press on, also when it comes back", () => {
  let state = discs.press(discs.begin(), [0, 0], false, POSE);
  state = discs.move(discs.move(state, [0.4, 0.1]), [0.01, 0]);
  assert.deepEqual(discs.wish(state, FRAME), { pose: POSE, turn: { disc: { ...FRAME, start: [0, 0], end: [0.01, 0], far: false } } });
  state = discs.release(state);
  assert.deepEqual(discs.asked(state), {});
  assert.equal(discs.wish(state, FRAME), null);
});

test("a press beside the disc takes hold of nothing, and a cancelled one turns nothing", () => {
  assert.equal(discs.press(discs.begin(), [1.2, 0.4], false, POSE).press, null);
  const state = discs.cancel(discs.move(discs.press(discs.begin(), [0, 0], false, POSE), [0.5, 0]));
  assert.equal(discs.wish(state, FRAME), null);
});

test("steps that come while an answer is on its way stay to be asked", () => {
  let state = discs.step(discs.begin(), [1, 0]);
  const question = discs.asked(state);
  state = discs.step(discs.step(state, [1, 0]), [0, 10]);
  state = discs.receive(state, question, { direction: [0, 0, 1] });
  assert.deepEqual(discs.asked(state), { cursor: [0, 0, 1], steps: [1, 10] });
});

test("an answer about a place that was left meanwhile does not move the cursor", () => {
  const first = discs.release(discs.press(discs.begin(), [0.1, 0], false, POSE));
  const question = discs.asked(first);
  const second = discs.release(discs.press(first, [0.5, 0], false, POSE));
  assert.equal(discs.receive(second, question, { direction: [1, 0, 0] }), second);
});
