// From the answers of the service to what the page draws and reads out.

import { quantaText } from "./text.js";
import { fromWavenumber } from "./units.js";

const WORTH_A_TOOTH = 0.004;
const WORTH_A_COMB = 0.02; // mean quanta

// Lines in the unit of the axis, with the orders the page walks through.
export function lineColumns(answer, unit) {
  if (!answer) return { x: [], intensity: [], hot: [], text: [], strongest: [], byPosition: [], bounds: null };
  const { position_cm1, intensity, v_initial, v_final } = answer.lines;
  const x = position_cm1.map((position) => fromWavenumber(position, unit));
  const indices = [...x.keys()];
  return {
    x,
    position_cm1,
    intensity,
    v_initial,
    v_final,
    hot: v_initial.map((quanta) => quanta.some((v) => v > 0)),
    text: v_final.map((quanta, k) => quantaText(v_initial[k], quanta)),
    strongest: indices.slice().sort((a, b) => intensity[b] - intensity[a]),
    byPosition: indices.sort((a, b) => x[a] - x[b]),
  };
}

// One comb a mode that takes part, strongest first: 0-0 and whole quanta of this mode alone.
export function combs(answer, body, unit) {
  if (!answer) return [];
  const direction = body.process === "emission" ? -1 : 1;
  return answer.modes
    .map((mode, k) => ({ mode, k }))
    .filter(({ mode }) => mode.mean_quanta > WORTH_A_COMB)
    .sort((a, b) => b.mode.mean_quanta - a.mode.mean_quanta)
    .map(({ mode, k }) => ({
      name: String(k + 1),
      label: body.modes[k].label ?? "",
      teeth: mode.quanta_distribution
        .map((share, n) => ({ share, x: fromWavenumber(body.origin_cm1 + direction * n * body.modes[k].wavenumber_final_cm1, unit) }))
        .filter((tooth, n) => tooth.share > WORTH_A_TOOTH || n === 0),
    }));
}

// The range that shows the band: the lines' own range, cut where a long tail would only be empty.
export function fittingRange(answer, width, unit) {
  const { mean_cm1: mean, standard_deviation_cm1: spread } = answer.moments;
  const wide = 4.2 * Math.hypot(spread, width / 2.35);
  const margin = 2 * width + 60;
  const low = Math.max(answer.range_cm1[0] - margin, mean - wide, unit === "nm" ? 100 : -Infinity);
  const high = Math.min(answer.range_cm1[1] + margin, mean + wide);
  return [low, high];
}

// Before the first answer: roughly where the band will be.
export function firstRange(state) {
  const origin = Number(state.origin) || 0;
  const direction = state.process === "emission" ? -1 : 1;
  const ends = [origin - direction * 1500, origin + direction * 7000].sort((a, b) => a - b);
  return [state.unit === "nm" ? Math.max(ends[0], 200) : ends[0], ends[1]];
}

const MIN_POINTS = 601;
const MAX_POINTS = 6001;

// An axis from one wavenumber to another in the unit asked for, fine enough for the width.
export function axisOf(low, high, unit, width) {
  const ends = [fromWavenumber(low, unit), fromWavenumber(high, unit)].sort((a, b) => a - b);
  return { unit, start: rounded(ends[0]), stop: rounded(ends[1]), points: pointsFor(high - low, width) };
}

export function pointsFor(span_cm1, width) {
  const wanted = Math.ceil((6 * Math.abs(span_cm1)) / width);
  return Math.min(MAX_POINTS, Math.max(MIN_POINTS, Number.isFinite(wanted) ? wanted : MIN_POINTS));
}

const rounded = (x) => Number(x.toPrecision(7));
