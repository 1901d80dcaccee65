// The plot: band, lines as sticks, a comb for each mode, a measured band. Draws what it is given.

import { el, svg } from "./dom.js";
import { Linear, nearest, ticks, top } from "./scale.js";
import { fixed, powerOfTen } from "./text.js";
import { UNITS } from "./units.js";

const LEFT = 50;
const RIGHT = 16;
const HEAD = 36; // room for the name of the axis and labels above the highest line
const FOOT = 42;
const COMB = 13;
const LABEL_GAP = 7; // px of free room on each side of a label
const MAX_LABELS = 16;
const RING_FROM = 9; // px; rings on lower sticks would only cover each other

export class Plot {
  constructor(place) {
    this.place = place;
    this.svg = svg("svg", { "aria-hidden": "true", focusable: "false" });
    this.cursor = el("div", { class: "cursor", hidden: true });
    this.brush = el("div", { class: "brush", hidden: true });
    place.append(this.svg, this.brush, this.cursor);
    this.scene = null;
    new ResizeObserver(() => this.scene && this.draw(this.scene)).observe(place);
  }

  draw(scene) {
    this.scene = scene;
    const { width, height } = this.place.getBoundingClientRect();
    if (width < 80 || height < 80) return;
    const { combs } = scene;
    this.foot = height - FOOT - COMB * combs.length - (combs.length ? 6 : 0);
    this.x = new Linear(scene.low, scene.high, LEFT, width - RIGHT);
    this.y = new Linear(0, scene.top * 1.02 || 1, this.foot, HEAD);
    this.stickScale = this.#stickScale(scene);
    this.svg.setAttribute("viewBox", `0 0 ${width} ${height}`);
    this.svg.replaceChildren(
      this.#grid(width, height),
      this.#band(scene.band),
      ...this.#sticks(scene.lines),
      this.#measured(scene.measured),
      this.#combs(combs, width),
      this.#labels(scene.lines, width),
      this.#selection(scene),
    );
  }

