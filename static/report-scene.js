// The scene of a report: drawn from the data in the file, turned by dragging or by the buttons. Nothing is asked for.
(() => {
  "use strict";
  const get = (/** @type {string} */ id) => /** @type {any} */ (document.getElementById(id));
  const place = get("view"), note = get("scene-note");
  const plotly = /** @type {any} */ (window).Plotly;
  const data = JSON.parse(get("scene-data").textContent);
  const RANGE = 1.5; // beyond the axes of the longest block, so that nothing is cut off
  const SIDE = RANGE / 0.68; // so that the picture shows 1.36 world lengths from its middle to its upper edge

  const canvas = document.createElement("canvas");
  if (!plotly || !(canvas.getContext("webgl2") ?? canvas.getContext("webgl"))) {
    note.textContent = "This browser cannot draw in three dimensions; the pictures above show the same.";
    return;
  }
  const token = (/** @type {string} */ name) => getComputedStyle(document.documentElement).getPropertyValue(name).trim();
  const column = (/** @type {any[]} */ flat, /** @type {number} */ k) => Array.from({ length: flat.length / 3 }, (_, i) => flat[3 * i + k]);
  const spread = (/** @type {any[]} */ flat) => ({ x: column(flat, 0), y: column(flat, 1), z: column(flat, 2) });
  const still = { hoverinfo: "skip", showlegend: false };

  function listTraces() {
    const ink = token("--ink"), traces = [];
    for (const body of data.bodies) {
      const plain = { color: token("--sheet"), flatshading: false, lighting: { ambient: 1, diffuse: 0, specular: 0, fresnel: 0 } };
      const { x: i, y: j, z: k } = spread(body.triangles);
      traces.push({ type: "mesh3d", ...still, ...plain, ...spread(body.vertices), i, j, k });
      for (const [lines, width] of [[body.light, 1.4], [body.heavy, 3.4]]) {
        if (lines.length) traces.push({ type: "scatter3d", mode: "lines", ...still, connectgaps: false, ...spread(lines), line: { color: ink, width, dash: body.sheet < 0 ? "dash" : "solid" } });
      }
    }
    traces.push({ type: "scatter3d", mode: "lines", ...still, connectgaps: false, ...spread(data.block), line: { color: token("--rule"), width: 2 } });
    const styles = { specimen: [ink, 6, "solid"], crystal: [ink, 3, "longdashdot"], principal: [token("--locked"), 3, "solid"] };
    for (const axis of data.axes) {
      const [color, width, dash] = styles[/** @type {keyof typeof styles} */ (axis.role)];
      const [x, y, z] = [0, 1, 2].map((n) => [axis.from[n], axis.to[n]]);
      traces.push({ type: "scatter3d", mode: "lines+text", ...still, x, y, z, text: ["", axis.name], textposition: "top center", textfont: { color, size: 15, family: token("--serif") }, line: { color, width, dash } });
    }
    return traces;
  }

  const asVector = (/** @type {number[]} */ [x, y, z]) => ({ x, y, z });
  const usual = () => ({ eye: asVector(data.camera.eye), up: asVector(data.camera.up), center: { x: 0, y: 0, z: 0 }, projection: { type: "orthographic" } });
  let camera = usual();

  function draw() {
    const axis = { visible: false, range: [-RANGE, RANGE], autorange: false };
    const layout = { scene: { xaxis: axis, yaxis: axis, zaxis: axis, aspectmode: "manual", aspectratio: { x: SIDE, y: SIDE, z: SIDE }, dragmode: "orbit", camera, bgcolor: "rgba(0,0,0,0)" }, margin: { l: 0, r: 0, t: 0, b: 0 }, paper_bgcolor: "rgba(0,0,0,0)", showlegend: false };
    return plotly.react(place, listTraces(), layout, { displayModeBar: false, responsive: true, scrollZoom: false });
  }

  const cross = (/** @type {any} */ a, /** @type {any} */ b) => ({ x: a.y * b.z - a.z * b.y, y: a.z * b.x - a.x * b.z, z: a.x * b.y - a.y * b.x });
  const unit = (/** @type {any} */ a) => { const size = Math.hypot(a.x, a.y, a.z) || 1; return { x: a.x / size, y: a.y / size, z: a.z / size }; };
  /** A vector turned about a unit axis, right-handed (Rodrigues' formula). */
  const turn = (/** @type {any} */ v, /** @type {any} */ n, /** @type {number} */ angle) => {
    const c = Math.cos(angle), s = Math.sin(angle), w = cross(n, v), d = (n.x * v.x + n.y * v.y + n.z * v.z) * (1 - c);
    return { x: v.x * c + w.x * s + n.x * d, y: v.y * c + w.y * s + n.y * d, z: v.z * c + w.z * s + n.z * d };
  };

  /** @param {number} right @param {number} up steps of 15° */
  function step(right, up) {
    const eye = camera.eye, above = unit(camera.up), side = unit(cross(above, eye)), angle = Math.PI / 12;
    const about = right ? above : side, by = right ? -right * angle : up * angle;
    look({ ...camera, eye: turn(eye, about, by), up: turn(camera.up, about, by) });
  }
  function look(/** @type {any} */ given) {
    camera = given;
    plotly.relayout(place, { "scene.camera": camera });
  }

  draw().then(() => {
    place.on("plotly_relayout", (/** @type {any} */ changed) => { if (changed["scene.camera"]) camera = { ...camera, ...changed["scene.camera"] }; });
    get("scene-buttons").hidden = false;
    note.textContent = "Drag to turn, or use the buttons. Thick: specimen x y z. Chain: cell edges a b c. Thin: principal axes.";
    place.dataset.drawn = "yes";
  });
  const moves = /** @type {Record<string, [number, number]>} */ ({ left: [-1, 0], right: [1, 0], up: [0, 1], down: [0, -1] });
  get("scene-buttons").addEventListener("click", (/** @type {MouseEvent} */ event) => {
    const name = /** @type {HTMLElement} */ (event.target).closest("button")?.dataset.turn;
    if (name === "usual") look(usual());
    else if (name) step(...moves[name]);
  });
  matchMedia("(prefers-color-scheme: dark)").addEventListener("change", draw);
})();
