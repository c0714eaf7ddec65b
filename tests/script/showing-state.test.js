// The slow turn's course and the link's text, without a browser.
import assert from "node:assert/strict";
import { test } from "node:test";
import { nameWay, nextStop, partAt, STOPS, WHOLE, writeLink } from "../../static/showing-state.js";

test("the turn rests at the crystal frame, never goes back and ends at the specimen frame", () => {
  const parts = Array.from({ length: 101 }, (_, k) => partAt((WHOLE * k) / 100));
  assert.equal(parts[0], 0);
  assert.equal(parts.at(-1), 1);
  assert.equal(partAt(10 * WHOLE), 1);
  parts.slice(1).forEach((part, k) => assert.ok(part >= parts[k]));
});

test("steps go through the stops and begin again", () => {
  const seen = [nextStop(-1)];
  while (seen.at(-1) < 1) seen.push(nextStop(seen.at(-1)));
  assert.deepEqual(seen, STOPS);
  assert.equal(nextStop(1), 0);
});

test("a part of the way has a name", () => {
  assert.deepEqual([0, 0.25, 1].map(nameWay), ["crystal frame", "25\u00a0% of the way", "specimen frame"]);
});

test("a link carries the whole state", () => {
  const url = new URL(writeLink("http://127.0.0.1:1", { id: "ab", revision: 7, property: "k1" }, { pose: { exact: ["z", "(-2 0 1)"] }, hold: "crystal", view: [[1, 0, 0], [0, 1, 0], [0, 0, 1]], surface: "flux", at: 293.15 }));
  assert.equal(url.pathname, "/samples/ab/tensor");
  assert.deepEqual(Object.fromEntries(url.searchParams), { revision: "7", property: "k1", surface: "flux", hold: "crystal", pose: '{"exact":["z","(-2 0 1)"]}', view: "1,0,0,0,1,0,0,0,1", at: "293.15" });
  assert.equal(new URL(writeLink("http://127.0.0.1:1", { id: "ab", revision: 7, property: null }, { pose: {}, hold: "specimen", view: [], surface: "value", at: null })).searchParams.has("at"), false);
});
