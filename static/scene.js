// The surface, drawn by the plotting script: static geometry in the crystal frame, turned by its camera alone.

const RANGE = 0.6; // half of the picture's half height: the cube's side is half of what an orthographic picture shows

/** @param {ArrayBuffer} data */
export function unpack(data) {
  const length = new DataView(data).getInt32(0, true);
  const header = JSON.parse(new TextDecoder().decode(new Uint8Array(data, 4, length)));
  let at = 4 + length;
  /** @type {Record<string, any>} */
  const arrays = {};
  for (const [name, form, count] of header.arrays) {
    arrays[name] = form === "f4" ? new Float32Array(data, at, count) : new Int32Array(data, at, count);
    at += 4 * count;
  }
  return { header, arrays };
}

const column = (/** @type {any} */ flat, /** @type {number} */ k) => Array.from({ length: flat.length / 3 }, (_, i) => (Number.isNaN(flat[3 * i + k]) ? null : flat[3 * i + k]));

/** Frames slower than this, in milliseconds, put the light lines away until the hand rests. */
const SLOW = 50;
const REST = 350;

/** Whether this browser can draw in three dimensions. */
function canDraw() {
  const canvas = document.createElement("canvas");
  return Boolean(canvas.getContext("webgl2") ?? canvas.getContext("webgl"));
}

/** @param {HTMLElement} place @param {() => void} onMissing called where nothing can be drawn here */
export function makeScene(place, onMissing) {
  let lastFrame = 0, slow = 0, thin = false, rest = 0;
  /** Which traces are light lines. */
  let light = /** @type {number[]} */ ([]);
  const showLight = (/** @type {boolean} */ visible) => { thin = !visible; if (light.length) plotly().restyle(place, { visible }, light); };
  /** Counts slow frames while the picture moves; the light lines come back when it rests. */
  function pace() {
    const now = performance.now(), took = now - lastFrame;
    lastFrame = now;
    if (took < 400) slow = took > SLOW ? slow + 1 : 0;
    if (slow > 3 && !thin) showLight(false);
    clearTimeout(rest);
    rest = window.setTimeout(() => { slow = 0; if (thin) showLight(true); }, REST);
  }
  let camera = /** @type {any} */ (null);
  let drawn = false;
  const plotly = () => /** @type {any} */ (window).Plotly;
  const token = (/** @type {string} */ name) => getComputedStyle(place).getPropertyValue(name).trim();
  const asCamera = (/** @type {any} */ c) => {
    const v = (/** @type {number[]} */ [x, y, z]) => ({ x, y, z });
    return { eye: v(c.eye), up: v(c.up), center: { x: 0, y: 0, z: 0 }, projection: { type: "orthographic" } };
  };
  return {
    /** @param {any} given */
    look(given) {
      camera = given;
      if (!drawn) return;
      pace();
      plotly().relayout(place, { "scene.camera": asCamera(given) });
    },
    /** @param {{arrays: any}} scene */
    async show({ arrays }) {
      if (!plotly() || !camera) return;
      if (!canDraw()) return onMissing();
      const traces = [];
      light = [];
      thin = false;
      for (const sign of ["plus", "minus"]) {
        const vertices = arrays[`${sign}_vertices`], triangles = arrays[`${sign}_triangles`];
        if (!vertices.length) continue;
        const plain = { color: token("--sheet"), hoverinfo: "skip", flatshading: false, lighting: { ambient: 1, diffuse: 0, specular: 0, fresnel: 0 } };
        traces.push({ type: "mesh3d", ...plain, x: column(vertices, 0), y: column(vertices, 1), z: column(vertices, 2), i: column(triangles, 0), j: column(triangles, 1), k: column(triangles, 2) });
        for (const [weight, width] of [["light", 1.4], ["heavy", 3.4]]) {
          const points = arrays[`${sign}_${weight}`];
          if (points.length && weight === "light") light.push(traces.length);
          if (points.length) traces.push({ type: "scatter3d", mode: "lines", hoverinfo: "skip", connectgaps: false, x: column(points, 0), y: column(points, 1), z: column(points, 2), line: { color: token("--ink"), width, dash: sign === "minus" ? "dash" : "solid" } });
        }
      }
      const dots = arrays.minus_dots;
      if (dots.length) traces.push({ type: "scatter3d", mode: "markers", hoverinfo: "skip", x: column(dots, 0), y: column(dots, 1), z: column(dots, 2), marker: { size: 1.6, color: token("--ink") } });
      const axis = { visible: false, range: [-RANGE, RANGE], autorange: false };
      try {
        await plotly().react(place, traces, { scene: { xaxis: axis, yaxis: axis, zaxis: axis, aspectmode: "cube", dragmode: false, camera: asCamera(camera), bgcolor: "rgba(0,0,0,0)" }, margin: { l: 0, r: 0, t: 0, b: 0 }, paper_bgcolor: "rgba(0,0,0,0)", showlegend: false }, { displayModeBar: false, staticPlot: false, responsive: true });
        drawn = true;
      } catch { drawn = false; }
    },
  };
}
