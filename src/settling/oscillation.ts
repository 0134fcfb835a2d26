/** Is there a wave in the series? A periodogram for uneven times, by least squares. */
import { average, timeWeights } from './blocks.ts';

export interface Wave {
  /** Share of the variance (about a straight line) that the wave explains. */
  readonly share: number;
  readonly amplitude: number;
  readonly period: number;
  /** Rms about the straight line. */
  readonly rms: number;
}

/**
 * The strongest wave of a period from `shortest` to half the span, in the series less a straight line.
 * Source: least-squares spectrum, Lomb 1976, Ap&SS 39, 447; Scargle 1982, ApJ 263, 835; weighted by time.
 */
export function strongestWave(t: Float64Array, x: Float64Array, shortest: number): Wave {
  const n = t.length;
  const span = t[n - 1] - t[0];
  const w = timeWeights(t);
  const total = w.reduce((sum, value) => sum + value, 0);
  for (let k = 0; k < n; k++) w[k] /= total;
  const y = withoutLine(t, x, w);
  let variance = 0;
  for (let k = 0; k < n; k++) variance += w[k] * y[k] * y[k];
  if (!(variance > 0)) return { share: 0, amplitude: 0, period: span, rms: 0 };
  const step = 1 / (4 * span);
  const highest = Math.max(1 / shortest, 2.5 / span);
  let power = 0;
  let frequency = 2 / span;
  for (let f = 2 / span; f < highest; f += step) {
    const p = powerAt(t, y, w, f);
    if (p <= power) continue;
    power = p;
    frequency = f;
  }
  return {
    share: power / variance,
    amplitude: Math.sqrt(2 * power),
    period: 1 / frequency,
    rms: Math.sqrt(variance),
  };
}

function withoutLine(t: Float64Array, x: Float64Array, w: Float64Array): Float64Array {
  let tMean = 0;
  let xMean = 0;
  for (let k = 0; k < t.length; k++) {
    tMean += w[k] * t[k];
    xMean += w[k] * x[k];
  }
  let tt = 0;
  let tx = 0;
  for (let k = 0; k < t.length; k++) {
    tt += w[k] * (t[k] - tMean) ** 2;
    tx += w[k] * (t[k] - tMean) * x[k];
  }
  const slope = tt > 0 ? tx / tt : 0;
  return Float64Array.from(x, (value, k) => value - xMean - slope * (t[k] - tMean));
}

/** Variance explained by a cosine and a sine of one frequency. */
function powerAt(t: Float64Array, y: Float64Array, w: Float64Array, frequency: number): number {
  let cc = 0;
  let ss = 0;
  let cs = 0;
  let yc = 0;
  let ys = 0;
  for (let k = 0; k < t.length; k++) {
    const phase = 2 * Math.PI * frequency * (t[k] - t[0]);
    const c = Math.cos(phase);
    const s = Math.sin(phase);
    cc += w[k] * c * c;
    ss += w[k] * s * s;
    cs += w[k] * c * s;
    yc += w[k] * y[k] * c;
    ys += w[k] * y[k] * s;
  }
  const det = cc * ss - cs * cs;
  if (Math.abs(det) < 1e-9) return 0;
  return (yc * yc * ss - 2 * yc * ys * cs + ys * ys * cc) / det;
}

/** Cosine of the difference of the phases of a wave in the two halves of a series, and its amplitudes there. */
export function phaseAgreement(
  t: Float64Array,
  x: Float64Array,
  period: number,
): { readonly agreement: number; readonly first: number; readonly second: number } {
  const middle = (t[0] + t[t.length - 1]) / 2;
  const halves = [(k: number) => t[k] <= middle, (k: number) => t[k] >= middle].map((inHalf) => {
    const at = Array.from(t.keys()).filter(inHalf);
    return at.length < 5
      ? null
      : waveIn(
          at.map((k) => t[k]),
          Float64Array.from(at, (k) => x[k]),
          period,
        );
  });
  const [a, b] = halves;
  if (!a || !b) return { agreement: 0, first: 0, second: 0 };
  const first = Math.hypot(a[0], a[1]);
  const second = Math.hypot(b[0], b[1]);
  return {
    agreement: (a[0] * b[0] + a[1] * b[1]) / (first * second + 1e-300),
    first,
    second,
  };
}

/** Least squares of a level, a cosine and a sine: the last two. */
function waveIn(t: number[], x: Float64Array, period: number): [number, number] {
  const mean = average(x);
  const rows = t.map((time) => {
    const phase = (2 * Math.PI * time) / period;
    return [1, Math.cos(phase), Math.sin(phase)];
  });
  const A = [0, 1, 2].map((i) => [0, 1, 2].map((j) => rows.reduce((s, r) => s + r[i] * r[j], 0)));
  const B = [0, 1, 2].map((i) => rows.reduce((s, r, k) => s + r[i] * (x[k] - mean), 0));
  const [, c, s] = solveThree(A, B);
  return [c, s];
}

function solveThree(A: number[][], B: number[]): [number, number, number] {
  const det = (m: number[][]) =>
    m[0][0] * (m[1][1] * m[2][2] - m[1][2] * m[2][1]) -
    m[0][1] * (m[1][0] * m[2][2] - m[1][2] * m[2][0]) +
    m[0][2] * (m[1][0] * m[2][1] - m[1][1] * m[2][0]);
  const whole = det(A);
  const solved = [0, 1, 2].map((column) => {
    const replaced = A.map((row, i) => row.map((value, j) => (j === column ? B[i] : value)));
    return Math.abs(whole) > 1e-12 ? det(replaced) / whole : 0;
  });
  return [solved[0], solved[1], solved[2]];
}
