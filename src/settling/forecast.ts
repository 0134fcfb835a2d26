/** When a run that has not settled yet will have: the transient, extrapolated. */
import { average, median, slopeOf } from './blocks.ts';
import { LIMITS } from './limits.ts';
import type { MeasureRecord } from '../dynamics/record.ts';
import { decide, noiseOf, type Decision, type Track } from './rule.ts';
import { seriesOf } from './series.ts';

export interface Forecast {
  /** Time at which the transient will have sunk to the limit, with its 1σ error, in the unit of the track. */
  readonly settledAt: number;
  readonly error: number;
  /** Time from which a verdict can be told, if it comes so. */
  readonly toldAt: number;
}

/** Blocks of this length [crossing times] give the envelope of the transient. */
const BLOCK = 1;
const FEWEST = 4;
/** The sinking must be seen this clearly, in standard errors of its rate. */
const CLEAR = 2;

/**
 * Fits a straight line to the logarithm of the rms deviation of the ratio, block by block, from the
 * level of its last third: phase mixing is not exponential, but over the few crossing times that are
 * extrapolated the line is as good as what is known. Null if the run is settled, if it moves in a way
 * that has no end in sight, or if no sinking is seen.
 */
export function forecastOf(track: Track, { state, settledFrom }: Decision): Forecast | null {
  const { time: t, ratio } = track;
  const n = t.length;
  if (settledFrom !== null || !['undecided', 'oscillating'].includes(state) || n < 8) return null;
  const limit = Math.max(0.7 * LIMITS.wave, 2.5 * noiseOf(track));
  const now = t[n - 1];
  const level = average(ratio.subarray(Math.floor((2 * n) / 3)));
  const envelope = envelopeOf(t, ratio, level);
  const lastAbove = envelope.findLastIndex(({ rms }) => rms > limit);
  if (lastAbove < envelope.length - 1) {
    // It has sunk already: what is missing is time to see that it stays so.
    const settledAt = lastAbove < 0 ? t[0] : envelope[lastAbove].end;
    const span = lastAbove < 0 ? LIMITS.quietSpan : LIMITS.settledSpan;
    return {
      settledAt,
      error: BLOCK / 2,
      toldAt: Math.max(now, t[0] + span, settledAt + LIMITS.tail),
    };
  }
  // From the highest block on: before it the run was on its way there.
  const highest = envelope.reduce((top, { rms }, k) => (rms > envelope[top].rms ? k : top), 0);
  const sinking = envelope.slice(highest);
  if (sinking.length < FEWEST) return null;
  const time = Float64Array.from(sinking, ({ begin, end }) => (begin + end) / 2);
  const mean = Float64Array.from(sinking, ({ rms }) => Math.log(rms));
  const line = slopeOf({ time, mean });
  if (!(line.slope < 0) || !(Math.abs(line.t) > CLEAR)) return null;
  const middle = average(time);
  const ahead = (average(mean) - Math.log(limit)) / -line.slope;
  const settledAt = Math.max(now, middle + ahead);
  // The line's height is known to scatter/√m, its slope to the error of the fit.
  const scatter = line.error * Math.sqrt(time.reduce((sum, x) => sum + (x - middle) ** 2, 0));
  const error = Math.hypot(
    scatter / Math.sqrt(time.length) / -line.slope,
    (ahead * line.error) / -line.slope,
  );
  return {
    settledAt,
    error: Math.max(error, BLOCK / 2),
    toldAt: Math.max(settledAt + LIMITS.tail, t[0] + LIMITS.settledSpan),
  };
}

function envelopeOf(t: Float64Array, x: Float64Array, level: number) {
  const n = t.length;
  const gaps = Float64Array.from({ length: n - 1 }, (_, k) => t[k + 1] - t[k]);
  // At least three snapshots a block, however rarely they come.
  const width = Math.max(BLOCK, 3 * median(gaps));
  const blocks: { begin: number; end: number; rms: number }[] = [];
  for (let end = t[n - 1]; end - width >= t[0] - 1e-9 * width; end -= width) {
    let squares = 0;
    let count = 0;
    for (let k = 0; k < n; k++) {
      if (t[k] <= end - width || t[k] > end) continue;
      squares += (x[k] - level) ** 2;
      count++;
    }
    if (count > 0) blocks.unshift({ begin: end - width, end, rms: Math.sqrt(squares / count) });
  }
  return blocks;
}

/** {@link forecastOf} for the records of a run, in their unit of time. */
export function forecastRun(records: readonly MeasureRecord[]): Forecast | null {
  const series = seriesOf(records);
  const found = series && forecastOf(series.track, decide(series.track));
  if (series === null || found === null) return null;
  const { crossingTime } = series;
  return {
    settledAt: found.settledAt * crossingTime,
    error: found.error * crossingTime,
    toldAt: found.toldAt * crossingTime,
  };
}
