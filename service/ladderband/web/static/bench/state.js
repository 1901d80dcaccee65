// The state of the page: what was typed, as texts, so that the service itself judges it.
//
// It travels in the address (after #), so a link, a reload and the browser's back button all bring
// it back. Nothing else of the page needs to be kept.

export const MODE_MEMBERS = ["label", "initial", "final", "shift"];

export const TEXTS = [
  "process", "origin", "temperature", "shift", "width", "shape", "lorentzian", "unit", "scale",
  "moment", "missing",
];

const mode = (label, initial, final, shift) => ({ label, initial, final, shift });

// Invented. Warm enough that hot lines of the two slow modes stand left of the origin.
export function example() {
  return {
    process: "absorption",
    origin: "22000",
    temperature: "300",
    shift: "huang_rhys",
    modes: [
      mode("ring stretch", "1480", "1410", "0.65"),
      mode("ring breathing", "820", "775", "0.5"),
      mode("in-plane bend", "430", "395", "0.35"),
      mode("torsion", "190", "165", "0.3"),
    ],
    mixing: null,
    width: "120",
    shape: "gaussian",
    lorentzian: "60",
    unit: "cm-1",
    range: null,
    scale: "relative",
    moment: "",
    missing: "0.02",
  };
}

export const isExample = (state) =>
  JSON.stringify(state.modes) === JSON.stringify(example().modes) && !state.mixing;

export function encode(state) {
  const bytes = new TextEncoder().encode(JSON.stringify(state));
  let binary = "";
  for (const byte of bytes) binary += String.fromCharCode(byte);
  return btoa(binary).replaceAll("+", "-").replaceAll("/", "_").replaceAll("=", "");
}

// null when the text is no state; what is missing in it is taken from the example.
export function decode(text) {
  try {
    const binary = atob(text.replaceAll("-", "+").replaceAll("_", "/"));
    const bytes = Uint8Array.from(binary, (char) => char.charCodeAt(0));
    return checked(JSON.parse(new TextDecoder().decode(bytes)));
  } catch {
    return null;
  }
}

function checked(given) {
  if (!given.modes.length) throw new Error("A transition has at least one mode.");
  const state = example();
  for (const name of TEXTS) if (typeof given[name] === "string") state[name] = given[name];
  const modes = given.modes.map((entry) =>
    Object.fromEntries(MODE_MEMBERS.map((name) => [name, String(entry[name] ?? "")])));
  const range = Array.isArray(given.range) ? given.range.slice(0, 2).map(String) : null;
  const mixing = Array.isArray(given.mixing) ? given.mixing : null;
  return { ...state, modes, range, mixing };
}

// Holds the state and tells listeners what changed it.
export class Store {
  #listeners = [];

  constructor(state) {
    this.state = state;
  }

  listen(listener) {
    this.#listeners.push(listener);
  }

  // kind: "slide" while something is being dragged or typed, "commit" for one step of the history,
  // "view" for what the plot chose by itself, "load" for a state that came as a whole.
  change(change, kind) {
    this.state = { ...this.state, ...change };
    for (const listener of this.#listeners) listener(this.state, kind);
  }

  changeMode(index, change, kind) {
    const modes = this.state.modes.map((m, k) => (k === index ? { ...m, ...change } : m));
    this.change({ modes }, kind);
  }
}

// Displacement and Huang-Rhys factor: S = Delta^2 / 2. A factor has no sign.
export function convertedShifts(modes, from, to) {
  if (from === to) return modes;
  const convert = to === "displacement" ? (s) => Math.sqrt(2 * s) : (d) => (d * d) / 2;
  return modes.map((entry) => {
    const value = convert(Number(entry.shift));
    const known = entry.shift.trim() !== "" && Number.isFinite(value);
    return known ? { ...entry, shift: String(Number(value.toPrecision(15))) } : entry;
  });
}

export function withMode(state) {
  const n = state.modes.length;
  const grown = state.mixing?.map((row) => [...row, 0]);
  const mixing = grown ? [...grown, [...Array(n).fill(0), 1]] : null;
  return { modes: [...state.modes, mode("", "1000", "1000", "0")], mixing };
}

export function withoutMode(state, index) {
  const others = (_, k) => k !== index;
  const mixing = state.mixing?.filter(others).map((row) => row.filter(others)) ?? null;
  return { modes: state.modes.filter(others), mixing };
}
