// The state in the address: links, reload, the back button.

import { decode, encode, example } from "./state.js";

const PAUSE_MS = 250; // changes this near to each other are one step back; browsers limit steps a second

let timer = 0;
let open = false; // a step that is still being dragged or typed is rewritten, not followed by another
let ends = false;

export const stateInAddress = () => decode(location.hash.slice(1)) ?? example();

export function link(state) {
  return `${location.href.split("#")[0]}#${encode(state)}`;
}

// done: the step ends with this state.
export function record(state, done) {
  clearTimeout(timer);
  ends ||= done;
  timer = setTimeout(() => {
    if (link(state) !== location.href) {
      if (open) history.replaceState(null, "", link(state));
      else history.pushState(null, "", link(state));
    }
    open = !ends;
    ends = false;
  }, PAUSE_MS);
}

// moved(state): the user went back, forward, or to another link.
export function bindAddress(moved) {
  window.addEventListener("popstate", () => {
    clearTimeout(timer);
    open = ends = false;
    moved(stateInAddress());
  });
}
