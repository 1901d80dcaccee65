// Take it with you: the request as a command, a program or a link, and files in every format.

import { ask } from "./api.js";
import { byId, el } from "./dom.js";
import { curl, python } from "./snippets.js";
import { dark } from "./theme.js";

const FORMATS = {
  bands: [["json", "JSON"], ["csv", "CSV"], ["npy", "npy"], ["jcamp", "JCAMP-DX"], ["svg", "SVG"], ["png", "PNG"]],
  lines: [["json", "JSON"], ["csv", "CSV"], ["ndjson", "NDJSON"], ["npy", "npy"], ["svg", "SVG"], ["png", "PNG"]],
};
const ENDINGS = { jcamp: "jdx" };
const PICTURES = { width: 960, height: 480 };

// bodies() gives {bands, lines, link}: the requests whose answers are on the page, and its address.
export function bindTake(bodies) {
  const refresh = () => showText(bodies());
  byId("take-what").addEventListener("change", refresh);
  byId("take-as").addEventListener("change", refresh);
  byId("take-copy").addEventListener("click", copy);
  byId("downloads").append(...Object.entries(FORMATS).map(([what, formats]) => group(what, formats, bodies)));
  return refresh;
}

function showText(bodies) {
  const [what, as] = [byId("take-what").value, byId("take-as").value];
  const body = bodies[what];
  const texts = {
    link: () => bodies.link,
    curl: () => (body ? curl(`v1/${what}`, body) : ""),
    python: () => (body ? python(`v1/${what}`, body) : ""),
  };
  byId("take-what").disabled = as === "link";
  byId("take-text").textContent = texts[as]();
}

async function copy() {
  const text = byId("take-text").textContent;
  try {
    await navigator.clipboard.writeText(text);
    byId("take-said").textContent = "Copied.";
  } catch {
    getSelection().selectAllChildren(byId("take-text")); // no clipboard without TLS
    byId("take-said").textContent = "The text is selected: copy it with the keyboard.";
  }
}

function group(what, formats, bodies) {
  const name = what === "bands" ? "Band" : "Lines";
  return el("div", { role: "group", "aria-label": `Download: ${name}` }, el("span", {}, name),
    ...formats.map(([format, label]) => el("button", {
      type: "button", "data-download": `${what}-${format}`, onclick: () => download(what, format, bodies()[what]),
    }, label)));
}

async function download(what, format, body) {
  const said = byId("downloads-said");
  if (!body) return;
  said.textContent = "";
  const picture = format === "svg" || format === "png";
  const query = picture ? { ...PICTURES, theme: dark() ? "dark" : "light" } : {};
  try {
    const response = await ask(`v1/${what}`, body, { format, query });
    const address = URL.createObjectURL(await response.blob());
    const link = el("a", { href: address, download: `ladderband-${what}.${ENDINGS[format] ?? format}` });
    link.click();
    setTimeout(() => URL.revokeObjectURL(address), 10_000);
    said.textContent = `${link.download} is ready.`;
  } catch (problem) {
    said.textContent = `Nothing was downloaded. ${problem.message}`;
  }
}
