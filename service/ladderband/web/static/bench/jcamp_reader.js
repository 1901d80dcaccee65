// JCAMP-DX 4.24: spectra as (X++(Y..Y)) in AFFN, PAC, SQZ, DIF and DUP form, and as (XY..XY).
// Encoding after McDonald and Wilks, Appl. Spectrosc. 42, 151 (1988).

const UNITS = [
  [/^1\s*\/\s*CM$|^CM\s*(\^)?-1$|WAVENUMBER/i, "cm-1"], [/NANOMET|^NM$/i, "nm"], [/MICROMET/i, "um"],
  [/ELECTRON\s*VOLT|^EV$/i, "eV"], [/TERAHERTZ|^THZ$/i, "THz"],
];
const DATA = ["XYDATA", "XYPOINTS"];
const SQZ = "@ABCDEFGHI"; // @ is 0, A to I are 1 to 9, a to i are -1 to -9
const SQZ_MINUS = "abcdefghi";
const DIF = "%JKLMNOPQR";
const DIF_MINUS = "jklmnopqr";
const DUP = "STUVWXYZs"; // S is 1 ... Z is 8, s is 9
// an exponent always has a sign: "100E23" is the abscissa 100 and the SQZ ordinate 523
const TOKEN = /(?:[@A-Ia-i%J-Rj-rS-Zs+-]?(?:\d+\.?\d*|\.\d+)(?:[Ee][+-]\d{1,3})?|[@A-Ia-i%J-Rj-rS-Zs?])/g;

// {x, y, unit, title, notes}; throws an Error whose message says what is wrong.
export function readJcamp(text) {
  const block = dataBlock(labels(text));
  const head = Object.fromEntries(block.slice(0, -1));
  const [form, data] = block.at(-1);
  const notes = [];
  const asPairs = form !== "XYDATA" || /^\s*\(XY\.\.XY\)/i.test(data);
  const { x, y } = asPairs ? pairs(data, head) : equidistant(data, head, notes);
  if (!x.length) throw new Error("The file holds no points.");
  if (/TRANSMI/i.test(head.YUNITS ?? "")) notes.push("It is a transmission: its bands point down.");
  const unit = UNITS.find(([pattern]) => pattern.test((head.XUNITS ?? "").trim()))?.[1] ?? null;
  const scale = unit === "um" ? 1000 : 1;
  return { x: x.map((v) => v * scale), y, unit: unit === "um" ? "nm" : unit, title: head.TITLE ?? "", notes };
}

// Labelled records in order; names without blanks, dashes, slashes and underscores; comments removed.
function labels(text) {
  const records = [];
  for (const line of text.split(/\r\n|\r|\n/)) {
    const clean = line.replace(/\$\$.*$/, "");
    const found = /^\s*##([^=]*)=(.*)$/.exec(clean);
    if (found) records.push([found[1].toUpperCase().replace(/[\s\-/_]/g, ""), found[2].trim()]);
    else if (records.length) records.at(-1)[1] += `\n${clean}`;
  }
  return records;
}

// The first block with data; a compound file holds several between TITLE and END.
function dataBlock(records) {
  const at = records.findIndex(([name]) => DATA.includes(name));
  if (at < 0) throw new Error("This is no JCAMP-DX spectrum: no XYDATA or XYPOINTS in it.");
  const start = records.slice(0, at).map(([name]) => name).lastIndexOf("TITLE");
  return records.slice(Math.max(0, start), at + 1);
}

function number(head, name, otherwise) {
  if (head[name] === undefined && otherwise !== undefined) return otherwise;
  const value = Number((head[name] ?? "").replace(",", "."));
  if (!Number.isFinite(value)) throw new Error(`##${name}= is missing or is no number.`);
  return value;
}

