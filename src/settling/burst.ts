/** Disturbances in a series that is at rest before and after: a kick, a passage, a new start. */
import { median } from './blocks.ts';

export interface Burst {
  /** First and last sample of it. */
  readonly from: number;
  readonly to: number;
  /** Largest rms deviation over a crossing time, and what it was held against. */
  readonly rms: number;
  readonly limit: number;
}

/** Time over which deviations are averaged [crossing times], and samples that this takes at least. */
const WIDTH = 1;
const FEWEST = 3;
/** Least rms deviation of the ratio; the same in its noise over realisations, and in robust σ of the series. */
const LEAST = 0.06;
const NOISES = 3;
const SIGMAS = 4;

/**
 * The last burst: samples with an rms deviation from the median, over a crossing time about them, that
 * neither noise nor the scatter of the series explains. Robust σ, so that the burst does not hide itself.
 */
export function lastBurst(t: Float64Array, x: Float64Array, noise: number): Burst | null {
  const n = t.length;
  if (n < 2 * FEWEST) return null;
  const level = median(x);
  const sigma = 1.4826 * median(x.map((value) => Math.abs(value - level)));
  const limit = Math.max(LEAST, NOISES * noise, SIGMAS * sigma);
  const squares = new Float64Array(n + 1);
  for (let k = 0; k < n; k++) squares[k + 1] = squares[k] + (x[k] - level) ** 2;
  let [begin, end] = [0, 0];
  let found: Burst | null = null;
  for (let k = 0; k < n; k++) {
    while (t[begin] < t[k] - WIDTH / 2) begin++;
    while (end < n && t[end] <= t[k] + WIDTH / 2) end++;
    const first = Math.max(0, Math.min(begin, k - 1));
    const last = Math.min(n, Math.max(end, first + FEWEST));
    const rms = Math.sqrt((squares[last] - squares[first]) / (last - first));
    if (!(rms > limit)) continue;
    // Gaps of less than a window belong to it: a wave goes through its level.
    const joins: boolean = found !== null && first <= found.to + 1;
    found = {
      from: joins && found !== null ? found.from : first,
      to: last - 1,
      rms: joins && found !== null ? Math.max(found.rms, rms) : rms,
      limit,
    };
  }
  return found;
}
