// Puts a dropped or chosen file into the table; nothing is taken before the reader says so.

const form = /** @type {HTMLFormElement} */ (document.getElementById("table-form"));
const table = /** @type {HTMLTextAreaElement} */ (document.getElementById("table"));
const file = /** @type {HTMLInputElement} */ (document.getElementById("file"));

/** @param {FileList|null|undefined} files */
async function fill(files) {
  if (!files || files.length === 0) return;
  table.value = await files[0].text();
  table.focus();
}

file.addEventListener("change", () => fill(file.files));
for (const name of ["dragenter", "dragover"]) {
  form.addEventListener(name, (event) => {
    event.preventDefault();
    form.classList.add("dropping");
  });
}
form.addEventListener("dragleave", () => form.classList.remove("dropping"));
form.addEventListener("drop", (event) => {
  event.preventDefault();
  form.classList.remove("dropping");
  fill(event.dataTransfer?.files);
});

// A change made elsewhere, an undo for one, shows what stands now.
document.addEventListener("sample", () => location.reload());
