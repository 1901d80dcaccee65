// What stands under the plot: the line or the point of the band that is pointed at, and how far the
// numbers on the page can be trusted.

import { byId, el } from "./dom.js";
import { nearest } from "./scale.js";
import { bound, fixed, percent, quantaWords, short, unitText } from "./text.js";
import { UNITS, fromWavenumber, toWavenumber } from "./units.js";

const HINT = "Point at the plot, or step through the lines with the arrow keys. Drag across it to zoom in.";

function positions(x, unit) {
  const wavenumber = toWavenumber(x, unit);
  const others = ["cm-1", "nm", "eV"].filter((name) => name !== unit && (name !== "nm" || wavenumber > 0));
  const text = (name) => `${fixed(fromWavenumber(wavenumber, name), UNITS[name].decimals)} ${UNITS[name].symbol}`;
  return { first: `${fixed(x, UNITS[unit].decimals)} ${UNITS[unit].symbol}`, others: others.map(text).join(", ") };
}

export const boundAt = (bounds, index) => (Array.isArray(bounds) ? bounds[index] : bounds);

const seal = (evidence) => el("span", { class: `seal ${evidence}` }, evidence);

// lines, answer of /v1/lines, labels of the modes
export function lineText(k, { lines, linesAnswer, labels, unit }) {
  const { first, others } = positions(lines.x[k], unit);
  const { accuracy } = linesAnswer;
  const part = el("p", { class: "of-line" },
    el("strong", {}, lines.text[k]), `${quantaWords(lines.v_initial[k], lines.v_final[k], labels)}, at `,
    el("span", { class: "number" }, first), el("small", {}, ` (${others})`),
    `, intensity ${short(lines.intensity[k], 4)}, within ${bound(boundAt(accuracy.bound, k))} `, seal(accuracy.evidence));
  return part;
}

export function bandText(x, { bandsAnswer, unit }) {
  const { values } = bandsAnswer.axis;
  const k = nearest(values, x);
  const { accuracy } = bandsAnswer;
  return el("p", { class: "of-band" }, "Band at ", el("span", { class: "number" }, positions(values[k], unit).first),
    `: ${short(bandsAnswer.intensity[k], 4)}, within ${bound(boundAt(accuracy.bound, k))} `, seal(accuracy.evidence));
}

// What is pointed at (x, line), else the selected line, else how to.
export function showReadout(shown, pointed) {
  const line = pointed?.line ?? shown.selected;
  const x = pointed?.x ?? (line === null ? null : shown.lines.x[line]);
  const parts = [];
  if (line !== null) parts.push(lineText(line, shown));
  if (x !== null && shown.bandsAnswer) parts.push(bandText(x, shown));
  byId("readout").replaceChildren(...(parts.length ? parts : [el("p", { class: "hint" }, HINT)]));
}

export function speak(text) {
  byId("spoken").textContent = text;
}

const largest = (bounds) => (Array.isArray(bounds) ? bounds.reduce((a, b) => Math.max(a, b), 0) : bounds);

// The line that is always there.
export function showAccuracy({ bandsAnswer, linesAnswer }) {
  const parts = [];
  if (bandsAnswer) {
    const { accuracy, intensity_unit: name } = bandsAnswer;
    const unit = name.startsWith("1 ") ? "" : ` ${unitText(name)}`; // "1 (largest value ...)" is no unit
    parts.push(el("span", {}, `Band within ${bound(largest(accuracy.bound))}${unit} `, seal(accuracy.evidence)));
  }
  if (linesAnswer) {
    const { accuracy, completeness } = linesAnswer;
    parts.push(el("span", {}, `${linesAnswer.lines.intensity.length} lines within ${bound(largest(accuracy.bound))} `, seal(accuracy.evidence)),
      el("span", {}, `missing from the list at most ${percent(completeness.missing_at_most)}`));
  }
  byId("accuracy").replaceChildren(...parts);
}

export function showWarnings(answers) {
  const texts = new Set(answers.flatMap((answer) => answer?.warnings ?? []));
  byId("warnings").replaceChildren(...[...texts].map((text) => el("li", {}, text)));
}
