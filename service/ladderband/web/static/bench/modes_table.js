// The table of modes: cells, a slider and a small drawing of the two ladders for each mode.

import { byId, el, svg } from "./dom.js";
import { showText } from "./field_text.js";
import { pastedBlock } from "./mode_text.js";
import { MODE_MEMBERS, withMode, withoutMode } from "./state.js";

const CELLS = {
  label: { pointer: "label", name: "label" },
  initial: { pointer: "wavenumber_initial_cm1", name: "initial wavenumber" },
  final: { pointer: "wavenumber_final_cm1", name: "final wavenumber" },
  shift: { pointer: "shift", name: "shift" },
};
const SLIDERS = { huang_rhys: [0, 4, 0.01], displacement: [-4, 4, 0.01] };

export function bindModes(store, onWaves) {
  const table = document.querySelector("table.modes");
  byId("add-mode").addEventListener("click", () => {
    store.change(withMode(store.state), "commit");
    table.tBodies[table.tBodies.length - 1].querySelector("input").focus();
  });
  byId("mixing-drop").addEventListener("click", () => {
    store.change({ mixing: null }, "commit");
    byId("add-mode").focus();
  });
  table.addEventListener("paste", (event) => paste(event, store));
  return (state) => show(table, state, store, onWaves);
}

function show(table, state, store, onWaves) {
  while (table.tBodies.length > state.modes.length) table.tBodies[table.tBodies.length - 1].remove();
  while (table.tBodies.length < state.modes.length) table.append(group(table.tBodies.length, store, onWaves));
  state.modes.forEach((entry, index) => {
    const body = table.tBodies[index];
    for (const name of MODE_MEMBERS) {
      showText(body.querySelector(`[data-cell=${name}]`), entry[name]);
    }
    slide(body.querySelector("[type=range]"), entry.shift, state.shift);
    body.querySelector(".ladders").replaceChildren(ladders(entry, state.shift));
    body.querySelector(".remove").disabled = state.modes.length === 1;
  });
}

function slide(slider, text, kind) {
  const [low, high, step] = SLIDERS[kind];
  const value = Number(text);
  if (document.activeElement !== slider) {
    const size = Math.abs(value) || 0;
    const end = size > high ? Math.ceil(1.5 * size) : high;
    Object.assign(slider, { min: low < 0 ? -end : 0, max: end, step });
  }
  if (Number.isFinite(value) && slider.value !== text) slider.value = value;
  slider.setAttribute("aria-valuetext", text);
}

function group(index, store, onWaves) {
  const cells = MODE_MEMBERS.map((name) => el("td", {}, cell(index, name, store)));
  const slider = el("input", {
    type: "range",
    "aria-label": `Mode ${index + 1}, shift, slider`,
    oninput: (event) => store.changeMode(index, { shift: event.target.value }, "slide"),
    onchange: () => store.change({}, "commit"),
  });
  const waves = el("button", {
    type: "button", class: "ladders", "aria-label": `Mode ${index + 1}: show levels and wavefunctions`,
    title: "Levels and wavefunctions", onclick: () => onWaves(index),
  });
  return el("tbody", { "data-mode": index },
    el("tr", {}, ...cells, el("td", {}, removeButton(index, store))),
    el("tr", { class: "under" }, el("td", { colspan: 5 },
      el("div", { class: "mode-under" }, el("span", { class: "mode-number", "aria-hidden": "true" }, String(index + 1)), slider, waves),
      el("div", { class: "mode-wrong" }))));
}

function cell(index, name, store) {
  const { pointer, name: spoken } = CELLS[name];
  return el("input", {
    "data-cell": name,
    "data-pointer": `/modes/${index}/${pointer}`,
    "data-name": `Mode ${index + 1}, ${spoken}`,
    "aria-label": `Mode ${index + 1}, ${spoken}`,
    autocomplete: "off",
    spellcheck: "false",
    inputmode: name === "label" ? "text" : "decimal",
    oninput: (event) => store.changeMode(index, { [name]: event.target.value }, "slide"),
    onchange: () => store.change({}, "commit"),
  });
}

function removeButton(index, store) {
  return el("button", {
    type: "button", class: "remove", "aria-label": `Remove mode ${index + 1}`,
    onclick: () => {
      store.change(withoutMode(store.state, index), "commit");
      const left = document.querySelectorAll(".remove:not(:disabled)");
      (left[Math.min(index, left.length - 1)] ?? byId("add-mode")).focus();
    },
  }, "×");
}

// Two ladders: rungs as far apart as the wavenumbers say, the upper one moved by the shift.
function ladders(entry, kind) {
  const [initial, final, shift] = [entry.initial, entry.final, entry.shift].map(Number);
  const drawing = svg("svg", { viewBox: "0 0 64 36", width: 64, height: 36, "aria-hidden": "true" });
  if (!(initial > 0 && final > 0 && Number.isFinite(shift))) return drawing;
  const moved = -18 * Math.tanh((kind === "displacement" ? shift : Math.sqrt(2 * Math.max(shift, 0))) / 2);
  const gap = 5 / Math.max(initial, final);
  const rungs = (x, y, step) => [0, 1, 2].map((k) => `M${x - 8} ${y - k * step}h16`).join("");
  drawing.append(svg("path", { class: "rungs initial", d: rungs(36, 33, gap * initial) }),
    svg("path", { class: "rungs final", d: rungs(36 + moved, 14, gap * final) }));
  return drawing;
}

// A block from a spreadsheet goes into the cells right of and below the one it is pasted into.
function paste(event, store) {
  const block = pastedBlock(event.clipboardData.getData("text/plain"));
  const input = event.target.closest("[data-cell]");
  if (!block || !input) return;
  event.preventDefault();
  const first = MODE_MEMBERS.indexOf(input.dataset.cell);
  const row = Number(input.closest("tbody").dataset.mode);
  let state = store.state;
  while (state.modes.length < row + block.length) state = { ...state, ...withMode(state) };
  const modes = state.modes.map((entry, k) => {
    const given = block[k - row] ?? [];
    const changes = given.slice(0, MODE_MEMBERS.length - first).map((text, j) => [MODE_MEMBERS[first + j], text]);
    return { ...entry, ...Object.fromEntries(changes) };
  });
  store.change({ modes, mixing: state.mixing }, "commit");
}
