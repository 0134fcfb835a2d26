/**
 * Where the transient ends.
 *
 * The cut that makes the mean of the rest most certain: squared standard error of the mean of what is
 * kept, as if samples were independent in time (White 1997, Simulation 69, 323), here in continuous time
 * and with a floor under the variance, without which a smooth decay is cut as late as allowed.
 */
import { timeWeights } from './blocks.ts';

/** Latest cut over the span. */
const LATEST = 2 / 3;

/** Index of the first sample kept. @param floor - deviation below which nothing counts as a transient */
export function cutAt(t: Float64Array, x: Float64Array, floor: number): number {
  const n = t.length;
  const w = timeWeights(t);
  const span = t[n - 1] - t[0];
  // About the mean of the last third, so that differences keep their digits.
  let level = 0;
  const from = n - Math.max(1, Math.floor(n / 3));
  for (let k = from; k < n; k++) level += x[k] / (n - from);
  let length = 0;
  let first = 0;
  let second = 0;
  let best = Infinity;
  let at = 0;
  for (let k = n - 1; k >= 0; k--) {
    const d = x[k] - level;
    length += w[k];
    first += w[k] * d;
    second += w[k] * d * d;
    if (t[k] - t[0] > LATEST * span) continue;
    const scatter = Math.max(0, second - (first * first) / length);
    const cost = (scatter + floor * floor * length) / (length * length);
    if (cost <= best) {
      best = cost;
      at = k;
    }
  }
  return at;
}
