// The strongest lines as a table: what the plot shows, for reading.

import { byId, el } from "./dom.js";
import { boundAt } from "./readout.js";
import { bound, fixed, short } from "./text.js";
import { UNITS } from "./units.js";

const ROWS = 25;

export function bindLines(onSelect) {
  byId("lines").addEventListener("click", (event) => {
    const button = event.target.closest("[data-line]");
    if (button) onSelect(Number(button.dataset.line));
  });
}

export function showLines({ lines, linesAnswer, unit, selected }) {
  const body = byId("lines").tBodies[0];
  const focused = document.activeElement?.dataset?.line;
  document.querySelector(".axis-unit").textContent = UNITS[unit].symbol;
  body.replaceChildren(...lines.strongest.slice(0, ROWS).map((k) => row(k, lines, linesAnswer, unit, selected)));
  if (focused) body.querySelector(`[data-line="${focused}"]`)?.focus();
}

function row(k, lines, answer, unit, selected) {
  const choose = el("button", { type: "button", class: "pick", "data-line": k, "aria-pressed": String(k === selected) }, lines.text[k]);
  return el("tr", { class: lines.hot[k] ? "hot-row" : "" },
    el("th", { scope: "row" }, choose, lines.hot[k] ? el("small", {}, " hot") : null),
    el("td", {}, fixed(lines.x[k], UNITS[unit].decimals)),
    el("td", {}, short(lines.intensity[k], 4)),
    el("td", {}, bound(boundAt(answer.accuracy.bound, k))));
}

export function markSelected(selected) {
  for (const button of document.querySelectorAll("#lines [data-line]")) {
    button.setAttribute("aria-pressed", String(Number(button.dataset.line) === selected));
  }
}