function equidistant(data, head, notes) {
  const [form, ...lines] = data.split("\n");
  if (!/\(X\+\+\(Y\.\.Y\)\)/i.test(form.replace(/\s/g, ""))) throw new Error(`XYDATA of the form ${form.trim()} is not read, only (X++(Y..Y)).`);
  const y = ordinates(lines.filter((line) => line.trim()));
  const count = number(head, "NPOINTS", y.length);
  if (count !== y.length) throw new Error(`The file announces ${count} points and holds ${y.length}. It may be cut off.`);
  const [first, last] = [number(head, "FIRSTX"), number(head, "LASTX")];
  const factor = number(head, "YFACTOR", 1);
  const step = y.length > 1 ? (last - first) / (y.length - 1) : 0;
  const said = number(head, "DELTAX", step);
  if (Math.abs(said - step) > 0.01 * Math.abs(step)) notes.push("Its DELTAX does not fit its ends; the ends were used.");
  return { x: y.map((_, k) => first + k * step), y: y.map((v) => v * factor) };
}

function ordinates(lines) {
  const y = [];
  let check = null; // after a line of differences the next one repeats its last value
  for (const line of lines) {
    const values = lineValues(line, y);
    if (check !== null) {
      if (Math.abs(values.list[0] - check) > 1e-6 * Math.max(1, Math.abs(check))) {
        throw new Error(`The check value of the line "${line.slice(0, 20)}..." is ${values.list[0]}, not ${check}. The file is damaged.`);
      }
      values.list.shift();
    }
    y.push(...values.list);
    check = values.endsInDifference ? y.at(-1) : null;
  }
  return y;
}

// The ordinates of one line; its first number is the abscissa.
function lineValues(line, before) {
  const tokens = line.match(TOKEN) ?? [];
  if (!/^[+-]?[\d.]/.test(tokens[0] ?? "") || line.replace(TOKEN, "").replace(/[\s,;]/g, "")) {
    throw new Error(`The line "${line.trim().slice(0, 20)}" is no line of ordinates.`);
  }
  const list = [];
  let [kind, step] = ["", 0];
  for (const token of tokens.slice(1)) {
    const [form, value] = decoded(token);
    if (form === "DUP") {
      if (!list.length) throw new Error(`A repetition without a value before it, in the line "${line.slice(0, 20)}".`);
      for (let k = 1; k < value; k += 1) list.push(kind === "DIF" ? list.at(-1) + step : list.at(-1));
      continue;
    }
    [kind, step] = [form, value];
    list.push(form === "DIF" ? (list.length ? list.at(-1) : before.at(-1)) + value : value);
  }
  return { list, endsInDifference: kind === "DIF" };
}

function decoded(token) {
  if (token === "?") return ["VALUE", NaN];
  const rest = token.slice(1);
  const digit = (set, from) => set.indexOf(token[0]) + from;
  const joined = (lead, sign) => sign * Number(`${lead}${rest}`);
  if (SQZ.includes(token[0])) return ["VALUE", joined(digit(SQZ, 0), 1)];
  if (SQZ_MINUS.includes(token[0])) return ["VALUE", joined(digit(SQZ_MINUS, 1), -1)];
  if (DIF.includes(token[0])) return ["DIF", joined(digit(DIF, 0), 1)];
  if (DIF_MINUS.includes(token[0])) return ["DIF", joined(digit(DIF_MINUS, 1), -1)];
  if (DUP.includes(token[0])) return ["DUP", joined(digit(DUP, 1), 1)];
  const value = Number(token);
  if (Number.isNaN(value)) throw new Error(`"${token}" is no number of a JCAMP-DX file.`);
  return ["VALUE", value];
}

function pairs(data, head) {
  const numbers = data.split("\n").slice(1).join(" ").split(/[\s,;]+/).filter(Boolean).map(Number);
  if (numbers.some(Number.isNaN) || numbers.length % 2) throw new Error("The points are not pairs of numbers.");
  const [fx, fy] = [number(head, "XFACTOR", 1), number(head, "YFACTOR", 1)];
  const x = numbers.filter((_, k) => k % 2 === 0).map((v) => v * fx);
  return { x, y: numbers.filter((_, k) => k % 2 === 1).map((v) => v * fy) };
}
