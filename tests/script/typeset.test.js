// Symbols within sentences. The same cases hold for the server's rule, in tests/web/test_typesetting.py.
import assert from "node:assert/strict";
import { readFileSync } from "node:fs";
import { test } from "node:test";
import { splitSymbols } from "../../static/typeset.js";

const cases = JSON.parse(readFileSync(new URL("./typeset-cases.json", import.meta.url), "utf8"));

for (const { text, runs } of cases) test(text, () => assert.deepEqual(splitSymbols(text), runs));
