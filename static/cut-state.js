// Pure: from a field of the part's form to the change that is sent. No browser, no server.

import { readNumber } from "./format.js";

/** What a field stands for. @typedef {{path?: string, target?: string, tolerance?: string, size?: string, number?: string, flag?: string}} Field */

/** @param {string} text @param {string} field @returns {number} */
function require(text, field) {
  const value = readNumber(text);
  if (Number.isNaN(value)) throw { field, message: text.trim() ? `“${text}” is not a number.` : "A number is missing here.", hint: "Write it with a decimal point." };
  return value;
}

/** The change of the part that a typed field means. Throws {field, message, hint}.
 * @param {any} part as it is kept @param {Field} field @param {string} text @param {boolean} [checked] @returns {any} */
export function changeOf(part, field, text, checked = false) {
  if (field.flag) return { [field.flag]: checked };
  if (field.path) return { [field.path]: text };
  if (field.number) return { [field.number]: require(text, field.number) };
  if (field.size !== undefined) return { size: part.size.map((/** @type {number} */ edge, /** @type {number} */ k) => (k === Number(field.size) ? require(text, "size") : edge)) };
  if (field.tolerance) return text.trim() ? { tolerance: { [field.tolerance]: require(text, "tolerance") } } : null;
  if (!field.target) return null;
  if (field.target === "by") return { target: startWay(text, part.target) };
  const value = field.target === "tilt" ? require(text, "target.tilt") : field.target === "axis" ? Number(text) : text;
  const { by, ...rest } = part.target;
  const target = { by, ...rest, [field.target]: value };
  // An off-cut is sent when all three of its fields are there.
  if (by === "offcut" && (target.tilt === undefined || !target.from || !target.toward)) return null;
  return { target };
}

/** What a way starts from. @param {string} by @param {any} old */
function startWay(by, old) {
  if (by === "direction") return { by, direction: old.direction ?? "(0 0 1)" };
  if (by === "offcut") return { by, from: old.from ?? old.direction ?? "(0 0 1)", tilt: old.tilt ?? 0, toward: old.toward ?? "[1 0 0]" };
  if (by === "principal") return { by, axis: typeof old.axis === "number" ? old.axis : 1 };
  return { by, axis: "z" };
}

/** The conditions of a search from its fields; throws at ``conditions``. @param {{property: string, kind: string, value: string}[]} fields */
export const conditionsOf = (fields) =>
  fields.filter((field) => field.property).map((field, index) => ({ property: field.property, target: field.kind === "value" ? require(field.value, `conditions[${index}].target`) : field.kind }));

/** Sightings from the rows of the table; an empty new row is left out. Throws at the row that cannot be read.
 * @param {string[][]} rows direction first, then one text per axis @param {(number[]|null)[]} [toward] of each row, where it is not the line of sight */
export const sightingsOf = (rows, toward = []) =>
  rows.map((row, place) => ({ row, toward: toward[place] ?? null })).filter(({ row }) => row.some((text) => text.trim()))
    .map(({ row: [direction, ...angles], toward: seen }, index) => ({ direction: direction.trim(), angles: angles.map((text) => require(text, `sightings[${index}]`)), ...(seen ? { toward: seen } : {}) }));

/** Spots from lines of two numbers. Throws at the line that cannot be read. @param {string} text */
export const spotsOf = (text) =>
  text.split("\n").map((line) => line.trim()).filter(Boolean).map((line, index) => {
    const parts = line.split(/[\s,;]+/);
    if (parts.length !== 2) throw { field: `spots[${index}]`, message: `“${line}” is not a spot.`, hint: "Write x and y on a line." };
    return parts.map((part) => require(part, `spots[${index}]`));
  });

/** A stage with what was typed in place of what stands; throws at a number that cannot be read.
 * @param {any} stage @param {Record<string, string>} fields name, sight, blade @param {Record<string, string>[]} axes */
export function stageOf(stage, fields, axes) {
  const vector = (/** @type {string} */ text, /** @type {string} */ field) => text.trim().split(/[\s,;]+/).map((part) => require(part, field));
  const { questions: _asked, ...kept } = stage;
  return {
    ...kept,
    name: fields.name,
    sight: vector(fields.sight, "sight"),
    blade: vector(fields.blade, "blade"),
    axes: axes.map((axis, index) => ({ name: axis.name, axis: vector(axis.axis, `axes[${index}]`), ...Object.fromEntries(["low", "high", "zero", "step"].map((key) => [key, require(axis[key], `axes[${index}].${key}`)])), sense: Number(axis.sense) })),
  };
}

/** What was measured on the finished face, once its angle and its direction are there; else nothing. Throws at a text that is no number.
 * @param {{tilt: string, toward: string, sigma: string}} fields */
export function achievedOf({ tilt, toward, sigma }) {
  if (!tilt.trim() || !toward.trim()) return null;
  return { achieved: { tilt: require(tilt, "achieved.tilt"), toward, ...(sigma.trim() ? { sigma: require(sigma, "achieved.sigma") } : {}) } };
}
