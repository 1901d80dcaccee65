// The service's interface: one way to ask, problem documents, jobs that are followed.

const KEY = "ladderband-key";
const WAIT_S = 2; // longer work becomes a job, so that its progress can be shown
const LOOK_MS = 400;

export const base = new URL(".", document.baseURI);

export const apiKey = () => sessionStorage.getItem(KEY) ?? "";

export function setApiKey(key) {
  if (key) sessionStorage.setItem(KEY, key);
  else sessionStorage.removeItem(KEY);
}

export class Problem extends Error {
  constructor(members) {
    super(members.detail ?? members.title ?? "The service could not answer.");
    this.members = { detail: this.message, ...members };
    this.slug = String(members.type ?? "").split("/").pop();
  }
}

function headers(more) {
  const key = apiKey();
  return key ? { ...more, Authorization: `Bearer ${key}` } : more;
}

async function sent(path, options, signal) {
  let response;
  try {
    response = await fetch(new URL(path, base), { ...options, headers: headers(options.headers ?? {}), signal });
  } catch (error) {
    if (signal?.aborted) throw error;
    throw new Problem({ type: "/unreachable", detail: "The service cannot be reached. It may have been stopped." });
  }
  if (response.ok) return response;
  const members = await response.json().catch(() => ({}));
  throw new Problem({ status: response.status, detail: `The service answered ${response.status}.`, ...members });
}

// Asks a compute resource and returns the response; follows a job when it becomes one.
// onJob(job) is called whenever the job is looked at; an aborted signal also cancels the job.
export async function ask(path, body, { format = "json", query = {}, signal, onJob } = {}) {
  const address = new URLSearchParams(format === "json" ? query : { ...query, format });
  const options = {
    method: "POST",
    headers: { "Content-Type": "application/json", Prefer: `wait=${WAIT_S}` },
    body: JSON.stringify(body),
  };
  const response = await sent(`${path}${address.size ? `?${address}` : ""}`, options, signal);
  if (response.status !== 202) return response;
  const job = await followed(await response.json(), signal, onJob);
  return sent(`${job.links.result}${address.size ? `?${address}` : ""}`.slice(1), {}, signal);
}

async function followed(job, signal, onJob) {
  const cancel = () => sent(job.links.self.slice(1), { method: "DELETE" }).catch(() => {});
  if (signal?.aborted) cancel();
  signal?.addEventListener("abort", cancel, { once: true });
  try {
    while (!["succeeded", "failed", "cancelled"].includes(job.state)) {
      onJob?.(job);
      await new Promise((resolve) => setTimeout(resolve, LOOK_MS));
      signal?.throwIfAborted();
      job = await (await sent(job.links.self.slice(1), {}, signal)).json();
    }
  } finally {
    signal?.removeEventListener("abort", cancel);
  }
  if (job.state === "succeeded") return job;
  throw new Problem(job.problem ?? { type: "/cancelled", detail: "The calculation was cancelled." });
}
