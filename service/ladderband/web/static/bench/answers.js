// From the answers of the service to what the page draws and reads out.

import { quantaText } from "./text.js";
import { fromWavenumber } from "./units.js";

const WORTH_A_TOOTH = 0.004;
const WORTH_A_COMB = 0.02; // mean quanta
const MAX_COMBS = 6;

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

// One comb for each of the modes that take part most: 0-0 and whole quanta of this mode alone.
export function combs(answer, body, unit) {
  if (!answer) return [];
  const direction = body.process === "emission" ? -1 : 1;
  return answer.modes
    .map((mode, k) => ({ mode, k }))
    .filter(({ mode }) => mode.mean_quanta > WORTH_A_COMB)
    .sort((a, b) => b.mode.mean_quanta - a.mode.mean_quanta)
    .slice(0, MAX_COMBS)
    .sort((a, b) => a.k - b.k)
    .map(({ mode, k }) => ({
      name: String(k + 1),
      label: body.modes[k].label ?? "",
      teeth: mode.quanta_distribution
        .map((share, n) => ({ share, x: fromWavenumber((body.origin_cm1 ?? 0) + direction * n * body.modes[k].wavenumber_final_cm1, unit) }))
        .filter((tooth, n) => tooth.share > WORTH_A_TOOTH || n === 0),
    }));
}

const SEEN = 0.004; // of the strongest line: what is higher can be seen on the plot
const NEARLY_ALL = 0.03; // missing at most: with more the list does not tell where the band ends

// The range that shows the band, cm^-1: where lines can be seen, or by the moments of the band.
export function fittingRange(answer, linesAnswer, width, unit) {
  const complete = linesAnswer?.completeness.missing_at_most < NEARLY_ALL;
  const range = complete ? seenLines(linesAnswer) : byMoments(answer, width);
  const margin = 1.6 * width + 0.03 * (range[1] - range[0]);
  return [Math.max(range[0] - margin, unit === "nm" ? 100 : -Infinity), range[1] + margin];
}

function seenLines({ lines }) {
  const floor = SEEN * lines.intensity.reduce((a, b) => Math.max(a, b));
  const seen = lines.position_cm1.filter((_, k) => lines.intensity[k] >= floor);
  return [seen.reduce((a, b) => Math.min(a, b)), seen.reduce((a, b) => Math.max(a, b))];
}

function byMoments(answer, width) {
  const { mean_cm1: mean, standard_deviation_cm1: spread } = answer.moments;
  const wide = 3.2 * Math.hypot(spread, width / 2.35);
  return [Math.max(answer.range_cm1[0], mean - wide), Math.min(answer.range_cm1[1], mean + wide)];
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
