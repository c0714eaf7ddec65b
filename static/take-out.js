// Handing over: files are fetched, so that a refusal is told in its place, and saved; PNG is drawn here from the SVG.

import { fetchFile } from "./server.js";
import { pixelSize, pixelWidth } from "./take-out-size.js";

const panel = /** @type {HTMLElement} */ (document.getElementById("take-out"));
const said = /** @type {HTMLElement} */ (panel.querySelector("[data-said]"));

/** @param {Blob} blob @param {string} name */
function save(blob, name) {
  const link = document.createElement("a");
  link.href = URL.createObjectURL(blob);
  link.download = name;
  link.click();
  setTimeout(() => URL.revokeObjectURL(link.href), 10000);
  said.textContent = `Saved ${name}.`;
}

/** @param {Element} row */
function clear(row) {
  const fault = /** @type {HTMLElement} */ (row.querySelector(".fault"));
  fault.hidden = true;
  for (const input of row.querySelectorAll("[aria-invalid]")) input.removeAttribute("aria-invalid");
}

/** @param {Element} row @param {any} error */
function tell(row, error) {
  const fault = /** @type {HTMLElement} */ (row.querySelector(".fault"));
  fault.textContent = [error.message, error.hint].filter(Boolean).join(" ");
  fault.hidden = false;
  said.textContent = "";
  if (error.field) row.querySelector(`[name="${CSS.escape(error.field)}"]`)?.setAttribute("aria-invalid", "true");
}

/** Run one request of a row; its buttons wait. @param {Element} row @param {() => Promise<void>} task */
async function run(row, task) {
  if (row.getAttribute("aria-busy") === "true") return;
  clear(row);
  row.setAttribute("aria-busy", "true");
  said.textContent = "Making the file …";
  try {
    await task();
  } catch (error) {
    tell(row, error);
  } finally {
    row.removeAttribute("aria-busy");
  }
}

/** The address of a form's file. @param {HTMLFormElement} form @param {string} action @param {Record<string, string>} [more] */
function address(form, action, more = {}) {
  const query = new URLSearchParams(/** @type {any} */ (new FormData(form)));
  for (const [name, value] of Object.entries(more)) query.set(name, value);
  return `${action}?${query}`;
}

/** @param {Blob} blob an SVG @param {number} width pixels @returns {Promise<Blob>} */
async function toPng(blob, width) {
  const image = new Image(), at = URL.createObjectURL(blob);
  try {
    image.src = at;
    await image.decode();
    const [wide, high] = pixelSize(width, image.naturalHeight / image.naturalWidth);
    const canvas = document.createElement("canvas");
    canvas.width = wide;
    canvas.height = high;
    /** @type {CanvasRenderingContext2D} */ (canvas.getContext("2d")).drawImage(image, 0, 0, wide, high);
    const made = await new Promise((resolve) => canvas.toBlob(resolve, "image/png"));
    if (!made) throw { field: "width", message: "This browser could not make so large a PNG.", hint: "Give a smaller width, or take the SVG." };
    return made;
  } finally {
    URL.revokeObjectURL(at);
  }
}

panel.addEventListener("click", (event) => {
  const link = /** @type {HTMLElement} */ (event.target).closest("a[data-file]");
  if (!link) return;
  event.preventDefault();
  const row = /** @type {Element} */ (link.closest(".out-row"));
  run(row, async () => {
    const { blob, name } = await fetchFile(/** @type {string} */ (link.getAttribute("href")));
    save(blob, name);
  });
});

panel.addEventListener("submit", (event) => {
  event.preventDefault();
  const form = /** @type {HTMLFormElement} */ (event.target);
  const button = /** @type {HTMLButtonElement} */ (event.submitter ?? form.querySelector("button"));
  const row = /** @type {Element} */ (form.closest(".out-row"));
  run(row, async () => {
    const action = /** @type {string} */ (button.getAttribute("formaction"));
    if (button.dataset.png === undefined) {
      const { blob, name } = await fetchFile(address(form, action));
      return save(blob, name);
    }
    const typed = new FormData(form);
    const width = pixelWidth(Number(String(typed.get("width")).replace(",", ".")), typed.get("unit") === "mm" ? "mm" : "px");
    const { blob, name } = await fetchFile(address(form, action, { unit: "px", width: String(width) }));
    save(await toPng(blob, width), name.replace(/svg$/, "png"));
  });
});

// What the solid would be stands beside its choices before anything is saved.
const solid = /** @type {HTMLFormElement} */ (panel.querySelector("form[data-solid]"));
const about = /** @type {HTMLElement} */ (solid.querySelector("[data-about]"));
let asked = 0;
async function describe() {
  const number = ++asked, row = /** @type {Element} */ (solid.closest(".out-row"));
  try {
    const { blob } = await fetchFile(address(solid, /** @type {string} */ (solid.dataset.solid)));
    const found = JSON.parse(await blob.text());
    if (number !== asked) return;
    clear(row);
    about.textContent = found.sentence;
  } catch (error) {
    if (number !== asked) return;
    about.textContent = "";
    tell(row, error);
  }
}
solid.addEventListener("change", describe);
panel.addEventListener("toggle", () => { if (/** @type {HTMLDetailsElement} */ (panel).open) describe(); });
