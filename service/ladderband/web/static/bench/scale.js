// Axes: nice ticks, and the way from numbers to pixels and back.

export function ticks(low, high, count) {
  const rough = (high - low) / Math.max(1, count);
  if (!(rough > 0)) return { values: [low], decimals: 0 };
  const power = 10 ** Math.floor(Math.log10(rough));
  const step = [1, 2, 5, 10].map((m) => m * power).find((s) => s >= rough);
  const values = [];
  for (let k = Math.ceil(low / step - 1e-9); k * step <= high + 1e-9 * step; k += 1) values.push(k * step);
  return { values, decimals: Math.max(0, -Math.floor(Math.log10(step) + 1e-9)) };
}

export class Linear {
  constructor(low, high, from, to) {
    Object.assign(this, { low, high, from, to });
  }

  px(x) {
    return this.from + ((x - this.low) / (this.high - this.low)) * (this.to - this.from);
  }

  at(px) {
    return this.low + ((px - this.from) / (this.to - this.from)) * (this.high - this.low);
  }
}

export const top = (values) => values.reduce((a, b) => (b > a ? b : a), 0);

// Index of the entry of an ascending list that is nearest to x.
export function nearest(values, x) {
  let [low, high] = [0, values.length - 1];
  while (high - low > 1) {
    const middle = (low + high) >> 1;
    if (values[middle] < x) low = middle;
    else high = middle;
  }
  return Math.abs(values[low] - x) <= Math.abs(values[high] - x) ? low : high;
}
