/** Means of what has memory, and how many snapshots are worth a fresh one. */
import { Random } from '../numerics/random.ts';
import { average, blockMeans, timeWeights } from './blocks.ts';
import { LIMITS } from './limits.ts';

export interface Mean {
  readonly mean: number;
  /** 1σ of the mean, memory included; null if too short to tell. */
  readonly error: number | null;
}

/** Time average of a stationary part, its error from blocks long enough to be nearly independent. */
export function meanOf(t: Float64Array, x: Float64Array): Mean {
  const length = t[t.length - 1] - t[0];
  const blocks = Math.min(20, Math.floor(Math.min(length / LIMITS.block, t.length / 2)));
  if (!(length > 0) || blocks < 4) return { mean: average(x), error: null };
  const { mean } = blockMeans(t, x, blocks);
  const level = average(mean);
  let squares = 0;
  for (const value of mean) squares += (value - level) ** 2;
  return { mean: level, error: Math.sqrt(squares / (blocks - 1) / blocks) };
}

/**
 * Integrated autocorrelation time ½ + Σ ρ_k in samples, summed up to the first lag of at least five times
 * itself. Source: Sokal 1997, in Functional Integration, 131. At least ½.
 */
export function autocorrelationTime(x: Float64Array): number {
  const n = x.length;
  const level = average(x);
  let variance = 0;
  for (const value of x) variance += (value - level) ** 2;
  if (!(variance > 0)) return 0.5;
  let tau = 0.5;
  for (let lag = 1; lag < n - 1; lag++) {
    let sum = 0;
    for (let k = 0; k + lag < n; k++) sum += (x[k] - level) * (x[k + lag] - level);
    tau += sum / variance;
    if (lag >= 5 * tau) break;
  }
  return Math.max(0.5, tau);
}

/** Samples drawn in a bootstrap. */
const DRAWS = 200;

/**
 * Half-width of the interval that holds 68 % of a statistic's bootstrap values: blocks of a run are drawn
 * with replacement, so that memory within a block stays. Source: Künsch 1989, Ann. Statist. 17, 1217.
 * @param statistic - of a resampled series on the same times
 */
export function bootstrapHalfWidth(
  t: Float64Array,
  x: readonly Float64Array[],
  statistic: (resampled: readonly Float64Array[]) => number,
): number {
  const n = t.length;
  const weights = timeWeights(t);
  const spacing = average(weights);
  const block = Math.min(n, Math.max(1, Math.round(LIMITS.block / spacing)));
  const random = new Random(1);
  const values = Array.from({ length: DRAWS }, () => {
    const resampled = x.map((column) => new Float64Array(column.length));
    for (let at = 0; at < n; at += block) {
      const from = Math.floor(random.uniform() * (n - block + 1));
      for (let k = 0; k < block && at + k < n; k++) {
        x.forEach((column, c) => (resampled[c][at + k] = column[from + k]));
      }
    }
    return statistic(resampled);
  }).sort((a, b) => a - b);
  return (values[Math.floor(0.84 * DRAWS)] - values[Math.floor(0.16 * DRAWS)]) / 2;
}
