// A measured band laid over the computed one.

import { byId, takesFiles } from "./dom.js";
import { readMeasured } from "./measured_reader.js";
import { fromWavenumber, toWavenumber } from "./units.js";

const KEPT = "ladderband-measured";
const MOST_POINTS = 6000; // more than a screen has; of a longer file every second, third... is drawn
let band = null; // {x, y, unit, title, scale}
let scaled = null; // the same in the unit of the plot

export function bindMeasured(plotPlace, changed) {
  const take = async (files) => files[0] && read(files[0].name, await files[0].text(), changed);
  takesFiles(byId("measured-drop"), take);
  takesFiles(plotPlace, take);
  byId("measured-file").addEventListener("change", (event) => take([...event.target.files]));
  byId("measured-unit").addEventListener("change", (event) => set({ ...band, unit: event.target.value }, changed));
  for (const id of ["measured-slider", "measured-scale"]) {
    byId(id).addEventListener("input", (event) => {
      const scale = Number(event.target.value);
      if (scale > 0) set({ ...band, scale }, changed);
    });
  }
  byId("measured-remove").addEventListener("click", () => {
    byId("measured-file").value = "";
    byId("measured-said").textContent = "The measured band is gone.";
    set(null, changed);
    byId("measured-file").focus();
  });
  restore(changed);
}

function read(name, text, changed) {
  byId("measured").open = true;
  try {
    const found = readMeasured(text, name);
    const notes = [`${found.title || name}: ${found.x.length} points.`, ...found.notes];
    if (found.guessed) notes.push("The file does not name the unit of its axis; it was guessed from the numbers.");
    byId("measured-said").textContent = notes.join(" ");
    byId("measured-said").classList.remove("bad");
    set({ x: found.x, y: found.y, unit: found.unit, title: found.title || name, scale: 1 }, changed);
  } catch (error) {
    byId("measured-said").textContent = `${name} was not read. ${error.message}`;
    byId("measured-said").classList.add("bad");
  }
}

function set(next, changed) {
  band = next;
  scaled = null;
  byId("measured-controls").hidden = !band;
  if (band) {
    byId("measured-unit").value = band.unit;
    byId("measured-slider").value = band.scale;
    if (document.activeElement !== byId("measured-scale")) byId("measured-scale").value = band.scale;
  }
  keep();
  changed();
}

// For a reload of this tab; a large file is simply not kept.
function keep() {
  try {
    if (band) sessionStorage.setItem(KEPT, JSON.stringify(band));
    else sessionStorage.removeItem(KEPT);
  } catch {
    sessionStorage.removeItem(KEPT);
  }
}

function restore(changed) {
  const kept = sessionStorage.getItem(KEPT);
  if (!kept) return;
  set(JSON.parse(kept), changed);
  byId("measured-said").textContent = `${band.title}: ${band.x.length} points.`;
}

// In the unit of the plot, its highest point at scale times the computed maximum; or null.
export function measuredIn(unit, height) {
  if (!band) return null;
  if (scaled?.unit !== unit) scaled = converted(unit);
  const factor = (band.scale * height) / scaled.highest;
  return { x: scaled.x, y: scaled.y.map((y) => y * factor) };
}

function converted(unit) {
  const x = band.x.map((value) => fromWavenumber(toWavenumber(value, band.unit), unit));
  const each = Math.ceil(x.length / MOST_POINTS);
  const order = [...x.keys()].filter((k) => k % each === 0).sort((a, b) => x[a] - x[b]);
  const y = order.map((k) => band.y[k]);
  return { unit, x: order.map((k) => x[k]), y, highest: y.reduce((a, b) => Math.max(a, b)) };
}