  // The strongest stick in view is as high as the band in view.
  #stickScale({ lines, low, high, top: height }) {
    const inView = lines.intensity.filter((_, k) => lines.x[k] >= low && lines.x[k] <= high);
    return (height || 1) / (top(inView) || 1);
  }

  stickTop(intensity) {
    return this.y.px(intensity * this.stickScale);
  }

  inView(x) {
    return x >= this.x.low && x <= this.x.high;
  }

  #grid(width, height) {
    const group = svg("g", { class: "grid" });
    const { unit, xName, yName } = this.scene;
    const across = ticks(this.x.low, this.x.high, (width - LEFT) / 72);
    const base = height - FOOT;
    group.append(svg("path", { d: `M${LEFT} ${base}H${width - RIGHT}`, class: "rule" }));
    for (const value of across.values) {
      const x = this.x.px(value);
      const text = fixed(value, across.decimals);
      group.append(svg("path", { d: `M${x} ${base}v5`, class: "rule" }));
      if (x + 3.4 * text.length > width) continue; // it would be cut off
      group.append(svg("text", { x, y: base + 18, class: "tick middle" }, text));
    }
    const up = ticks(0, this.y.high, this.foot / 60);
    const power = up.values.at(-1) >= 1e4 || up.values.at(-1) < 1e-2 ? Math.floor(Math.log10(this.y.high)) : 0;
    const scaled = ticks(0, this.y.high / 10 ** power, this.foot / 60);
    up.values.forEach((value, k) => {
      const y = this.y.px(value);
      group.append(svg("path", { d: `M${LEFT} ${y}H${width - RIGHT}`, class: k ? "line" : "rule" }),
        svg("text", { x: LEFT - 7, y: y + 4, class: "tick end" }, fixed(value / 10 ** power, scaled.decimals)));
    });
    const [name, yUnit] = yName;
    const scale = [power ? powerOfTen(power) : "", yUnit].filter(Boolean).join(" ");
    group.append(
      svg("text", { x: width - RIGHT, y: height - 6, class: "name end" }, `${xName} / ${UNITS[unit].symbol}`),
      svg("text", { x: 4, y: 14, class: "name" }, scale ? `${name} / ${scale}` : name));
    return group;
  }

  #band(band) {
    const group = svg("g", { class: "band" });
    if (!band) return group;
    const line = path(band.x, band.y, this.x, this.y);
    const [first, last] = [this.x.px(band.x[0]), this.x.px(band.x.at(-1))];
    group.append(svg("path", { class: "area", d: `M${first} ${this.foot}${line.replace("M", "L")}L${last} ${this.foot}Z` }),
      svg("path", { class: "curve", d: line }));
    return group;
  }

  // Cold lines are plain sticks; lines from excited levels are dashed and carry a ring.
  #sticks(lines) {
    let [cold, hot, rings] = ["", "", ""];
    lines.x.forEach((position, k) => {
      if (!this.inView(position)) return;
      const [x, y] = [this.x.px(position).toFixed(1), this.stickTop(lines.intensity[k])];
      if (this.foot - y < 0.4) return;
      if (!lines.hot[k]) {
        cold += `M${x} ${this.foot}V${y.toFixed(1)}`;
      } else {
        hot += `M${x} ${this.foot}V${y.toFixed(1)}`;
        if (this.foot - y > RING_FROM) rings += `M${x} ${(y - 5).toFixed(1)}a2.5 2.5 0 1 0 .01 0`;
      }
    });
    return [svg("path", { class: "cold", d: cold }), svg("path", { class: "hot", d: hot }),
      svg("path", { class: "rings", d: rings })];
  }

  #measured(measured) {
    const inView = measured ? [...measured.x.keys()].filter((k) => this.inView(measured.x[k])) : [];
    const [x, y] = inView.length ? [inView.map((k) => measured.x[k]), inView.map((k) => measured.y[k])] : [[], []];
    return svg("path", { class: "measured", d: inView.length ? path(x, y, this.x, this.y) : "" });
  }

  // Below the foot: where each mode's own progression has its lines, higher teeth for more of it.
  #combs(combs, width) {
    const group = svg("g", { class: "combs" });
    combs.forEach((comb, row) => {
      const y = this.foot + 14 + row * COMB;
      const teeth = comb.teeth.filter((tooth) => this.inView(tooth.x));
      if (!teeth.length) return;
      const strongest = Math.max(...comb.teeth.map((tooth) => tooth.share));
      const at = teeth.map((tooth) => this.x.px(tooth.x));
      const d = teeth.map((tooth, k) => `M${at[k]} ${y}v${-3 - 6 * Math.sqrt(tooth.share / strongest)}`).join("");
      const [left, right] = [Math.min(...at), Math.max(...at)];
      group.append(svg("path", { class: "tooth", d: `${d}M${left} ${y}H${right}` }),
        svg("text", { x: LEFT - 7, y: y + 1, class: "tick end" }, comb.name));
      if (right + 8 < width - 110) {
        group.append(svg("text", { x: right + 7, y: y + 1, class: "tick" }, comb.label));
      }
    });
    return group;
  }

  // Strongest first, those that have room beside the labels already placed.
  #labels(lines, width) {
    const group = svg("g", { class: "labels" });
    const placed = [];
    for (const k of lines.strongest) {
      if (placed.length === MAX_LABELS || lines.intensity[k] < 0.02 * lines.intensity[lines.strongest[0]]) break;
      if (!this.inView(lines.x[k])) continue;
      const half = 3.3 * lines.text[k].length + LABEL_GAP;
      const [x, y] = [this.x.px(lines.x[k]), this.#above(lines, k) - 5];
      if (x - half < LEFT - 8 || x + half > width || this.#bandTop(x - half + LABEL_GAP, x + half - LABEL_GAP) < y - 9) continue;
      const free = placed.every((p) => Math.abs(p.x - x) > p.half + half || Math.abs(p.y - y) > 15);
      const covered = placed.some((p) => Math.abs(p.x - x) < half && p.y < y);
      if (!free || covered) continue;
      placed.push({ x, y, half });
      group.append(svg("text", { x, y, class: lines.hot[k] ? "label hot-label" : "label" }, lines.text[k]));
    }
    return group;
  }

  // The height that is free above a stick: the band may be higher than the stick itself.
  #above(lines, k) {
    const { band } = this.scene;
    const stick = this.stickTop(lines.intensity[k]) - (lines.hot[k] ? 6 : 0);
    return band ? Math.min(stick, this.y.px(band.y[nearest(band.x, lines.x[k])])) : stick;
  }

  // The highest place of the band between two places of the screen.
  #bandTop(left, right) {
    const { band } = this.scene;
    if (!band) return this.foot;
    const [from, to] = [left, right].map((px) => nearest(band.x, this.x.at(px)));
    return this.y.px(top(band.y.slice(from, to + 1)));
  }

  #selection({ lines, selected }) {
    const group = svg("g", { class: "selection" });
    if (selected === null || !this.inView(lines.x[selected])) return group;
    const [x, y] = [this.x.px(lines.x[selected]), this.stickTop(lines.intensity[selected])];
    group.append(svg("path", { d: `M${x} ${this.foot}V${y}` }),
      svg("path", { class: "pointer", d: `M${x} ${this.foot + 2}l-5 8h10z` }));
    return group;
  }
}

function path(xs, ys, x, y) {
  const points = [];
  for (let k = 0; k < xs.length; k += 1) points.push(`${x.px(xs[k]).toFixed(1)} ${y.px(ys[k]).toFixed(1)}`);
  return `M${points.join("L")}`;
}
