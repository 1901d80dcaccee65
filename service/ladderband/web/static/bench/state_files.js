// A transition from two QCSchema results: files, the request, the choices it may ask for.

import { Problem, ask } from "./api.js";
import { byId, el, takesFiles } from "./dom.js";
import { sentence } from "./problems.js";
import { short } from "./text.js";

const files = { initial: null, final: null }; // {name, document}
const choices = new Map(); // "final 0" -> entry of mode_choices

export function bindStates(store, use) {
  for (const state of ["initial", "final"]) {
    byId(`state-${state}`).addEventListener("change", (event) => takeAll([...event.target.files], store, use, state));
  }
  takesFiles(byId("states-drop"), (dropped) => takeAll(dropped, store, use));
  byId("states-map").addEventListener("click", () => map(store, use));
  byId("states-swap").addEventListener("click", () => {
    [files.initial, files.final] = [files.final, files.initial];
    choices.clear();
    showNames();
    map(store, use);
  });
  showNames();
}

async function takeAll(given, store, use, state = null) {
  try {
    const read = [];
    for (const file of given.slice(0, 2)) read.push(await readDocument(file));
    if (state) files[state] = read[0];
    else place(read, store.state.process);
  } catch (error) {
    say([error.message], true);
    return;
  }
  choices.clear();
  showNames();
  if (files.initial && files.final) await map(store, use);
}

async function readDocument(file) {
  try {
    return { name: file.name, document: JSON.parse(await file.text()) };
  } catch {
    throw new Error(`${file.name} is not JSON. Give a QCSchema result with a Hessian.`);
  }
}

// Two at once: light is absorbed by the lower state and emitted by the upper one.
function place(read, process) {
  if (read.length === 1) {
    files[files.initial ? "final" : "initial"] = read[0];
    return;
  }
  const energy = ({ document }) => document?.properties?.return_energy ?? document?.properties?.scf_total_energy ?? 0;
  const rising = energy(read[0]) <= energy(read[1]) ? read : read.toReversed();
  [files.initial, files.final] = process === "emission" ? rising.toReversed() : rising;
}

function showNames() {
  const { initial, final } = files;
  byId("states-names").textContent = initial || final
    ? `Initial state: ${initial?.name ?? "none yet"}. Final state: ${final?.name ?? "none yet"}.` : "";
  byId("states-map").disabled = byId("states-swap").disabled = !(initial && final);
}

async function map(store, use) {
  say(["Making the transition..."]);
  byId("states-choices").replaceChildren();
  const { process, temperature } = store.state;
  const body = {
    process,
    initial: { qcschema: files.initial.document },
    final: { qcschema: files.final.document },
    mode_choices: choices.size ? [...choices.values()] : undefined,
  };
  if (Number.isFinite(Number(temperature)) && temperature.trim()) body.temperature_k = Number(temperature);
  try {
    const answer = await (await ask("v1/mode-maps", body)).json();
    use(answer.transition, answer.energies.origin_cm1 !== null);
    say(summary(answer));
  } catch (problem) {
    if (!(problem instanceof Problem)) throw problem;
    refused(problem, store, use);
  }
}

function summary(answer) {
  const texts = [`The transition has ${answer.transition.modes.length} modes and takes the place of the one before.`];
  if (answer.energies.origin_cm1 === null) texts.push("The results give no energies: set the origin yourself.");
  texts.push(`The two sets of modes fit to ${short(answer.closure.orthogonality, 2)} (0 is perfect).`);
  answer.modes.notes.forEach((notes, k) => notes.length && texts.push(`Mode ${k + 1}: ${notes.join(", ")}.`));
  return [...texts, ...answer.warnings];
}

function refused(problem, store, use) {
  const { errors, modes, detail } = problem.members;
  if (problem.slug === "modes-need-a-choice") {
    say([detail], true);
    byId("states-choices").replaceChildren(choiceForm(modes, store, use));
  } else {
    say(errors ? errors.map((error) => `${whose(error.pointer)}${sentence(error)}`) : [detail], true);
  }
}

function whose(pointer) {
  const [, state, , ...rest] = pointer.replace(/^#/, "").split("/");
  return files[state] ? `${files[state].name}${rest.length ? `, ${rest.join("/")}` : ""}: ` : "";
}

function choiceForm(modes, store, use) {
  const rows = modes.map((mode) => choiceRow(mode));
  const form = el("form", { class: "choices" }, ...rows, el("button", {}, "Make the transition with these choices"));
  form.addEventListener("submit", (event) => {
    event.preventDefault();
    modes.forEach((mode, k) => choices.set(`${mode.state} ${mode.mode}`, chosen(mode, rows[k])));
    map(store, use);
  });
  return form;
}

function choiceRow({ state, mode, wavenumber_cm1: wavenumber }) {
  const name = `choice-${state}-${mode}`;
  const size = wavenumber < 0 ? `${short(-wavenumber, 4)}i` : short(wavenumber, 4);
  return el("fieldset", {},
    el("legend", {}, `Mode ${mode + 1} of the ${state} state, ${size} cm⁻¹`),
    el("label", {}, el("input", { type: "radio", name, value: "freeze", checked: true }), " hold it still in both states"),
    el("label", {}, el("input", { type: "radio", name, value: "replace" }), " give it the wavenumber ",
      el("input", { class: "replacement", value: "80", inputmode: "decimal", "aria-label": `Wavenumber for mode ${mode + 1} of the ${state} state, cm⁻¹` }), " cm⁻¹"));
}

function chosen({ state, mode }, row) {
  const action = row.querySelector("input:checked").value;
  const choice = { state, mode, action };
  const text = row.querySelector(".replacement").value;
  return action === "replace" ? { ...choice, wavenumber_cm1: Number(text) || text } : choice;
}

function say(texts, bad = false) {
  byId("states-said").classList.toggle("bad", bad);
  byId("states-said").replaceChildren(...texts.map((text) => el("p", {}, text)));
}
