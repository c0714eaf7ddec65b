// Pure transitions of the grid of readings: no browser, no server.

/**
 * @typedef {{cells: Record<string, string>, set_aside: string|null, pose: any}} Row
 * @typedef {{columns: string[], rows: Row[], batches: Record<string, string>}} Content
 * @typedef {Content & {base: number, typed: number, dirty: boolean, faults: Record<string, string>, theirs: null|{content: Content, revision: number}}} GridState
 */

/** Columns that are shown even where they are empty. */
const ALWAYS = ["kind", "direction", "value", "sigma", "bar"];
/** What a row set aside says until somebody says why. */
export const NO_REASON = "no reason given";

/** @param {Content} content @param {number} revision @returns {GridState} */
export const begin = ({ columns, rows, batches }, revision) => ({ columns, rows, batches, base: revision, typed: 0, dirty: false, faults: {}, theirs: null });

/** @param {GridState} state @param {Partial<GridState>} change @returns {GridState} */
const touch = (state, change) => ({ ...state, ...change, typed: state.typed + 1, dirty: true });

/** @param {GridState} state @returns {Row} */
export const emptyRow = (state) => ({ cells: Object.fromEntries(state.columns.map((name) => [name, ""])), set_aside: null, pose: null });

/** The fault of a cell. @param {number} row @param {string} column */
export const faultKey = (row, column) => `${row}:${column}`;

/** @param {GridState} state @param {number} row @param {string} column @param {string} text @returns {GridState} */
export function setCell(state, row, column, text) {
  if (!state.rows[row] || state.rows[row].cells[column] === text) return state;
  const { [faultKey(row, column)]: _gone, ...faults } = state.faults;
  const rows = state.rows.map((entry, index) => (index === row ? { ...entry, cells: { ...entry.cells, [column]: text } } : entry));
  return touch(state, { rows, faults });
}

/** An empty row after the one with this place; -1 puts it first. @param {GridState} state @param {number} after @returns {GridState} */
export const addRow = (state, after) => touch(state, { rows: [...state.rows.slice(0, after + 1), emptyRow(state), ...state.rows.slice(after + 1)], faults: {} });

/** @param {GridState} state @param {number} row @returns {GridState} */
export const removeRow = (state, row) => touch(state, { rows: state.rows.filter((_, index) => index !== row), faults: {} });

/** Set a reading aside with a reason, or take it back with null. @param {GridState} state @param {number} row @param {string|null} reason @returns {GridState} */
export const setAside = (state, row, reason) => touch(state, { rows: state.rows.map((entry, index) => (index === row ? { ...entry, set_aside: reason } : entry)) });

/** @param {GridState} state @param {string} name @param {string} text @returns {GridState} */
export const setBatch = (state, name, text) => (state.batches[name] === text ? state : touch(state, { batches: { ...state.batches, [name]: text } }));

/** Whether a pasted text is a whole table with its header, and not a block of cells. @param {string} text */
export const isTable = (text) => {
  const first = text.trimStart().split(/\r?\n/, 1)[0].toLowerCase();
  return text.includes("\n") && /\bkind\b/.test(first) && /\bvalue\b/.test(first);
};

/** Cells of a spreadsheet put in from a cell on, over what stands; rows are added as needed.
 * @param {GridState} state @param {number} row @param {string} column @param {string} text tabs between cells, line ends between rows @returns {GridState} */
export function insertBlock(state, row, column, text) {
  const lines = text.replace(/\r?\n$/, "").split(/\r?\n/).map((line) => line.split("\t"));
  const from = state.columns.indexOf(column);
  const rows = [...state.rows];
  lines.forEach((cells, down) => {
    const at = row + down;
    const old = rows[at] ?? emptyRow(state);
    const typed = Object.fromEntries(cells.slice(0, state.columns.length - from).map((cell, right) => [state.columns[from + right], cell.trim()]));
    rows[at] = { ...old, cells: { ...old.cells, ...typed } };
  });
  return touch(state, { rows, faults: {} });
}

/** What is sent. @param {GridState} state */
export const payload = (state) => {
  const names = batchNames(state);
  return { rows: state.rows, batches: Object.fromEntries(names.map((name) => [name, state.batches[name] ?? ""])) };
};

/** @param {Row} row */
const isEmpty = (row) => Object.values(row.cells).every((text) => !text.trim());

/** The server took what was sent when ``typed`` stood; what was typed since stays, and so do empty rows, which are not sent.
 * @param {GridState} state @param {Content} content @param {number} revision @param {number} typed @returns {GridState} */
export function taken(state, content, revision, typed) {
  if (state.typed !== typed) return { ...state, base: revision, theirs: null };
  const given = [...content.rows];
  const rows = state.rows.map((row) => (isEmpty(row) ? row : given.shift())).filter((row) => row !== undefined);
  return { ...begin({ ...content, rows: [...rows, ...given] }, revision), typed };
}

/** The server refused; faults go to their cells. @param {GridState} state @param {{detail?: any}} error @returns {GridState} */
export function refuse(state, error) {
  /** @type {Record<string, string>} */
  const faults = {};
  for (const { row, column, reason } of error.detail?.problems ?? []) if (row !== null && row !== undefined) faults[faultKey(row, column ?? "kind")] ??= reason;
  return { ...state, faults };
}

/** The sample changed elsewhere, or by an undo: shown at once, unless something typed is not taken yet. @param {GridState} state @param {Content} content @param {number} revision @returns {GridState} */
export const learn = (state, content, revision) => (state.dirty ? { ...state, theirs: { content, revision } } : begin(content, revision));

/** What stands takes the place of what was typed. @param {GridState} state @returns {GridState} */
export const showTheirs = (state) => (state.theirs ? begin(state.theirs.content, state.theirs.revision) : state);

/** What was typed goes on, over what stands. @param {GridState} state @returns {GridState} */
export const keepMine = (state) => (state.theirs ? { ...state, base: state.theirs.revision, theirs: null } : state);

/** @param {GridState} state @param {boolean} all @returns {string[]} */
export const shownColumns = (state, all) =>
  state.columns.filter((name) => all || ALWAYS.includes(name) || state.rows.some((row) => row.cells[name]) || Object.keys(state.faults).some((key) => key.endsWith(`:${name}`)));

/** The batches that the rows name, in their order. @param {GridState} state @returns {string[]} */
export const batchNames = (state) => [...new Set(state.rows.map((row) => row.cells.batch?.trim()).filter(Boolean))];
