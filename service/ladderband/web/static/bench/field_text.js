// Long numbers in narrow fields: shortened while they are only looked at, whole while they are edited.

const LONG = 8;

function shortened(text) {
  const value = Number(text);
  if (text.length <= LONG || !Number.isFinite(value) || text.trim() === "") return text;
  // as many figures as fit; a power of ten is never cut off
  const tries = [5, 4, 3, 2].map((figures) => String(Number(value.toPrecision(figures))));
  return tries.find((short) => short.length <= LONG) ?? tries.at(-1);
}

export function showText(input, text) {
  input.dataset.text = text;
  input.title = shortened(text) === text ? "" : text;
  const shown = document.activeElement === input ? text : shortened(text);
  if (input.value !== shown) input.value = shown;
}

export function bindTexts() {
  document.addEventListener("focusin", ({ target }) => {
    if (target.dataset?.text !== undefined) target.value = target.dataset.text;
  });
  document.addEventListener("focusout", ({ target }) => {
    if (target.dataset?.text !== undefined) target.value = shortened(target.dataset.text);
  });
}
