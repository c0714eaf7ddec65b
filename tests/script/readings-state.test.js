// The grid of readings: typing, pasting, refusals, and changes made elsewhere.
import assert from "node:assert/strict";
import { test } from "node:test";
import * as grids from "../../static/readings-state.js";

const columns = ["kind", "direction", "value", "sigma", "bar", "batch", "note"];
const row = (/** @type {Record<string, string>} */ cells) => ({ cells: { ...Object.fromEntries(columns.map((name) => [name, ""])), ...cells }, set_aside: null, pose: null });
const content = () => ({ columns, batches: {}, rows: [row({ kind: "along", direction: "[100]", value: "5" }), row({ kind: "rod", direction: "[001]", value: "7" })] });
const start = () => grids.begin(content(), 4);

test("typing a cell makes the grid dirty and leaves the other rows the same objects", () => {
  const before = start();
  const after = grids.setCell(before, 0, "value", "5.5");
  assert.equal(after.rows[0].cells.value, "5.5");
  assert.equal(before.rows[0].cells.value, "5");
  assert.equal(after.rows[1], before.rows[1]);
  assert.ok(after.dirty && !before.dirty);
});

test("typing what stands already changes nothing, and a row that is not there neither", () => {
  const state = start();
  assert.equal(grids.setCell(state, 0, "value", "5"), state);
  assert.equal(grids.setCell(state, 9, "value", "5"), state);
});

test("rows are added after a place and removed", () => {
  const state = grids.addRow(start(), 0);
  assert.deepEqual(state.rows.map((entry) => entry.cells.kind), ["along", "", "rod"]);
  assert.deepEqual(grids.removeRow(state, 0).rows.map((entry) => entry.cells.kind), ["", "rod"]);
});

test("a block of a spreadsheet goes in from the cell on, and makes rows as it needs", () => {
  const state = grids.insertBlock(start(), 1, "direction", "[010]\t8\t0.1\r\n(101)\t9\t0.2\r\n");
  assert.equal(state.rows.length, 3);
  assert.deepEqual(state.rows[1].cells, { ...row({}).cells, kind: "rod", direction: "[010]", value: "8", sigma: "0.1" });
  assert.deepEqual([state.rows[2].cells.kind, state.rows[2].cells.value], ["", "9"]);
});

test("cells beyond the last column are not wrapped into the next row", () => {
  const state = grids.insertBlock(start(), 0, "note", "one\ttwo");
  assert.equal(state.rows[0].cells.note, "one");
  assert.equal(state.rows.length, 2);
});

test("a table is told from a block by its header", () => {
  assert.ok(grids.isTable("kind,direction,value\nalong,[100],5\n"));
  assert.ok(grids.isTable("\ufeffKind;Value\r\nmean;5"));
  assert.ok(!grids.isTable("along\t[100]\t5\nrod\t[001]\t7"));
  assert.ok(!grids.isTable("kind,direction,value"));
});

test("faults stand at their cells and go when the cell is typed again", () => {
  const refused = grids.refuse(start(), { detail: { problems: [{ row: 1, column: "value", reason: "no number" }, { row: null, column: null, reason: "?" }] } });
  assert.deepEqual(refused.faults, { "1:value": "no number" });
  assert.deepEqual(grids.setCell(refused, 1, "value", "7.1").faults, {});
  assert.deepEqual(grids.setCell(refused, 0, "value", "7.1").faults, { "1:value": "no number" });
});

test("what was typed while the answer was on its way stays, on the new revision", () => {
  const sent = grids.setCell(start(), 0, "value", "6");
  const later = grids.setCell(sent, 1, "value", "8");
  const after = grids.taken(later, content(), 5, sent.typed);
  assert.equal(after.rows[1].cells.value, "8");
  assert.ok(after.dirty);
  assert.equal(after.base, 5);
  const clean = grids.taken(sent, content(), 5, sent.typed);
  assert.ok(!clean.dirty);
  assert.equal(clean.rows[0].cells.value, "5");
});

test("a change elsewhere shows at once where nothing is typed, and is offered where something is", () => {
  const theirs = { ...content(), rows: [] };
  assert.equal(grids.learn(start(), theirs, 9).rows.length, 0);
  const typed = grids.setCell(start(), 0, "value", "6");
  const clash = grids.learn(typed, theirs, 9);
  assert.equal(clash.rows[0].cells.value, "6");
  assert.equal(clash.base, 4);
  assert.equal(grids.showTheirs(clash).rows.length, 0);
  const kept = grids.keepMine(clash);
  assert.equal(kept.base, 9);
  assert.ok(kept.dirty && kept.theirs === null);
});

test("a reading is set aside with a reason and taken back", () => {
  const aside = grids.setAside(start(), 0, "cracked");
  assert.equal(grids.payload(aside).rows[0].set_aside, "cracked");
  assert.equal(grids.setAside(aside, 0, null).rows[0].set_aside, null);
});

test("only the batches that rows name are sent", () => {
  let state = grids.setCell(start(), 0, "batch", "furnace 2");
  state = grids.setBatch(grids.setBatch(state, "furnace 2", "0.01"), "gone", "0.5");
  assert.deepEqual(grids.payload(state).batches, { "furnace 2": "0.01" });
});

test("empty columns fold away, unless all are asked for or one has a fault", () => {
  assert.ok(!grids.shownColumns(start(), false).includes("note"));
  assert.ok(grids.shownColumns(start(), true).includes("note"));
  assert.ok(grids.shownColumns(grids.refuse(start(), { detail: { problems: [{ row: 0, column: "note", reason: "x" }] } }), false).includes("note"));
});

test("an empty row that is about to be filled stays where it is when the others are taken", () => {
  const state = grids.addRow(start(), 0);
  const given = { ...content(), rows: [row({ kind: "along", direction: "[1 0 0]", value: "5.0" }), row({ kind: "rod", direction: "[0 0 1]", value: "7.0" })] };
  assert.deepEqual(grids.taken(state, given, 5, state.typed).rows.map((entry) => entry.cells.value), ["5.0", "", "7.0"]);
});
