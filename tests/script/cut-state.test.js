// From the fields of the Cut page to what is sent.
import assert from "node:assert/strict";
import { test } from "node:test";
import { achievedOf, changeOf, conditionsOf, sightingsOf, spotsOf, stageOf } from "../../static/cut-state.js";

const part = { size: [3, 3, 18], target: { by: "direction", direction: "(1 0 0)" }, tolerance: { half_angle: 0.5 } };

test("a text, a number, an edge of the size and a flag each change one thing", () => {
  assert.deepEqual(changeOf(part, { path: "edge" }, "[0 1 0]"), { edge: "[0 1 0]" });
  assert.deepEqual(changeOf(part, { number: "kerf" }, "0.35"), { kerf: 0.35 });
  assert.deepEqual(changeOf(part, { size: "2" }, "20"), { size: [3, 3, 20] });
  assert.deepEqual(changeOf(part, { flag: "either_sense" }, "on", false), { either_sense: false });
});

test("a tolerance takes the place of the other kind, and an emptied field changes nothing", () => {
  assert.deepEqual(changeOf(part, { tolerance: "value" }, "0.1"), { tolerance: { value: 0.1 } });
  assert.equal(changeOf(part, { tolerance: "half_angle" }, " "), null);
});

test("a way to say the target starts from what was there", () => {
  assert.deepEqual(changeOf(part, { target: "by" }, "offcut"), { target: { by: "offcut", from: "(1 0 0)", tilt: 0, toward: "[1 0 0]" } });
  assert.deepEqual(changeOf(part, { target: "by" }, "principal"), { target: { by: "principal", axis: 1 } });
  assert.deepEqual(changeOf(part, { target: "by" }, "pose"), { target: { by: "pose", axis: "z" } });
});

test("an off-cut is sent when all of it is there", () => {
  const half = { ...part, target: { by: "offcut", from: "(0 0 1)" } };
  assert.equal(changeOf(half, { target: "tilt" }, "4"), null);
  const whole = { ...part, target: { by: "offcut", from: "(0 0 1)", toward: "[1 0 0]" } };
  assert.deepEqual(changeOf(whole, { target: "tilt" }, "4"), { target: { by: "offcut", from: "(0 0 1)", toward: "[1 0 0]", tilt: 4 } });
});

test("what is no number is refused at its field, with what was typed", () => {
  assert.throws(() => changeOf(part, { number: "kerf" }, "thin"), (/** @type {any} */ fault) => fault.field === "kerf" && fault.message.includes("thin"));
  assert.throws(() => sightingsOf([["(1 0 0)", "12", "x"]]), (/** @type {any} */ fault) => fault.field === "sightings[0]");
  assert.throws(() => conditionsOf([{ property: "k", kind: "value", value: "" }]), (/** @type {any} */ fault) => fault.field === "conditions[0].target");
});

test("sightings leave the empty row out and read every minus", () => {
  assert.deepEqual(sightingsOf([["(1 0 0)", "12", "−4.5"], ["", "", " "]]), [{ direction: "(1 0 0)", angles: [12, -4.5] }]);
});

test("a second condition without a property is none", () => {
  assert.deepEqual(conditionsOf([{ property: "k", kind: "max", value: "" }, { property: "", kind: "value", value: "" }]), [{ property: "k", target: "max" }]);
});

test("a stage keeps its id and transfer and takes what was typed", () => {
  const stage = { id: "s", name: "old", transfer: [1], questions: ["?"], axes: [], sight: [1, 0, 0], blade: [1, 0, 0] };
  const made = stageOf(stage, { name: "new", sight: "0 1 0", blade: "0, 0, 1" }, [{ name: "turn", axis: "0 0 1", low: "-90", high: "90", zero: "0", step: "0.1", sense: "-1" }]);
  assert.deepEqual(made, { id: "s", name: "new", transfer: [1], sight: [0, 1, 0], blade: [0, 0, 1], axes: [{ name: "turn", axis: [0, 0, 1], low: -90, high: 90, zero: 0, step: 0.1, sense: -1 }] });
});

test("what was measured is sent when its angle and its direction are there", () => {
  assert.equal(achievedOf({ tilt: "1.2", toward: " ", sigma: "" }), null);
  assert.deepEqual(achievedOf({ tilt: "1.2", toward: "[0 1 0]", sigma: "" }), { achieved: { tilt: 1.2, toward: "[0 1 0]" } });
  assert.throws(() => achievedOf({ tilt: "x", toward: "[0 1 0]", sigma: "" }), (/** @type {any} */ fault) => fault.field === "achieved.tilt");
});

test("a sighting brought elsewhere keeps where it was, and spots are read line by line", () => {
  assert.deepEqual(sightingsOf([["(1 0 0)", "1"], ["", ""], ["(0 1 0)", "2"]], [null, null, [0, 0, 1]]), [{ direction: "(1 0 0)", angles: [1] }, { direction: "(0 1 0)", angles: [2], toward: [0, 0, 1] }]);
  assert.deepEqual(spotsOf("1 −2\n\n3,4"), [[1, -2], [3, 4]]);
  assert.throws(() => spotsOf("1 2 3"), (/** @type {any} */ fault) => fault.field === "spots[0]");
});
