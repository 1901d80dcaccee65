// Text in columns: finds out what parts the columns and which mark stands before the decimals.

const SEPARATORS = ["\t", ";", ","];

export function rows(text) {
  return text.replace(/^\uFEFF/, "").split(/\r\n|\r|\n/).map((row) => row.trim()).filter((row) => row !== "");
}

// "" stands for runs of blanks.
export function separatorOf(lines) {
  const counts = (mark) => lines.map((line) => line.split(mark).length - 1);
  const found = SEPARATORS.find((mark) => {
    const count = counts(mark);
    return count[0] > 0 && count.every((n) => n === count[0]);
  });
  // "400,5 0,12": the comma belongs to the numbers when blanks part the columns as well
  if (found === "," && lines.every((line) => /\d,\d+\s+-?\d/.test(line))) return "";
  return found ?? "";
}

export function split(line, separator) {
  return (separator ? line.split(separator) : line.split(/\s+/)).map((part) => part.trim().replace(/^"(.*)"$/, "$1"));
}

// NaN for what is no number; a comma is a decimal mark unless it parts the columns.
export function numberOf(text, separator) {
  const plain = separator === "," ? text : text.replace(",", ".");
  return plain.trim() === "" ? NaN : Number(plain);
}
