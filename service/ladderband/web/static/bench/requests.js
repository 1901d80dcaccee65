// From the state to the bodies that are sent. What is no number goes out as it was typed, and the
// service says what is wrong with it.

const MAX_LINES = 3000; // more would not be told apart, and take longer to draw
const ABSOLUTE = {
  molar_absorption_coefficient: "absorption", cross_section: "absorption",
  photon_rate: "emission", radiated_power: "emission",
};

export const isAbsolute = (scale) => scale in ABSOLUTE;

export function value(text) {
  const trimmed = text.trim();
  if (trimmed === "") return undefined; // left out: JSON.stringify drops it
  const number = Number(trimmed);
  return Number.isFinite(number) ? number : trimmed;
}

export function modeBody(entry, shift) {
  return {
    label: entry.label || undefined,
    wavenumber_initial_cm1: value(entry.initial),
    wavenumber_final_cm1: value(entry.final),
    [shift]: value(entry.shift),
  };
}

export function transitionBody(state) {
  const body = {
    process: state.process,
    origin_cm1: value(state.origin),
    temperature_k: value(state.temperature),
    modes: state.modes.map((entry) => modeBody(entry, state.shift)),
  };
  if (state.mixing) {
    // a matrix that lost a row is repaired, with a warning, instead of refused
    Object.assign(body, { mixing: state.mixing, mixing_repair: "nearest-orthogonal" });
  }
  if (state.moment.trim()) body.moment = { constant_debye: [0, 0, value(state.moment)] };
  return body;
}

// What may be missing is a share of the intensity; without one: the best list within the limit.
export function linesBody(state, missing) {
  return { ...transitionBody(state), tolerance: missing, max_lines: MAX_LINES };
}

// The list is as long as it may be: a finer enumeration would list the same lines.
export const isFull = (answer) => answer.enumerated_lines >= MAX_LINES;

export function bandsBody(state, axis) {
  const line_shape = { kind: state.shape, fwhm_cm1: value(state.width) };
  if (state.shape === "voigt") line_shape.fwhm_lorentzian_cm1 = value(state.lorentzian);
  return { ...transitionBody(state), axis, line_shape, scale: state.scale };
}

export function wavefunctionsBody(state, index, levels) {
  return {
    mode: modeBody(state.modes[index], state.shift), ...levels, points: 241,
  };
}
