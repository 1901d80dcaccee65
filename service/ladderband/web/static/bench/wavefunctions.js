// Levels and wavefunctions of one mode on its two potentials.

import { byId, el, svg } from "./dom.js";
import { wavefunctionsBody } from "./requests.js";
import { Linear, ticks, top } from "./scale.js";
import { bound, fixed } from "./text.js";

const PANEL = 210;
const LEFT = 52;
const FOOT = 38;
const LEVELS = { v_initial_max: 4, v_final_max: 6 };

export const wavesBody = (state) => wavefunctionsBody(state, chosenMode(state), LEVELS);

export const chosenMode = (state) => Math.min(Number(byId("waves-mode").value) || 0, state.modes.length - 1);

export function showModes(state) {
  const select = byId("waves-mode");
  const chosen = chosenMode(state);
  const names = state.modes.map((entry, k) => `${k + 1} ${entry.label}`);
  if (names.join("\n") === [...select.options].map((o) => o.text).join("\n")) return;
  select.replaceChildren(...names.map((name, k) => el("option", { value: k }, name)));
  select.value = String(chosen);
}

let shown = null;

export function bindWaves() {
  new ResizeObserver(() => shown && draw(shown)).observe(byId("waves"));
}

export function showWaves(answer, label) {
  shown = { answer, label };
  draw(shown);
  const { bound: limit, evidence } = answer.accuracy;
  byId("waves-said").textContent = `Each value of a wavefunction within ${bound(Array.isArray(limit) ? top(limit.flat(2)) : limit)}, ${evidence}.`;
}

function draw({ answer, label }) {
  const width = Math.max(240, byId("waves").clientWidth);
  const height = 2 * PANEL + FOOT;
  const drawing = svg("svg", { viewBox: `0 0 ${width} ${height}`, height, class: "waves-plot", role: "img",
    "aria-label": `Levels and wavefunctions of ${label}: final state above, initial state below.` });
  const x = new Linear(answer.coordinate[0], answer.coordinate.at(-1), LEFT, width - 8);
  drawing.append(panel(answer, "final", x, 0), panel(answer, "initial", x, PANEL), foot(x));
  byId("waves").replaceChildren(drawing);
}

function panel(answer, name, x, above) {
  const levels = answer[`level_${name}_cm1`];
  const spacing = levels.length > 1 ? levels[1] - levels[0] : 2 * levels[0];
  const high = levels.at(-1) + 1.1 * spacing;
  const y = new Linear(0, high, above + PANEL - 6, above + 8);
  const group = svg("g", { class: `panel ${name}` });
  const marks = ticks(0, high, 4);
  for (const value of marks.values) {
    group.append(svg("path", { class: "line", d: `M${LEFT} ${y.px(value)}H${x.to}` }),
      svg("text", { class: "tick end", x: LEFT - 7, y: y.px(value) + 4 }, fixed(value, marks.decimals)));
  }
  group.append(svg("path", { class: "potential", d: curve(answer.coordinate, answer[`potential_${name}_cm1`], x, y, high) }));
  const functions = answer[`wavefunction_${name}`];
  const largest = Math.max(...functions.map((row) => top(row.map(Math.abs))));
  functions.forEach((row, v) => {
    const d = curve(answer.coordinate, row.map((psi) => levels[v] + (0.55 * spacing * psi) / largest), x, y, Infinity);
    group.append(svg("path", { class: "level", d: `M${LEFT} ${y.px(levels[v])}H${x.to}` }), svg("path", { class: "lobe", d: `${d}V${y.px(levels[v])}H${LEFT}Z` }), svg("path", { class: "wave", d }));
  });
  group.append(svg("text", { class: "panel-name end", x: x.to - 4, y: above + 22 }, `${name} state`));
  return group;
}

function curve(xs, ys, x, y, limit) {
  let [d, on] = ["", false];
  xs.forEach((value, k) => {
    if (ys[k] > limit) {
      on = false;
      return;
    }
    d += `${on ? "L" : "M"}${x.px(value).toFixed(1)} ${y.px(ys[k]).toFixed(1)}`;
    on = true;
  });
  return d;
}

function foot(x) {
  const group = svg("g");
  const base = 2 * PANEL - 4;
  group.append(svg("path", { class: "rule", d: `M${LEFT} ${base}H${x.to}` }));
  const marks = ticks(x.low, x.high, 8);
  for (const value of marks.values) {
    group.append(svg("text", { class: "tick middle", x: x.px(value), y: base + 17 }, fixed(value, marks.decimals)));
  }
  group.append(svg("text", { class: "name end", x: x.to, y: base + 36 }, "coordinate q′ (final state)"),
    svg("text", { class: "name", x: 0, y: base + 36 }, "energy / cm⁻¹"));
  return group;
}
