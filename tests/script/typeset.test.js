// Symbols within sentences. The same cases hold for the server's rule, in tests/web/test_typesetting.py.
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { test } from "node:test";
import { speakIndices, splitSymbols } from "../../static/typeset.js";

const cases = JSON.parse(readFileSync(new URL("./typeset-cases.json", import.meta.url), "utf8"));

for (const { text, runs } of cases) test(text, () => assert.deepEqual(splitSymbols(text), runs));

test("a screen reader hears the minus", () => {
  assert.equal(speakIndices("(−201)"), "plane minus 2 0 1");
  assert.equal(speakIndices("[1−12]"), "row 1 minus 1 2");
  assert.equal(speakIndices("(−1 0 12)"), "plane minus 1 0 12");
});
