// Light, dark, or as the system says; the choice is kept for the next visit.

import { byId } from "./dom.js";

const KEPT = "ladderband-theme";

export const dark = () =>
  (document.documentElement.dataset.theme ?? (matchMedia("(prefers-color-scheme: dark)").matches ? "dark" : "light")) === "dark";

export function bindTheme() {
  const select = byId("theme");
  select.value = localStorage.getItem(KEPT) ?? "";
  apply(select.value);
  select.addEventListener("change", () => {
    localStorage.setItem(KEPT, select.value);
    apply(select.value);
  });
}

function apply(theme) {
  if (theme) document.documentElement.dataset.theme = theme;
  else delete document.documentElement.dataset.theme;
}
