// The views of a matrix and what is copied. Expectations are by the usual key of the printed forms and by hand.
import assert from "node:assert/strict";
import { test } from "node:test";
import { chooseView, drawLink, listLinks, splitNumber, writeCopy } from "../../static/matrix-views.js";

const cell = (label, text, more = {}) => ({ label, state: "free", number: { text }, six: text.replace(/\(.*\)/, ""), value: Number(text.replace(/\(.*\)/, "").replace("−", "-")), sigma: null, formula: [["a", "symbol"], [label, "sub"]], dot: "heavy", joined: null, ...more });
const zero = (label) => cell(label, "0", { state: "zero", dot: "zero", formula: [["0", "plain"]] });
// A lone four-fold axis along x3 of a tensor that is not symmetric by itself: 22 = 11, 21 = −12.
const cells = [
  cell("11", "2.50(3)", { sigma: 0.03 }), cell("12", "−0.40(2)", { sigma: 0.02 }), zero("13"),
  cell("21", "0.40(2)", { state: "tied", equals: "−12", dot: "open", joined: "12", formula: [["−", "plain"], ["a", "symbol"], ["12", "sub"]], sigma: 0.02 }), cell("22", "2.50(3)", { state: "tied", equals: "11", dot: "heavy", joined: "11", formula: [["a", "symbol"], ["11", "sub"]], sigma: 0.03 }), zero("23"),
  zero("31"), zero("32"), cell("33", "7.1"),
];
const about = { name: "thermal conductivity", unit: "W/(m·K)", frame: "crystal frame: x3 along c", axes: ["x1", "x2", "x3"], view: "numbers" };

test("equal cells are joined, the later one to the earlier", () => assert.deepEqual(listLinks(cells), [[1, 3], [0, 4]]));

test("a line between the far corners does not run through the dot in the middle", () => {
  assert.equal(drawLink([0, 4]), "M1 1L3 3");
  const [, x, y] = /Q([\d.]+) ([\d.]+) /.exec(drawLink([2, 6])) ?? [];
  // The middle of a quadratic curve lies half way from the chord's middle, (3, 3), to its control point.
  assert.ok(Math.hypot((Number(x) - 3) / 2, (Number(y) - 3) / 2) > 0.5);
});

test("a copied table has tabs, its unit and frame, and signs that programs read", () => {
  assert.equal(writeCopy("table", about, cells), "thermal conductivity, W/(m·K)\ncrystal frame: x3 along c\n\tx1\tx2\tx3\nx1\t2.50(3)\t-0.40(2)\t0\nx2\t0.40(2)\t2.50(3)\t0\nx3\t0\t0\t7.1\n");
  assert.ok(!writeCopy("table", { ...about, view: "six" }, cells).includes("(3)"));
});

test("a copied Python literal is nine numbers, and nine standard deviations where they are known", () => {
  const text = writeCopy("python", about, cells);
  assert.ok(text.startsWith("# thermal conductivity, W/(m·K); crystal frame: x3 along c\nimport numpy\n"));
  const rows = [...text.matchAll(/\[([-\d., ]+)\],/g)].map(([, row]) => row.split(",").map(Number));
  assert.deepEqual(rows, [[2.5, -0.4, 0], [0.4, 2.5, 0], [0, 0, 7.1], [0.03, 0.02, 0], [0.02, 0.03, 0], [0, 0, 0]]);
});

test("a copied LaTeX matrix has the formula where the formula is shown", () => {
  assert.ok(writeCopy("latex", { ...about, view: "formula" }, cells).includes("a_{11} & a_{12} & 0 \\\\\n-a_{12} & a_{11} & 0 \\\\\n0 & 0 & a_{33}"));
  assert.ok(writeCopy("latex", about, cells).includes("2.50(3) & -0.40(2) & 0"));
  assert.ok(writeCopy("latex", about, [cell("11", "1.2(3)×10⁻⁶"), ...cells.slice(1)]).includes("1.2(3)\\times10^{-6}"));
});

test("a number is split on its point, and what is no view is the usual one", () => {
  assert.deepEqual(splitNumber("−12.34"), { text: "−12.34", whole: "−12", rest: ".34", spread: "" });
  assert.deepEqual(splitNumber("3×10⁻⁷"), { text: "3×10⁻⁷", whole: "3", rest: "×10⁻⁷", spread: "" });
  assert.equal(chooseView("dots"), "dots");
  assert.equal(chooseView("nonsense"), "numbers");
});
