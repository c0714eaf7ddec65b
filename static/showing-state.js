// The course of the slow turn and the text of a link: no browser, no server, no rotation.

/** Milliseconds of the whole slow turn, and the stops where motion is not wanted. */
export const WHOLE = 7000;
export const STOPS = [0, 0.25, 0.5, 0.75, 1];

/** How far the turn is after so many milliseconds: slow at both ends, resting a moment at the crystal frame. @param {number} since @returns {number} */
export function partAt(since) {
  const part = Math.min(1, Math.max(0, (since - 600) / (WHOLE - 600)));
  return part * part * (3 - 2 * part);
}

/** The stop after a part of the way; after the last one the first. @param {number} part @returns {number} */
export const nextStop = (part) => STOPS.find((stop) => stop > part + 1e-9) ?? STOPS[0];

/** What a part of the way is called. @param {number} part @returns {string} */
export const nameWay = (part) => (part >= 1 ? "specimen frame" : part <= 0 ? "crystal frame" : `${Math.round(100 * part)}\u00a0% of the way`);

/** The address that reopens what is shown. @param {string} origin @param {{id: string, revision: number, property: string|null}} sample
 * @param {{pose: any, hold: string, view: number[][], surface: string, at: number|null}} shown @returns {string} */
export function writeLink(origin, sample, shown) {
  const query = new URLSearchParams({ revision: String(sample.revision) });
  if (sample.property) query.set("property", sample.property);
  query.set("surface", shown.surface);
  query.set("hold", shown.hold);
  query.set("pose", JSON.stringify(shown.pose));
  query.set("view", shown.view.flat().map((part) => String(Number(part.toFixed(9)))).join(","));
  if (shown.at !== null) query.set("at", String(shown.at));
  return `${origin}/samples/${sample.id}/tensor?${query}`;
}
