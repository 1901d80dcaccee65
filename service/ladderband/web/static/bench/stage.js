// What is on the plot: the last good answers, the line that is selected, what is pointed at.

import { axisOf, combs, fittingRange, firstRange, lineColumns, pointsFor } from "./answers.js";
import { showRange } from "./controls.js";
import { byId, el } from "./dom.js";
import { markSelected, showLines } from "./lines_table.js";
import { measuredIn } from "./measured.js";
import { Plot } from "./plot.js";
import { listen, zoomed } from "./plot_input.js";
import { lineText, bandText, showAccuracy, showReadout, showWarnings, speak } from "./readout.js";
import { value } from "./requests.js";
import { top } from "./scale.js";
import { UNITS, toWavenumber } from "./units.js";

const NAMES = {
  relative: ["relative intensity", ""],
  unit_area: ["intensity, area 1", "per unit of the axis"],
  molar_absorption_coefficient: ["molar absorption coefficient", "L mol⁻¹ cm⁻¹"],
  cross_section: ["cross-section", "cm²"],
  photon_rate: ["photon rate", "s⁻¹ per unit of the axis"],
  radiated_power: ["radiated power", "W per unit of the axis"],
};
const SLACK = 0.05; // an automatic range is a little wider than it needs to be, and stays for a while
const TOO_WIDE = 1.7;

export class Stage {
  selected = null;
  lines = lineColumns(null);
  bandsAnswer = null;
  linesAnswer = null;
  labels = [];
  #auto = null; // cm^-1
  #pointed = null;
  #frame = 0;
  #changed = null;
  #started = false;

  constructor(store) {
    this.store = store;
    this.plot = new Plot(byId("plot"));
    listen(this.plot, {
      point: (x, line) => this.#point({ x, line }),
      leave: () => this.#point(null),
      select: (line) => this.select(line),
      zoom: (low, high, kind) => this.zoom(low, high, kind),
      range: () => this.range(),
      rest: () => this.store.change({}, "commit"),
      fit: () => this.fit(),
    });
    byId("zoom-in").addEventListener("click", () => this.plot.scene && this.zoom(...zoomed(this.plot, 0.6, this.range())));
    byId("zoom-out").addEventListener("click", () => this.plot.scene && this.zoom(...zoomed(this.plot, 1 / 0.6, this.range())));
    byId("zoom-fit").addEventListener("click", () => this.fit());
  }

  get unit() {
    return this.bandsBody?.axis.unit ?? this.store.state.unit;
  }

