// Pointer, wheel and keys on the plot: point at lines, step through them, zoom.

const LINE_PX = 7; // a line this near to the pointer is meant
const DRAG_PX = 8;
const PER_TURN = 0.0022; // one notch is 100 px, or 3 lines in some browsers
const LINE_OF_WHEEL = 33;
const REST_MS = 400; // after this pause the wheel has come to rest
const SEEN_PX = 2.5; // lower sticks are not stepped on

// on.point(x, lineIndex | null), on.select(lineIndex), on.leave(), on.range(), on.zoom(low, high, kind), on.rest(), on.fit()
export function listen(plot, on) {
  const { place } = plot;
  let start = null;
  let turning = 0;
  const at = (event) => event.clientX - place.getBoundingClientRect().left;

  place.addEventListener("pointerdown", (event) => {
    if (!plot.scene || event.button) return;
    start = at(event);
  });
  place.addEventListener("pointermove", (event) => {
    if (!plot.scene) return;
    if (start !== null && event.buttons) showBrush(plot, start, at(event));
    else point(plot, at(event), event.offsetY, on);
  });
  window.addEventListener("pointerup", (event) => {
    if (start === null) return;
    const [low, high] = [start, at(event)].sort((a, b) => a - b);
    start = null;
    plot.brush.hidden = true;
    if (high - low > DRAG_PX) on.zoom(plot.x.at(Math.max(low, plot.x.from)), plot.x.at(Math.min(high, plot.x.to)));
    else if (place.contains(event.target)) point(plot, high, event.clientY - place.getBoundingClientRect().top, on, true);
  });
  place.addEventListener("pointercancel", () => {
    start = null;
    plot.brush.hidden = true;
  });
  place.addEventListener("pointerleave", () => {
    plot.cursor.hidden = true;
    on.leave();
  });
  place.addEventListener("dblclick", () => on.fit());
  place.addEventListener("wheel", (event) => {
    // without the focus the wheel belongs to the page
    if (!plot.scene || !(event.ctrlKey || document.activeElement === place)) return;
    event.preventDefault();
    const [low, high] = on.range(); // what is asked for already: turns come faster than answers
    const middle = low + ((at(event) - plot.x.from) / (plot.x.to - plot.x.from)) * (high - low);
    const factor = Math.exp(PER_TURN * event.deltaY * (event.deltaMode ? LINE_OF_WHEEL : 1));
    on.zoom(middle - (middle - low) * factor, middle + (high - middle) * factor, "slide");
    clearTimeout(turning);
    turning = setTimeout(on.rest, REST_MS);
  }, { passive: false });
  place.addEventListener("keydown", (event) => key(plot, event, on));
}

export function zoomed(plot, factor, [low, high]) {
  const selected = plot.scene.selected;
  const middle = selected !== null && plot.inView(plot.scene.lines.x[selected]) ? plot.scene.lines.x[selected] : (low + high) / 2;
  return [middle - (middle - low) * factor, middle + (high - middle) * factor];
}

function key(plot, event, on) {
  if (!plot.scene || event.ctrlKey || event.metaKey || event.altKey) return;
  const step = { ArrowRight: 1, ArrowLeft: -1 }[event.key];
  if (step) on.select(beside(plot, step));
  else if (event.key === "Home") on.select(plot.scene.lines.strongest[0] ?? null);
  else if (event.key === "+" || event.key === "=") on.zoom(...zoomed(plot, 0.6, on.range()));
  else if (event.key === "-") on.zoom(...zoomed(plot, 1 / 0.6, on.range()));
  else if (event.key === "0") on.fit();
  else if (event.key === "Escape") on.select(null);
  else return;
  event.preventDefault();
}

// The next line to the right or left that is high enough to be seen; the strongest to begin with.
function beside(plot, step) {
  const { lines, selected } = plot.scene;
  const seen = (k) => plot.inView(lines.x[k]) && plot.foot - plot.stickTop(lines.intensity[k]) > SEEN_PX;
  const order = lines.byPosition.filter(seen);
  if (selected === null || !order.includes(selected)) return lines.strongest.find(seen) ?? null;
  return order[Math.min(order.length - 1, Math.max(0, order.indexOf(selected) + step))];
}

function point(plot, px, py, on, chosen = false) {
  const inside = px >= plot.x.from && px <= plot.x.to;
  plot.cursor.hidden = !inside;
  if (!inside) return;
  plot.cursor.style.left = `${px}px`;
  plot.cursor.style.height = `${plot.foot}px`;
  const line = lineAt(plot, px, py);
  if (chosen && line !== null) on.select(line);
  else on.point(plot.x.at(px), line);
}

// The nearest line; of several within reach the one whose top is nearest to the pointer.
function lineAt(plot, px, py) {
  const { lines } = plot.scene;
  let [best, least] = [null, Infinity];
  for (let k = 0; k < lines.x.length; k += 1) {
    const away = Math.abs(plot.x.px(lines.x[k]) - px);
    if (away > LINE_PX) continue;
    const above = Math.max(0, plot.stickTop(lines.intensity[k]) - py);
    const far = away + 0.3 * above - 0.02 * (plot.foot - plot.stickTop(lines.intensity[k]));
    if (far < least) [best, least] = [k, far];
  }
  return best;
}

function showBrush(plot, from, to) {
  plot.cursor.hidden = true;
  plot.brush.hidden = Math.abs(to - from) <= DRAG_PX;
  plot.brush.style.left = `${Math.min(from, to)}px`;
  plot.brush.style.width = `${Math.abs(to - from)}px`;
  plot.brush.style.height = `${plot.foot}px`;
}
