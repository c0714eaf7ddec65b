// The one module that talks to the server over HTTP. Edits wait for each other, so that one is in flight at a time.

import { wait } from "./waiting.js";

/** What the server refused, or that it cannot be reached (status 0). */
export class ServerError extends Error {
  /** @param {number} status @param {{message: string, field?: string|null, hint?: string|null, detail?: any}} error */
  constructor(status, error) {
    super(error.message);
    this.status = status;
    this.field = error.field ?? null;
    this.hint = error.hint ?? null;
    this.detail = error.detail ?? null;
  }
}

const GONE = {
  message: "The server cannot be reached; what you typed is still here.",
  hint: "Start Halfturn again, then take it once more.",
};

/**
 * One request. @param {string} method @param {string} path @param {any} [body] @returns {Promise<any>}
 * @throws {ServerError}
 */
const ask = (method, path, body) => wait(() => send(method, path, body));

/** The same without a word of waiting. @param {string} method @param {string} path @param {any} [body] @returns {Promise<any>} */
async function send(method, path, body) {
  let answer;
  try {
    answer = await fetch(path, {
      method,
      headers: body === undefined ? {} : { "Content-Type": "application/json" },
      body: body === undefined ? undefined : JSON.stringify(body),
    });
  } catch {
    throw new ServerError(0, GONE);
  }
  let content = null;
  try {
    content = await answer.json();
  } catch {
    throw new ServerError(answer.status, { message: "The server's answer could not be read.", hint: "Reload the page." });
  }
  if (!answer.ok) throw new ServerError(answer.status, content?.error ?? GONE);
  return content;
}

/** @type {Promise<any>} */
let queue = Promise.resolve();

/** Run a task when those before it are done, whatever became of them. @template T @param {() => Promise<T>} task @returns {Promise<T>} */
export function enqueue(task) {
  const turn = queue.then(task, task);
  queue = turn.catch(() => undefined);
  return turn;
}

const at = (/** @type {string} */ id) => `/api/samples/${encodeURIComponent(id)}`;

/** @param {string} id @param {number} [revision] */
export const fetchSample = (id, revision) => ask("GET", at(id) + (revision ? `?revision=${revision}` : ""));
export const listSamples = () => ask("GET", "/api/samples");
export const fetchProperties = () => ask("GET", "/api/properties");
/** @param {{name?: string, from?: string}} body */
export const createSample = (body) => ask("POST", "/api/samples", body);
/** @param {string} id @param {string} name */
export const renameSample = (id, name) => ask("POST", `${at(id)}/rename`, { name });
/** @param {string} id @param {{archived?: boolean, deleted?: boolean}} body */
export const markSample = (id, body) => ask("POST", `${at(id)}/mark`, body);
/** @param {string} id @param {number} parent @param {object} change */
export const postEdit = (id, parent, change) => ask("POST", `${at(id)}/edit`, { parent, change });
/** @param {string} id @param {number} parent @param {"undo"|"redo"} way */
export const postStep = (id, parent, way) => ask("POST", `${at(id)}/${way}`, { parent });
/** @param {string} id */
export const fetchReadings = (id) => ask("GET", `${at(id)}/readings`);
/** @param {string} id @param {number} parent @param {object[]} rows @param {Record<string, string>} batches */
export const postReadings = (id, parent, rows, batches) => ask("POST", `${at(id)}/readings`, { parent, rows, batches });
/** @param {string} id @param {number} parent @param {string} text */
export const postTable = (id, parent, text) => ask("POST", `${at(id)}/readings/table`, { parent, text });
/** @param {string} id @param {number} place */
export const fetchSeries = (id, place) => ask("GET", `${at(id)}/series?at=${place}`);
/** @param {string} id @param {number} parent @param {object} change @param {number|null} place */
export const postSeries = (id, parent, change, place) => ask("POST", `${at(id)}/series`, { parent, change, at: place });
/** @param {string} id @param {number} parent @param {string[]} texts */
export const postCifs = (id, parent, texts) => ask("POST", `${at(id)}/series/cifs`, { parent, texts });
/** @param {string} id @param {number} place */
export const fetchTensorSeries = (id, place) => ask("GET", `${at(id)}/tensor-series?at=${place}`);
/** @param {string} id @param {number} parent @param {object} change @param {number|null} place */
export const postTensorSeries = (id, parent, change, place) => ask("POST", `${at(id)}/tensor-series`, { parent, change, at: place });
/** @param {string} id @param {number} parent @param {number} place */
export const useTensorSeries = (id, parent, place) => ask("POST", `${at(id)}/tensor-series/use`, { parent, at: place });
/** @param {string} id @param {number} parent @param {number} place */
export const useSeries = (id, parent, place) => ask("POST", `${at(id)}/series/use`, { parent, at: place });
/** @param {string} id */
export const fetchCut = (id) => ask("GET", `${at(id)}/cut`);
/** @param {string} id @param {number} parent @param {object} body */
export const postCut = (id, parent, body) => ask("POST", `${at(id)}/cut`, { parent, ...body });
/** @param {string} id @param {object[]} conditions */
export const seekCut = (id, conditions) => ask("POST", `${at(id)}/cut/seek`, { conditions });
export const fetchStages = () => ask("GET", "/api/stages");
/** @param {object[]} stages */
export const postStages = (stages) => ask("POST", "/api/stages", { stages });
/** @param {string} id @param {object} asked */
export const postConsequences = (id, asked) => ask("POST", `${at(id)}/consequences`, asked);
/** Asked for every picture while its panel is open, so without a word of waiting. @param {string} id @param {object} asked */
export const postStereogram = (id, asked) => send("POST", `${at(id)}/stereogram`, asked);
/** @param {string} id @param {object} asked */
export const postSection = (id, asked) => send("POST", `${at(id)}/section`, asked);
/** @param {string} id @param {object} asked */
export const askFrame = (id, asked) => ask("POST", `${at(id)}/frame-question`, asked);
/** @param {string} id @param {object} asked */
export const indexSpots = (id, asked) => ask("POST", `${at(id)}/cut/spots`, asked);
/** @param {string} id */
export const lookCloser = (id) => ask("POST", `${at(id)}/readings/closer`);
/** @param {string} id @param {object} asked */
export const nextCuts = (id, asked) => ask("POST", `${at(id)}/readings/next-cuts`, asked);
/** A question about the readings: isolate, cube, true-normal, piece or twin. @param {string} id @param {string} question @param {any} asked */
export const askReadings = (id, question, asked) => ask("POST", `${at(id)}/readings/${question}`, asked);
/** The lines of the glossary by their keys. */
export const fetchTerms = () => ask("GET", "/api/terms");
/** A calculation call. @param {string} name @param {object} body */
export const call = (name, body) => ask("POST", `/api/v1/${name}`, body);
/** A file that the server makes, with the name it is saved under. @param {string} path @returns {Promise<{blob: Blob, name: string}>} @throws {ServerError} */
export async function fetchFile(path) {
  let answer;
  try {
    answer = await fetch(path);
  } catch {
    throw new ServerError(0, GONE);
  }
  if (!answer.ok) throw new ServerError(answer.status, (await answer.json().catch(() => null))?.error ?? GONE);
  const given = /filename\*=UTF-8''([^;]+)/.exec(answer.headers.get("Content-Disposition") ?? "");
  try {
    return { blob: await answer.blob(), name: given ? decodeURIComponent(given[1]) : "file" };
  } catch {
    throw new ServerError(0, GONE);
  }
}
