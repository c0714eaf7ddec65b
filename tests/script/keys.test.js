// The settings of the list of keys, without a browser.
import assert from "node:assert/strict";
import { test } from "node:test";
import { isLetter, readSettings } from "../../static/keys.js";

const key = (name, more = {}) => ({ key: name, ctrlKey: false, metaKey: false, altKey: false, ...more });

test("nothing kept, or something broken, are the usual settings", () => {
  for (const text of [null, "", "{", "null", "3", "[]", "{}"]) assert.deepEqual(readSettings(text), { letters: true, bars: true });
  assert.deepEqual(readSettings('{"letters":false,"bars":true}'), { letters: false, bars: true });
});

test("only single signs can be switched off", () => {
  assert.ok(isLetter(key("t")) && isLetter(key("?")) && isLetter(key(",")));
  for (const other of [key("Enter"), key("ArrowLeft"), key("Escape"), key(" "), key("z", { ctrlKey: true }), key("f", { altKey: true })]) assert.ok(!isLetter(other));
});
