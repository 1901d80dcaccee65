// A measured band from a file: JCAMP-DX, or two columns of numbers.

import { numberOf, rows, separatorOf, split } from "./columns.js";
import { readJcamp } from "./jcamp_reader.js";

const COMMENT = /^[#%!*/']/;
const NAMED = [[/cm\s*(\^|\*\*)?[-−⁻]\s*[1¹]|1\s*\/\s*cm|wave\s?number/i, "cm-1"], [/\bnm\b|wavelength|nanomet/i, "nm"],
  [/\beV\b|energy/i, "eV"], [/\bTHz\b/i, "THz"]];

// {x, y, unit, guessed, title, notes}: x ascending. Throws an Error that says what is wrong.
export function readMeasured(text, name = "") {
  const found = /^\s*##/m.test(text.slice(0, 2000)) ? readJcamp(text) : readColumns(text);
  const order = [...found.x.keys()].filter((k) => Number.isFinite(found.x[k]) && Number.isFinite(found.y[k]));
  if (order.length < 2) throw new Error("Fewer than two points with two numbers each were found.");
  order.sort((a, b) => found.x[a] - found.x[b]);
  const x = order.map((k) => found.x[k]);
  const y = order.map((k) => found.y[k]);
  if (!(Math.max(...ends(y)) > 0)) throw new Error("No ordinate is above zero: there is nothing to scale.");
  return { ...found, x, y, title: found.title || name, unit: found.unit ?? guess(x), guessed: !found.unit };
}

const ends = (y) => [y.reduce((a, b) => Math.max(a, b)), 0];

function readColumns(text) {
  const all = rows(text);
  const comments = all.filter((row) => COMMENT.test(row));
  const lines = all.filter((row) => !COMMENT.test(row));
  const numeric = lines.filter((row) => /^[\s"]*[-+.]?\d/.test(row));
  if (!numeric.length) throw new Error("No line begins with a number. Two columns are read: axis, intensity.");
  const separator = separatorOf(numeric);
  const [x, y] = [[], []];
  for (const line of numeric) {
    const [a, b] = split(line, separator).map((part) => numberOf(part, separator));
    if (!Number.isFinite(a) || !Number.isFinite(b)) throw new Error(`The line "${line.slice(0, 40)}" does not begin with two numbers.`);
    x.push(a);
    y.push(b);
  }
  const heads = lines.slice(0, lines.indexOf(numeric[0])).flatMap((row) => split(row, separator).slice(0, 1));
  return { x, y, unit: named(heads) ?? named(comments), title: "", notes: [] };
}

function named(texts) {
  for (const text of texts) {
    const found = NAMED.find(([pattern]) => pattern.test(text));
    if (found) return found[1];
  }
  return null;
}

// Without a name: energies are small, wavelengths of visible and UV light hundreds, wavenumbers larger.
function guess(x) {
  const [low, high] = [x[0], x.at(-1)];
  if (high < 60) return "eV";
  return high <= 2500 && low >= 100 ? "nm" : "cm-1";
}
