// The pure transitions of turning and looking.

import assert from "node:assert/strict";
import test from "node:test";

import { ask, begin, move, press, receive, release } from "../../static/turn-state.js";

const first = { pose: { kept: { axis: [0, 0, 1], angle: 0 } }, view: { hold: "specimen", matrix: [] } };
const answer = (seq, hash = "h") => ({ hash, seq, pose: { kept: { axis: [0, 0, 1], angle: seq } }, view: first.view });

test("a message carries the anchor pose and the whole turn since the press", () => {
  let state = press(begin("h", first), "block");
  state = move(state, 10, 0);
  state = move(state, 30, -5);
  const asked = ask(state);
  assert.deepEqual(asked.message.turn.drag, [30, -5]);
  assert.deepEqual(asked.message.pose, first.pose.kept);
  assert.equal(asked.message.seq, 1);
  assert.equal(asked.state.seq, 1);
});

test("an answer during a drag does not move the anchor", () => {
  let state = press(begin("h", first), "block");
  state = receive(ask(move(state, 1, 0)).state, answer(1));
  assert.deepEqual(ask(move(state, 2, 0)).message.pose, first.pose.kept);
  assert.deepEqual(release(state).pose, answer(1).pose.kept);
});

test("dragging the ground looks and does not turn", () => {
  const message = ask(move(press(begin("h", first), "ground"), 4, 4)).message;
  assert.deepEqual(message.look, [4, 4]);
  assert.equal(message.turn, undefined);
});

test("stale answers and those of another tensor change nothing", () => {
  let state = ask(ask(begin("h", first)).state).state;
  state = receive(state, answer(2));
  assert.equal(receive(state, answer(1)), state);
  assert.equal(receive(state, answer(3, "other")), state);
  assert.equal(receive(state, answer(2)), state);
});

test("states are never changed in place", () => {
  const state = Object.freeze(begin("h", first));
  const held = Object.freeze(press(state, "z"));
  assert.notEqual(move(held, 1, 1), held);
  assert.deepEqual(held.press.drag, [0, 0]);
  assert.equal(move(state, 1, 1), state);
});
