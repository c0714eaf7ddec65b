// The word "Working …": only where an answer takes long, once for many requests, and gone afterwards.
import assert from "node:assert/strict";
import { test } from "node:test";
import { BLINK, countWaiting } from "../../static/waiting.js";

function rig() {
  const shown = [], timers = new Set();
  const count = countWaiting((on) => shown.push(on), (act, after) => { const timer = { act, after }; timers.add(timer); return timer; }, (timer) => timers.delete(timer));
  return { shown, count, pass: (time) => [...timers].forEach((timer) => { if (timer.after <= time) { timers.delete(timer); timer.act(); } }) };
}

test("a quick answer is not announced", () => {
  const { shown, count, pass } = rig();
  count.asked();
  pass(BLINK - 1);
  count.answered();
  pass(10 * BLINK);
  assert.deepEqual(shown, []);
});

test("a slow one is, until the last of several has come", () => {
  const { shown, count, pass } = rig();
  count.asked();
  count.asked();
  pass(BLINK);
  count.answered();
  assert.deepEqual(shown, [true]);
  count.answered();
  assert.deepEqual(shown, [true, false]);
  count.answered();
  count.asked();
  pass(BLINK);
  count.answered();
  assert.deepEqual(shown, [true, false, true, false]);
});
