// The bench page: binds its parts together.

import { bindAddress, link, record, stateInAddress } from "./address.js";
import { bindControls, showControls } from "./controls.js";
import { byId } from "./dom.js";
import { Fineness } from "./fineness.js";
import { bindTexts } from "./field_text.js";
import { bindLines } from "./lines_table.js";
import { bindMeasured } from "./measured.js";
import { modeTable } from "./mode_text.js";
import { bindModes } from "./modes_table.js";
import { bindKeyForm, put, waiting } from "./questions.js";
import { bandsBody } from "./requests.js";
import { Stage } from "./stage.js";
import { Store, example } from "./state.js";
import { bindStates } from "./state_files.js";
import { bindTake } from "./take.js";
import { bindTheme } from "./theme.js";
import { bindWaves, chosenMode, showModes, showWaves, wavesBody } from "./wavefunctions.js";

const store = new Store(stateInAddress());
const stage = new Stage(store);
const failing = new Set(); // kinds whose newest request was refused
const fineness = new Fineness();

bindTheme();
bindTexts();
bindWaves();
bindControls(store);
bindLines((line) => stage.select(line));
bindMeasured(byId("plot"), () => stage.redraw());
bindStates(store, useTransition);
bindKeyForm(askAll);
bindAddress((state) => {
  stage.forgetRange();
  store.change(state, "view");
});
const showTake = bindTake(() => ({ bands: stage.bandsBody, lines: stage.linesBody, link: link(store.state) }));
const showModesTable = bindModes(store, (index) => {
  byId("waves-mode").value = String(index);
  askWaves();
  byId("waves-mode").focus();
});

byId("waves-mode").addEventListener("change", askWaves);
byId("start-over").addEventListener("click", () => load(example()));
byId("paste-use").addEventListener("click", usePasted);

store.listen((state, kind) => {
  const began = performance.now();
  showControls(state);
  showModesTable(state);
  showModes(state);
  if (kind !== "view") record(state, kind !== "slide");
  if (askAll()) stage.changedAt(began);
});

// --- asking ---

// True when there was something new to ask for.
function askAll() {
  byId("plot").setAttribute("aria-busy", "true");
  const asked = [askBand(), askLines()].includes(true);
  askWaves();
  finish();
  return asked;
}

function askLines() {
  return put("Lines", "v1/lines", fineness.bodies(store.state), {
    answer: (answer, body) => {
      stage.setLines(answer, body);
      if (fineness.judge(answer, body, store.state)) askLines();
      settled("Lines", true);
    },
    problem: () => settled("Lines", false),
    slow: () => stage.setLines(null, null), // those of the input before do not belong to the new band
  });
}

function askBand() {
  return put("Band", "v1/bands", [bandsBody(store.state, stage.axis(store.state))], {
    answer: (answer, body) => {
      stage.setBand(answer, body);
      settled("Band", true);
    },
    problem: () => settled("Band", false),
  });
}

function askWaves() {
  const label = byId("waves-mode").selectedOptions[0]?.text ?? "";
  put("Wavefunctions", "v1/wavefunctions", [wavesBody(store.state)], {
    answer: (answer) => showWaves(answer, `mode ${label}`),
    problem: () => {},
    pointer: (pointer) => pointer.replace("#/mode/", `#/modes/${chosenMode(store.state)}/`),
  });
}

// An answer or a refusal is in; the last good plot stays and says so.
function settled(kind, good) {
  if (good) failing.delete(kind);
  else failing.add(kind);
  byId("stale").hidden = !failing.has("Band") || !stage.bandsAnswer;
  byId("plot").classList.toggle("is-stale", failing.has("Band"));
  showTake();
  finish();
}

// Both answers belong to the same input now: is all of it shown, and does it fit the range?
function finish() {
  if (waiting("Band", "Lines")) return;
  if (failing.has("Lines") && !failing.has("Band")) stage.setLines(null, null);
  if (stage.refit()) askBand();
  else stage.complete(() => byId("plot").setAttribute("aria-busy", String(waiting("Band", "Lines"))));
}

// --- states that come as a whole ---

function load(state) {
  stage.forgetRange();
  fineness.coarse = true;
  store.change(state, "load");
}

function useTransition(transition, hasOrigin) {
  const { process, modes, mixing } = transition;
  const state = {
    process,
    shift: "displacement",
    modes: modes.map((mode) => ({
      label: mode.label ?? "",
      initial: String(mode.wavenumber_initial_cm1),
      final: String(mode.wavenumber_final_cm1),
      shift: String(mode.displacement),
    })),
    mixing: mixing ?? null,
    range: null,
  };
  if (hasOrigin) state.origin = String(transition.origin_cm1);
  if (process === "photoelectron") state.unit = "eV";
  load(state);
}

function usePasted() {
  try {
    const { modes, shift } = modeTable(byId("paste-text").value);
    byId("paste-said").textContent = `${modes.length} modes were read.`;
    byId("paste-said").classList.remove("bad");
    load({ modes, mixing: null, range: null, ...(shift ? { shift } : {}) });
  } catch (error) {
    byId("paste-said").textContent = error.message;
    byId("paste-said").classList.add("bad");
  }
}

// a file dropped beside its place must not replace the page
for (const name of ["dragover", "drop"]) window.addEventListener(name, (event) => event.preventDefault());

store.change({}, "view");
