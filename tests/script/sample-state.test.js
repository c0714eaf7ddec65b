// The pure transitions of a page's sample, and where an error belongs.

import assert from "node:assert/strict";
import test from "node:test";

import { printNumber, readNumber } from "../../static/format.js";
import { begin, placeFault, receive, refuse, savedText, send } from "../../static/sample-state.js";

const sample = { id: "a", saved_at: "now", revision: 3 };
const clock = () => "12:00";

test("an edit under way, taken or refused is said in the header", () => {
  const sent = send(begin(sample));
  assert.equal(savedText(sent, clock), "saving …");
  assert.equal(savedText(receive(sent, { ...sample, revision: 4 }), clock), "saved 12:00, revision 4");
  assert.equal(savedText(refuse(sent, { message: "gone", status: 0 }), clock), "not saved");
  assert.equal(savedText(refuse(sent, { message: "wrong", status: 422 }), clock), "saved 12:00, revision 3");
});

test("the answer for another sample is not taken for this one", () => {
  assert.equal(receive(send(begin(sample)), { ...sample, id: "b" }).sample, sample);
});

test("a fault goes to the longest field that its path starts with", () => {
  const known = ["cell", "cell[4]", "group", "free"];
  assert.equal(placeFault("change.cell[4]", known), "cell[4]");
  assert.equal(placeFault("change.cell", known), "cell");
  assert.equal(placeFault("change.free.12", known), "free");
  assert.equal(placeFault("change.frame", known), "");
  assert.equal(placeFault(null, known), "");
});

test("numbers are read with every minus and printed with the true one", () => {
  assert.equal(readNumber("−1.5"), -1.5);
  assert.ok(Number.isNaN(readNumber("1,5")));
  assert.equal(printNumber(-0.25), "−0.25");
});
