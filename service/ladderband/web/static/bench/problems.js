// Problem documents beside the fields they are about, in the service's own words.

import { byId, el } from "./dom.js";

const SHIFTS = /\/(huang_rhys|displacement|shift_angstrom_sqrt_u)$/;
const current = new Map(); // kind of request -> its problem document
let shown = "";

export function sentence(error) {
  const allowed = error.allowed ? ` Allowed: ${error.allowed.replaceAll("<=", "≤")}.` : "";
  return error.detail + allowed;
}

// Sets (or with null, takes away) the problem of one kind of request.
export function setProblem(kind, problem, rename = (pointer) => pointer) {
  if (problem) current.set(kind, { ...problem, errors: problem.errors?.map((e) => ({ ...e, pointer: rename(e.pointer) })) });
  else current.delete(kind);
  const found = collected();
  const signature = JSON.stringify(found.map(({ text, pointer }) => [text, pointer]));
  if (signature === shown && found.every(({ field }) => !field || field.hasAttribute("aria-invalid"))) return;
  shown = signature;
  clear();
  for (const entry of found) show(entry);
  // notes beside fields are heard as well; those in the list of problems are an alert already
  const beside = found.filter(({ field }) => field).map(({ field, text }) => `${field.dataset.name ?? ""} ${text}`);
  byId("heard").textContent = beside.join(" ");
}

// Each thing that is wrong once, although several requests complain about it.
function collected() {
  const found = new Map();
  for (const [kind, problem] of current) {
    const errors = problem.errors ?? [{ pointer: "", detail: problem.detail }];
    for (const error of errors) {
      const pointer = error.pointer.replace(/^#/, "");
      const text = sentence(error);
      const field = fieldOf(pointer);
      const key = (field ? field.dataset.pointer : pointer) + text;
      if (!found.has(key)) found.set(key, { field, pointer, text, kind });
    }
  }
  return [...found.values()];
}

// The field a JSON pointer is about: itself, or the nearest one above it.
function fieldOf(pointer) {
  let path = pointer.replace(SHIFTS, "/shift");
  while (path) {
    const field = document.querySelector(`[data-pointer="${CSS.escape(path)}"]`);
    if (field && !field.closest("[hidden]")) return field;
    path = path.slice(0, path.lastIndexOf("/"));
  }
  return null;
}

function clear() {
  for (const note of document.querySelectorAll(".wrong")) note.remove();
  for (const field of document.querySelectorAll("[aria-invalid]")) {
    field.removeAttribute("aria-invalid");
    field.removeAttribute("aria-describedby");
  }
}

function show({ field, pointer, text, kind }) {
  if (!field) {
    const where = pointer ? `${pointer}: ` : "";
    byId("problems").append(el("p", { class: "wrong" }, el("strong", {}, `${kind}: `), where + text));
    return;
  }
  const id = `wrong-${field.dataset.pointer}`;
  field.setAttribute("aria-invalid", "true");
  field.setAttribute("aria-describedby", id);
  field.closest("details")?.setAttribute("open", "");
  const group = field.closest("tbody");
  const note = el("p", { class: "wrong", id }, group ? `${field.dataset.name}: ${text}` : text);
  if (group) group.querySelector(".mode-wrong").append(note);
  else field.closest("label, fieldset, .slide, p").after(note);
}
