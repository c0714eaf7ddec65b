// Draws the shapes and texts of an answer into the two layers; elements are kept and changed in place.

const SVG = "http://www.w3.org/2000/svg";
export const make = (/** @type {string} */ name, /** @type {Record<string, any>} */ set = {}, text = "") => {
  const element = document.createElementNS(SVG, name);
  for (const [key, value] of Object.entries(set)) element.setAttribute(key, String(value));
  if (text) element.textContent = text;
  return element;
};

/** @param {Element} back @param {Element} front @param {any} overlay */
export function drawOverlay(back, front, overlay) {
  const layers = { back: /** @type {Element[]} */ ([]), front: /** @type {Element[]} */ ([]) };
  for (const shape of overlay.shapes) {
    if (!shape.d) continue;
    const path = make("path", { class: shape.class, d: shape.d });
    if (shape.hold) path.setAttribute("data-hold-on", shape.hold);
    layers[/** @type {"back"|"front"} */ (shape.layer)].push(path);
  }
  for (const text of overlay.texts) {
    const place = text.rotate === undefined ? { x: text.x, y: text.y } : { transform: `translate(${text.x} ${text.y}) rotate(${text.rotate})`, dy: 4.5 };
    const element = make("text", { class: text.class, "text-anchor": text.anchor, ...place });
    for (const [run, role] of text.runs) element.append(make("tspan", role === "symbol" ? { class: "sy" } : role === "sub" ? { "font-size": 11, dy: 4 } : {}, run));
    layers.front.push(element);
  }
  back.replaceChildren(...layers.back);
  front.replaceChildren(...layers.front);
}
