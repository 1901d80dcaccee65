// Numbers and assignments as people read them.

const RAISED = "⁰¹²³⁴⁵⁶⁷⁸⁹";
const LOWERED = "₀₁₂₃₄₅₆₇₈₉";
const swap = (number, figures) => [...String(number)].map((figure) => figures[figure]).join("");

// Mode number, final quanta raised, initial quanta lowered: the same notation as the plots of the
// service.
export function quantaText(initial, final) {
  const parts = [];
  final.forEach((n, k) => {
    if (n || initial[k]) parts.push(`${k + 1}${swap(n, RAISED)}${swap(initial[k], LOWERED)}`);
  });
  return parts.length ? parts.join(" ") : "0⁰₀";
}

// For ears: "mode 2, ring stretch: 0 to 1".
export function quantaWords(initial, final, labels) {
  const parts = [];
  final.forEach((n, k) => {
    if (n || initial[k]) parts.push(`${labels[k] || `mode ${k + 1}`} ${initial[k]} to ${n}`);
  });
  return parts.length ? parts.join(", ") : "origin";
}

export function fixed(x, decimals) {
  const [whole, rest] = Math.abs(x).toFixed(decimals).split(".");
  const grouped = whole.length > 4 ? whole.replace(/\B(?=(\d{3})+$)/g, "\u202f") : whole;
  return (x < 0 ? "−" : "") + grouped + (rest ? `.${rest}` : "");
}

export function short(x, digits = 3) {
  if (x === 0) return "0";
  const size = Math.abs(x);
  if (size >= 1e-3 && size < 1e5) return String(Number(x.toPrecision(digits))).replace("-", "−");
  const [mantissa, power] = x.toExponential(digits - 1).split("e");
  return `${mantissa.replace("-", "−")}×${powerOfTen(Number(power))}`;
}

export const powerOfTen = (power) => `10${power < 0 ? "⁻" : ""}${swap(Math.abs(power), RAISED)}`;

// "L mol^-1 cm^-1" as it is printed.
export const unitText = (text) =>
  text.replace(/\^(-?)(\d+)/g, (_, sign, figures) => (sign ? "⁻" : "") + swap(figures, RAISED));

// A bound is rounded up, so that what is shown is still a bound.
export function bound(x) {
  if (!(x > 0)) return "0";
  const power = Math.floor(Math.log10(x)) - 1;
  const digits = Math.ceil(x / 10 ** power - 1e-9);
  return short(digits * 10 ** power, 2);
}

export const percent = (share) => `${short(100 * share, 2)} %`;
