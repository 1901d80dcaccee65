// Long numbers in narrow fields: shortened while they are only looked at, whole while they are edited.

const NARROW = 7; // characters that a cell of the table shows
const WIDE = 12;
const FIGURES = [10, 9, 8, 7, 6, 5, 4, 3, 2];

// As many figures as fit; a power of ten is never cut off.
function shortened(text, input) {
  const room = input.closest("table") ? NARROW : WIDE;
  const value = Number(text);
  if (text.length <= room || !Number.isFinite(value) || text.trim() === "") return text;
  const tries = FIGURES.map((figures) => String(Number(value.toPrecision(figures))));
  return tries.find((short) => short.length <= room) ?? tries.at(-1);
}

export function showText(input, text) {
  input.dataset.text = text;
  const short = shortened(text, input);
  input.title = short === text ? "" : text;
  const shown = document.activeElement === input ? text : short;
  if (input.value !== shown) input.value = shown;
}

export function bindTexts() {
  document.addEventListener("focusin", ({ target }) => {
    if (target.dataset?.text !== undefined) target.value = target.dataset.text;
  });
  document.addEventListener("focusout", ({ target }) => {
    if (target.dataset?.text !== undefined) target.value = shortened(target.dataset.text, target);
  });
}