  // The axis to ask for: what was typed or zoomed to, else what fits.
  axis(state) {
    const width = Number(state.width) || 100;
    if (!state.range) {
      this.#auto ??= firstRange(state);
      return axisOf(...this.#auto, state.unit, width);
    }
    const [start, stop] = state.range.map(value);
    const span = toWavenumber(Number(stop), state.unit) - toWavenumber(Number(start), state.unit);
    return { unit: state.unit, start, stop, points: pointsFor(span, width) };
  }

  // The range that is asked for, or else the one that is drawn.
  range() {
    const asked = (this.store.state.range ?? []).map(value);
    const known = asked.length === 2 && asked.every(Number.isFinite) && this.store.state.unit === this.unit;
    return known ? asked : [this.plot.x.low, this.plot.x.high];
  }

  zoom(low, high, kind = "commit") {
    const text = (x) => String(Number(x.toPrecision(7)));
    this.store.change({ range: [text(low), text(high)] }, kind);
  }

  fit() {
    this.#auto = null;
    this.store.change({ range: null }, "commit");
  }

  forgetRange() {
    this.#auto = null;
  }

  // Remembers when the input changed, for the time from there to the redrawn plot.
  changedAt(time) {
    this.#changed ??= time;
  }

  setBand(answer, body) {
    Object.assign(this, { bandsAnswer: answer, bandsBody: body });
    if (this.linesAnswer) this.#columns();
    this.redraw();
  }

  // True when the band does not fit the automatic range and should be asked for again.
  refit() {
    if (this.store.state.range || !this.bandsAnswer) return false;
    const { axis, line_shape: shape } = this.bandsBody;
    const [low, high] = fittingRange(this.bandsAnswer, this.linesAnswer, Number(shape.fwhm_cm1) || 100, axis.unit);
    const [from, to] = this.#auto;
    const fits = from <= low && to >= high && to - from < TOO_WIDE * (high - low);
    if (fits) return false;
    const slack = SLACK * (high - low);
    this.#auto = [low - slack, high + slack];
    return true;
  }

  // null: there are none that belong to the band
  setLines(answer, body) {
    Object.assign(this, { linesAnswer: answer, linesBody: body });
    this.labels = body?.modes.map((mode) => mode.label) ?? [];
    this.#columns();
    this.redraw();
  }

  #columns() {
    const chosen = this.selected === null ? null : this.lines.text[this.selected];
    this.lines = lineColumns(this.linesAnswer, this.unit);
    const again = this.lines.text.indexOf(chosen);
    this.selected = again < 0 ? null : again; // the same line in the new list
    if (this.#pointed) this.#pointed = { ...this.#pointed, line: null };
  }

  select(line) {
    this.selected = line;
    this.#pointed = null;
    markSelected(line);
    if (line !== null && !this.plot.inView(this.lines.x[line])) {
      const half = (this.plot.x.high - this.plot.x.low) / 2;
      this.zoom(this.lines.x[line] - half, this.lines.x[line] + half);
    }
    showReadout(this, null);
    this.redraw();
    speak(line === null ? "" : this.#spoken(line));
  }

  #spoken(line) {
    const band = this.bandsAnswer ? bandText(this.lines.x[line], this).textContent : "";
    return `${lineText(line, this).textContent} ${band}`;
  }

  #point(pointed) {
    this.#pointed = pointed;
    showReadout(this, pointed);
  }

  redraw() {
    this.#frame ||= requestAnimationFrame(() => {
      this.#frame = 0;
      this.#draw();
    });
  }

  #draw() {
    const { bandsAnswer, linesAnswer, lines, selected, unit } = this;
    if (!bandsAnswer && !linesAnswer) return;
    const x = bandsAnswer?.axis.values;
    const height = bandsAnswer ? top(bandsAnswer.intensity) : top(lines.intensity);
    const measured = measuredIn(unit, height);
    this.plot.draw({
      unit, lines, selected, measured,
      low: x ? x[0] : Math.min(...lines.x) - 100,
      high: x ? x.at(-1) : Math.max(...lines.x) + 100,
      top: Math.max(height, measured ? top(measured.y) : 0),
      band: bandsAnswer && { x, y: bandsAnswer.intensity },
      combs: combs(linesAnswer, this.linesBody, unit),
      xName: this.bandsBody?.process === "photoelectron" && unit !== "nm" ? "ionisation energy" : UNITS[unit].name,
      yName: NAMES[bandsAnswer?.scale ?? "relative"],
    });
    if (bandsAnswer && linesAnswer && !this.#started) {
      this.#started = true;
      performance.mark("first-plot");
    }
    if (x) showRange(x[0], x.at(-1), unit);
    showReadout(this, this.#pointed);
    showAccuracy(this);
    showWarnings([bandsAnswer, linesAnswer]);
    showLines(this);
    showKey(measured, combs(linesAnswer, this.linesBody, unit).length > 0);
  }

  // Called when every answer to the newest input is in.
  complete(then) {
    const began = this.#changed;
    this.#changed = null;
    requestAnimationFrame(() => {
      then();
      if (began !== null) performance.measure("change-to-redraw", { start: began, end: performance.now() });
    });
  }
}

const KEY = [
  ["band", "band"], ["cold", "line"], ["hot", "line from an excited level"], ["comb", "progression of one mode"],
];

function showKey(measured, hasCombs) {
  const entries = KEY.filter(([name]) => name !== "comb" || hasCombs);
  if (measured) entries.push(["measured", "measured"]);
  byId("key").replaceChildren(...entries.map(([name, text]) => el("li", { class: `key-${name}` }, text)));
}
