// Draws the shapes and texts of an answer into the two layers; elements are kept and changed in place.

const SVG = "http://www.w3.org/2000/svg";
export const make = (/** @type {string} */ name, /** @type {Record<string, any>} */ set = {}, text = "") => {
  const element = document.createElementNS(SVG, name);
  for (const [key, value] of Object.entries(set)) element.setAttribute(key, String(value));
  if (text) element.textContent = text;
  return element;
};

/** What every kept element was last given, so that only what differs is set. @type {WeakMap<Element, Record<string, any>>} */
const given = new WeakMap();

/** An element of a layer's place, the one that stands there where it is of the same kind. @param {Element} layer @param {number} place @param {string} name @param {Record<string, any>} set */
function keep(layer, place, name, set) {
  let element = layer.children[place];
  if (element?.localName !== name || !given.has(element)) {
    const fresh = make(name);
    if (element) element.replaceWith(fresh); else layer.append(fresh);
    element = fresh;
  }
  const last = given.get(element) ?? {};
  for (const key of Object.keys(last)) if (!(key in set)) element.removeAttribute(key);
  for (const [key, value] of Object.entries(set)) if (last[key] !== value) element.setAttribute(key, String(value));
  given.set(element, set);
  return element;
}

const run = (/** @type {[string, string]} */ [text, role]) => make("tspan", role === "symbol" ? { class: "sy" } : role === "sub" ? { "font-size": 11, dy: 4 } : {}, text);
/** The runs that a text shows. @type {WeakMap<Element, string>} */
const shown = new WeakMap();

/** @param {Element} back @param {Element} front @param {any} overlay */
export function drawOverlay(back, front, overlay) {
  const layers = { back, front }, count = { back: 0, front: 0 };
  for (const shape of overlay.shapes) {
    if (!shape.d) continue;
    const layer = /** @type {"back"|"front"} */ (shape.layer);
    const hold = shape.hold ? { "data-hold-on": shape.hold } : {};
    keep(layers[layer], count[layer]++, "path", { class: shape.class, d: shape.d, ...hold });
  }
  for (const text of overlay.texts) {
    const place = text.rotate === undefined ? { x: text.x, y: text.y } : { transform: `translate(${text.x} ${text.y}) rotate(${text.rotate})`, dy: 4.5 };
    const element = keep(front, count.front++, "text", { class: text.class, "text-anchor": text.anchor, ...place });
    const runs = JSON.stringify(text.runs);
    if (shown.get(element) !== runs) element.replaceChildren(...text.runs.map(run));
    shown.set(element, runs);
  }
  for (const [layer, used] of /** @type {[Element, number][]} */ ([[back, count.back], [front, count.front]])) {
    while (layer.children.length > used) /** @type {Element} */ (layer.lastElementChild).remove();
  }
}
