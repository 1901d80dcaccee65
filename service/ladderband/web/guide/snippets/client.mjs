import { writeFile } from "node:fs/promises"; // in a browser: leave this line and the last one out

const settings = globalThis.process?.env ?? {};
const url = settings.LADDERBAND_URL ?? "http://127.0.0.1:8080";

async function ask(path, body) {
  const headers = { "Content-Type": "application/json", Prefer: "wait=60" };
  if (settings.LADDERBAND_KEY) headers.Authorization = `Bearer ${settings.LADDERBAND_KEY}`;
  const answer = await fetch(url + path, { method: "POST", headers, body: JSON.stringify(body) });
  if (!answer.ok) throw new Error(await answer.text());
  return answer;
}

const transition = {
  origin_cm1: 26650,
  modes: [{ wavenumber_initial_cm1: 992, wavenumber_final_cm1: 923, huang_rhys: 1.25 }],
};
const answer = await (await ask("/v1/lines", { ...transition, tolerance: 0.01 })).json();
const lines = answer.lines;
lines.position_cm1.forEach((position, k) => {
  console.log(position.toFixed(1), lines.intensity[k].toFixed(6), lines.assignment[k]);
});
console.log("missing at most", answer.completeness.missing_at_most);

const axis = { unit: "cm-1", start: 26000, stop: 31500, points: 551 };
const band = { ...transition, axis, line_shape: { fwhm_cm1: 200 } };
const svg = await (await ask("/v1/bands?format=svg&title=Band", band)).text();
await writeFile("band.svg", svg);
