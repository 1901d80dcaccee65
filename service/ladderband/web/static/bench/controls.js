// Fields and sliders of the transition: each writes its text into the state.

import { byId } from "./dom.js";
import { showText } from "./field_text.js";
import { isAbsolute } from "./requests.js";
import { convertedShifts, isExample } from "./state.js";
import { UNITS, fromWavenumber, toWavenumber } from "./units.js";

const fields = () => document.querySelectorAll("[data-member]");
const sliders = () => document.querySelectorAll("[data-slides]");

export function bindControls(store) {
  for (const field of fields()) {
    const { member } = field.dataset;
    if (field.tagName === "SELECT") {
      field.addEventListener("change", () => store.change(choice(store.state, member, field.value), "commit"));
    } else {
      field.addEventListener("input", () => store.change({ [member]: field.value }, "slide"));
      field.addEventListener("change", () => store.change({}, "commit"));
    }
  }
  for (const slider of sliders()) {
    slider.addEventListener("input", () => store.change({ [slider.dataset.slides]: slid(slider) }, "slide"));
    slider.addEventListener("change", () => store.change({}, "commit"));
  }
  for (const id of ["range-start", "range-stop"]) {
    byId(id).addEventListener("change", () =>
      store.change({ range: [byId("range-start").value, byId("range-stop").value] }, "commit"));
  }
}

// A choice, and what follows from it.
function choice(state, member, value) {
  if (member === "shift") {
    return { shift: value, modes: convertedShifts(state.modes, state.shift, value) };
  }
  if (member === "unit" && state.range) {
    const moved = state.range.map((end) => fromWavenumber(toWavenumber(Number(end), state.unit), value));
    return { unit: value, range: moved.sort((a, b) => a - b).map((end) => String(Number(end.toPrecision(8)))) };
  }
  return { [member]: value };
}

// Some sliders move in equal ratios: data-log holds their ends.
function slid(slider) {
  if (!slider.dataset.log) return slider.value;
  const [low, high] = slider.dataset.log.split(" ").map(Number);
  return String(Number((low * (high / low) ** (slider.value / slider.max)).toPrecision(3)));
}

function place(slider, text) {
  const value = Number(text);
  if (!Number.isFinite(value) || text === slid(slider)) return;
  if (!slider.dataset.log) {
    slider.value = value;
  } else {
    const [low, high] = slider.dataset.log.split(" ").map(Number);
    slider.value = (slider.max * Math.log(Math.max(value, low) / low)) / Math.log(high / low);
  }
}

export function showControls(state) {
  for (const field of fields()) {
    if (field.tagName === "SELECT") field.value = state[field.dataset.member];
    else showText(field, state[field.dataset.member]);
  }
  for (const slider of sliders()) {
    place(slider, state[slider.dataset.slides]);
    slider.setAttribute("aria-valuetext", state[slider.dataset.slides]);
  }
  byId("lorentzian-field").hidden = state.shape !== "voigt";
  byId("caution").hidden = !isAbsolute(state.scale);
  byId("invented").hidden = !isExample(state);
  byId("shift-head").textContent = state.shift === "displacement" ? "Δ" : "S";
  byId("range-unit").textContent = UNITS[state.unit].symbol;
  showMixing(state);
}

function showMixing({ mixing }) {
  byId("mixing").hidden = !mixing;
  if (!mixing) return;
  byId("mixing-text").textContent = `The modes mix by a matrix of ${mixing.length} × ${mixing.length}. `;
}

export function showRange(low, high, unit) {
  const text = (x) => String(Number(x.toFixed(UNITS[unit].decimals)));
  for (const [id, end] of [["range-start", low], ["range-stop", high]]) {
    if (document.activeElement !== byId(id)) byId(id).value = text(end);
  }
}
