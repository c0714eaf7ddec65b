import assert from "node:assert/strict";
import { test } from "node:test";
import { pixelSize, pixelWidth } from "../../static/take-out-size.js";

test("millimetres are pixels at 300 per inch", () => {
  // 25.4 mm to the inch, by definition.
  assert.equal(pixelWidth(25.4, "mm"), 300);
  assert.equal(pixelWidth(160, "mm"), 1890);
  assert.equal(pixelWidth(1200, "px"), 1200);
});

test("widths out of bounds are refused at their field", () => {
  for (const [width, unit] of [[99, "px"], [8001, "px"], [700, "mm"], [8, "mm"], [NaN, "px"], [-5, "mm"]]) {
    assert.throws(() => pixelWidth(width, unit), (error) => error.field === "width" && Boolean(error.hint), `${width} ${unit}`);
  }
});

test("the whole picture is bounded, and every width that is allowed fits an upright sheet", () => {
  assert.deepEqual(pixelSize(1000, 1.25), [1000, 1250]);
  assert.deepEqual(pixelSize(8000, 1.4), [8000, 11200]);
  assert.throws(() => pixelSize(8000, 4), (error) => error.field === "width");
  assert.throws(() => pixelSize(100, 0), (error) => error.field === "width");
});
