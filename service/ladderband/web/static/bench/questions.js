// Asking the service: newest question only, jobs with progress and a way out, problems by field.

import { Problem, ask, setApiKey } from "./api.js";
import { byId, el } from "./dom.js";
import { Latest } from "./latest.js";
import { setProblem } from "./problems.js";

const open = new Map(); // kind -> Latest
const jobs = new Map(); // kind -> {job, stop} while a job is followed

// Asks for one kind of answer. bodies: the request, and what to ask instead when it is too much work.
// on.answer(answer, body) or on.problem() is called, unless a newer question came in between.
export function put(kind, path, bodies, on) {
  if (!open.has(kind)) open.set(kind, new Latest());
  const stop = () => {
    open.get(kind).stop();
    settle(kind, new Problem({ type: "/stopped", detail: "You stopped the calculation." }));
    on.problem();
  };
  open.get(kind).later(async (signal) => {
    const onJob = (job) => setJob(kind, { job, stop });
    try {
      const [answer, body] = await firstAffordable(path, bodies, { signal, onJob });
      return () => {
        settle(kind, null);
        on.answer(answer, body);
      };
    } catch (problem) {
      if (!(problem instanceof Problem)) throw problem;
      return () => {
        settle(kind, problem);
        on.problem();
      };
    }
  });
}

async function firstAffordable(path, bodies, options) {
  const [body, ...cheaper] = bodies;
  try {
    return [await (await ask(path, body, options)).json(), body];
  } catch (problem) {
    if (problem.slug !== "cost-limit" || !cheaper.length) throw problem;
    return firstAffordable(path, cheaper, options);
  }
}

function settle(kind, problem) {
  setJob(kind, null);
  if (problem?.slug === "unauthorized") byId("key-form").hidden = false;
  setProblem(kind, problem?.members ?? null);
}

export const waiting = (...kinds) => kinds.some((kind) => open.get(kind)?.busy);

export function bindKeyForm(again) {
  byId("key-form").addEventListener("submit", (event) => {
    event.preventDefault();
    setApiKey(byId("api-key").value.trim());
    byId("api-key").value = "";
    byId("key-form").hidden = true;
    again();
  });
}

function setJob(kind, followed) {
  if (!followed && !jobs.has(kind)) return;
  if (followed) jobs.set(kind, followed);
  else jobs.delete(kind);
  byId("progress").replaceChildren(...[...jobs].map(([name, current]) => progress(name, current)));
}

function progress(kind, { job, stop }) {
  const since = job.started ? ` for ${Math.max(0, Math.round((Date.now() - Date.parse(job.started)) / 1000))} s` : "";
  return el("p", {}, el("progress", { "aria-label": kind }), ` ${kind}: ${job.state}${since} `,
    el("button", { type: "button", onclick: stop }, `Stop: ${kind}`));
}
