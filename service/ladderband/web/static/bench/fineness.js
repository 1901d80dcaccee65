// How fine the lines are asked for: coarse first where that may be all there is room for.
//
// A warm molecule of thirty modes has millions of lines; to enumerate them takes seconds and leaves
// the list of the strongest as it was. A coarse list tells in a moment whether that is so.

import { isFull, linesBody, value } from "./requests.js";

const COARSE = 0.2;
const COARSEST = 0.5;
const WASTE = 60_000; // enumerated lines: as many as take a tenth of a second

export class Fineness {
  coarse = true;

  // The request, and what to ask instead when it is too much work.
  bodies(state) {
    const wanted = value(state.missing);
    const shares = this.coarse ? [COARSE, COARSEST] : [wanted, COARSE, COARSEST];
    const first = Math.max(shares[0], wanted);
    const all = [first, ...shares.slice(1).filter((share) => share > first), undefined];
    return all.map((share) => linesBody(state, share));
  }

  // True when the same should be asked once more, finer.
  judge(answer, body, state) {
    const wanted = value(state.missing);
    if (this.coarse) {
      this.coarse = isFull(answer) || body.tolerance === undefined;
      return !this.coarse && body.tolerance > wanted;
    }
    this.coarse = answer.enumerated_lines > WASTE || body.tolerance !== wanted;
    return false;
  }
}
