// Modes as text: blocks pasted from a spreadsheet, tables as CSV.

import { numberOf, rows, separatorOf, split } from "./columns.js";

// Rows of cells, or null when the text is a single cell.
export function pastedBlock(text) {
  const lines = rows(text);
  const separator = separatorOf(lines);
  if (lines.length < 2 && !text.includes("\t")) return null;
  return lines.map((line) => split(line, separator || "\t").map((part) => tidy(part, separator)));
}

// A decimal comma becomes a point where the cell is a number otherwise.
function tidy(text, separator) {
  return separator !== "," && /^-?\d+,\d+$/.test(text) ? text.replace(",", ".") : text;
}

const HEADS = { label: /label|mode|name/i, initial: /initial/i, final: /final/i, shift: /huang|shift|displac|^s$|^d$|delta|Δ/i };

// {modes, shift?} from a table; throws an Error whose message says what is wrong.
export function modeTable(text) {
  const lines = rows(text).filter((line) => !line.startsWith("#"));
  if (!lines.length) throw new Error("There is nothing to read. Paste one mode a line.");
  const separator = separatorOf(lines);
  const cells = lines.map((line) => split(line, separator));
  const isHead = cells[0].slice(1).every((part) => Number.isNaN(numberOf(part, separator)));
  const order = isHead ? headed(cells.shift()) : counted(cells[0], separator);
  if (!cells.length) throw new Error("There is a heading but no mode below it.");
  return { modes: cells.map((row, k) => modeOf(row, order, separator, k + 1)), shift: order.kind };
}

function headed(head) {
  const order = {};
  for (const [name, pattern] of Object.entries(HEADS)) {
    const index = head.findIndex((part, k) => pattern.test(part) && !Object.values(order).includes(k));
    if (index >= 0) order[name] = index;
  }
  for (const name of ["initial", "final", "shift"]) {
    if (!(name in order)) throw new Error(`No column of the heading is named "${name}". Give: label, initial, final, shift.`);
  }
  const word = head[order.shift];
  if (/displac|delta|Δ/i.test(word)) order.kind = "displacement";
  if (/huang|^s$/i.test(word)) order.kind = "huang_rhys";
  return order;
}

function counted(row, separator) {
  const named = Number.isNaN(numberOf(row[0], separator));
  const need = named ? 4 : 3;
  if (row.length !== need) {
    throw new Error(`The first line has ${row.length} columns. Give 3 numbers (initial, final, shift), or a label and 3 numbers.`);
  }
  return named ? { label: 0, initial: 1, final: 2, shift: 3 } : { initial: 0, final: 1, shift: 2 };
}

function modeOf(row, order, separator, line) {
  const entry = { label: order.label === undefined ? "" : (row[order.label] ?? "") };
  for (const name of ["initial", "final", "shift"]) {
    const value = numberOf(row[order[name]] ?? "", separator);
    if (Number.isNaN(value)) {
      throw new Error(`Mode ${line}: "${row[order[name]] ?? ""}" is no number for ${name}. Decimals take a point, or a comma when tabs or semicolons part the columns.`);
    }
    entry[name] = String(value);
  }
  return entry;
}
