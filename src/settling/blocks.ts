/** Time weights and block means of an unevenly sampled series: the interpolant between samples, averaged. */

/** Weight of each sample in time: half the way to its neighbours (trapezoid rule). */
export function timeWeights(t: ArrayLike<number>): Float64Array {
  const n = t.length;
  const w = new Float64Array(n);
  if (n < 2) return w.fill(1);
  w[0] = (t[1] - t[0]) / 2;
  w[n - 1] = (t[n - 1] - t[n - 2]) / 2;
  for (let k = 1; k < n - 1; k++) w[k] = (t[k + 1] - t[k - 1]) / 2;
  return w;
}

export interface Blocks {
  /** Middle of each block in time. */
  readonly time: Float64Array;
  /** Time average of the linear interpolant in each block. */
  readonly mean: Float64Array;
}

/** Fewer block means than this tell neither a scatter nor a slope. */
export const FEW = 4;

/** Means of `count` blocks of equal duration over the whole series. */
export function blockMeans(t: Float64Array, x: Float64Array, count: number): Blocks {
  const n = t.length;
  const first = t[0];
  const span = t[n - 1] - first;
  const integral = new Float64Array(n);
  for (let k = 1; k < n; k++) {
    integral[k] = integral[k - 1] + ((t[k] - t[k - 1]) * (x[k] + x[k - 1])) / 2;
  }
  const time = new Float64Array(count);
  const mean = new Float64Array(count);
  let k = 0;
  const upTo = (edge: number): number => {
    while (k < n - 2 && t[k + 1] <= edge) k++;
    const h = Math.min(edge, t[n - 1]) - t[k];
    const slope = (x[k + 1] - x[k]) / (t[k + 1] - t[k]);
    return integral[k] + x[k] * h + 0.5 * slope * h * h;
  };
  let before = 0;
  for (let b = 0; b < count; b++) {
    const end = first + ((b + 1) * span) / count;
    const here = upTo(end);
    time[b] = first + ((b + 0.5) * span) / count;
    mean[b] = ((here - before) * count) / span;
    before = here;
  }
  return { time, mean };
}

export interface Slope {
  readonly slope: number;
  readonly error: number;
  /** Slope over its error. */
  readonly t: number;
}

/** Straight line through block means; its error from their scatter about it. */
export function slopeOf({ time, mean }: Blocks): Slope {
  const m = time.length;
  const tMean = average(time);
  const xMean = average(mean);
  let tt = 0;
  let tx = 0;
  for (let k = 0; k < m; k++) {
    tt += (time[k] - tMean) ** 2;
    tx += (time[k] - tMean) * mean[k];
  }
  const slope = tx / tt;
  let squares = 0;
  for (let k = 0; k < m; k++) squares += (mean[k] - xMean - slope * (time[k] - tMean)) ** 2;
  const error = Math.sqrt(squares / (m - 2) / tt);
  return {
    slope,
    error,
    t: error > 0 ? slope / error : slope === 0 ? 0 : Math.sign(slope) * Infinity,
  };
}

export interface Step {
  /** Variance explained by two levels against what is left, as an F statistic. */
  readonly f: number;
  readonly jump: number;
  readonly time: number;
}

/** The best description of block means by two levels. */
export function bestStep({ time, mean }: Blocks): Step {
  const m = mean.length;
  const all = squaresAbout(mean, 0, m);
  let best: Step = { f: 0, jump: 0, time: time[0] };
  for (let c = 2; c < m - 1; c++) {
    const left = squaresAbout(mean, 0, c) + squaresAbout(mean, c, m);
    const f = (all - left) / (left / (m - 2) + 1e-300);
    if (f <= best.f) continue;
    const jump = average(mean.subarray(c)) - average(mean.subarray(0, c));
    best = { f, jump, time: (time[c] + time[c - 1]) / 2 };
  }
  return best;
}

export function average(x: Float64Array): number {
  let sum = 0;
  for (const value of x) sum += value;
  return sum / x.length;
}

export function median(x: ArrayLike<number>): number {
  const sorted = Float64Array.from(x).sort();
  const middle = sorted.length >> 1;
  return sorted.length % 2 ? sorted[middle] : (sorted[middle - 1] + sorted[middle]) / 2;
}

function squaresAbout(x: Float64Array, begin: number, end: number): number {
  const mean = average(x.subarray(begin, end));
  let sum = 0;
  for (let k = begin; k < end; k++) sum += (x[k] - mean) ** 2;
  return sum;
}
