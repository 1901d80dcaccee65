// Asking the service: newest question only, jobs with progress and a way out, problems by field.

import { Problem, ask, setApiKey } from "./api.js";
import { byId, el } from "./dom.js";
import { Latest } from "./latest.js";
import { setProblem } from "./problems.js";

const TOO_MUCH = ["cost-limit", "deadline"];
const SLOW_MS = 400; // after this time the page says that it is waiting

const open = new Map(); // kind -> Latest
const asked = new Map(); // kind -> the request that is asked or was answered, as text
const waits = new Map(); // kind -> {state, since, stop} of what takes long

// Asks for one kind of answer. bodies: the request, and what to ask instead when it is too much work.
// on.answer(answer, body), on.problem() and on.slow() are called, unless a newer question came in
// between. A request that was answered already is not asked again: then false is returned.
export function put(kind, path, bodies, on) {
  const text = JSON.stringify(bodies);
  if (asked.get(kind) === text) return false;
  asked.set(kind, text);
  if (!open.has(kind)) open.set(kind, new Latest());
  const stop = () => {
    open.get(kind).stop();
    settle(kind, new Problem({ type: "/stopped", detail: "You stopped the calculation." }), on);
    on.problem();
  };
  const onJob = (job) => setWait(kind, { state: job.state, since: job.started && Date.parse(job.started), stop });
  open.get(kind).later(async (signal) => {
    setWait(kind, null);
    const slow = setTimeout(() => {
      setWait(kind, { state: "working", since: null, stop });
      on.slow?.();
    }, SLOW_MS);
    signal.addEventListener("abort", () => clearTimeout(slow));
    try {
      const [answer, body] = await firstAffordable(path, bodies, { signal, onJob });
      return () => {
        settle(kind, null, on);
        on.answer(answer, body);
      };
    } catch (problem) {
      if (!(problem instanceof Problem)) throw problem;
      return () => {
        settle(kind, problem, on);
        on.problem();
      };
    } finally {
      clearTimeout(slow);
    }
  });
  return true;
}

async function firstAffordable(path, bodies, options) {
  const [body, ...cheaper] = bodies;
  try {
    return [await (await ask(path, body, options)).json(), body];
  } catch (problem) {
    if (!TOO_MUCH.includes(problem.slug) || !cheaper.length) throw problem;
    return firstAffordable(path, cheaper, options);
  }
}

// on.pointer: where a member of this kind of request is found on the page, if under another name.
function settle(kind, problem, on) {
  if (problem) asked.delete(kind); // asking once more may help
  setWait(kind, null);
  if (!problem || problem.slug === "unauthorized") byId("key-form").hidden = !problem;
  setProblem(kind, problem?.members ?? null, on.pointer);
}

export const waiting = (...kinds) => kinds.some((kind) => open.get(kind)?.busy === true);

export function bindKeyForm(again) {
  byId("key-form").addEventListener("submit", (event) => {
    event.preventDefault();
    setApiKey(byId("api-key").value.trim());
    byId("api-key").value = "";
    byId("key-form").hidden = true;
    again();
  });
}

function setWait(kind, wait) {
  if (!wait && !waits.has(kind)) return;
  if (wait) waits.set(kind, wait);
  else waits.delete(kind);
  byId("progress").replaceChildren(...[...waits].map(([name, current]) => progress(name, current)));
}

function progress(kind, { state, since, stop }) {
  const time = since ? ` for ${Math.max(0, Math.round((Date.now() - since) / 1000))} s` : "";
  return el("p", {}, el("progress", { "aria-label": kind }), ` ${kind}: ${state}${time} `,
    el("button", { type: "button", onclick: stop }, `Stop: ${kind}`));
}
