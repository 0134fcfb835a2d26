/** Values in a window → one figure with its error. */
import { autocorrelationTime, meanOf } from '../settling/means.ts';
import { average, blockMeans, slopeOf } from '../settling/blocks.ts';
import type { StatisticName } from './rules.ts';

/** One snapshot's value in a window. */
export interface Point {
  /** Time, or null if the snapshot does not say it. */
  readonly time: number | null;
  readonly value: number;
  /** Its own 1σ error; null if none is known. */
  readonly error: number | null;
}

export interface Figure {
  readonly value: number;
  /** 1σ; null if none is known: then the value counts as exact. */
  readonly error: number | null;
}

/** A figure, or why there is none. */
export type FigureOrReason = Figure | { readonly reason: string };

/** Fewest snapshots that a straight line with an error goes through. */
const FEWEST_FOR_DRIFT = 3;
/** Blocks that a drift is taken through at most, and the crossing times and snapshots in each at least. */
const MOST_BLOCKS = 10;
const BLOCK = 1.5;

/**
 * One figure of the values in a window.
 *
 * - of one snapshot (first, last, min, max, largest): with that snapshot's own error
 * - mean: time average; its error from blocks of 1.5 crossing times where there are four or more,
 *   else from the own errors, taken as common to all snapshots, and the scatter over what is
 *   independent of the snapshots
 * - rms: from the mean of the squares, in the same way
 * - scatter: standard deviation about the mean
 * - change: last − first
 * - drift: slope of a straight line through block means (through the snapshots where there are fewer
 *   than four blocks), times the crossing time
 *
 * @param points - in order of time, at least one
 * @param crossingTime - in the unit of the times, or null
 */
export function figureOf(
  name: Exclude<StatisticName, 'every'>,
  points: readonly Point[],
  crossingTime: number | null,
): FigureOrReason {
  const first = points[0];
  const last = points[points.length - 1];
  switch (name) {
    case 'first':
      return single(first);
    case 'last':
      return single(last);
    case 'min':
      return single(points.reduce((a, b) => (b.value < a.value ? b : a)));
    case 'max':
      return single(points.reduce((a, b) => (b.value > a.value ? b : a)));
    case 'largest': {
      const { value, error } = points.reduce((a, b) =>
        Math.abs(b.value) > Math.abs(a.value) ? b : a,
      );
      return { value: Math.abs(value), error };
    }
    case 'mean':
      return meanFigure(points, crossingTime);
    case 'rms':
      return rmsFigure(points, crossingTime);
    case 'scatter':
      return scatterFigure(points);
    case 'change':
      if (points.length < 2) return { reason: 'a change needs two snapshots' };
      return { value: last.value - first.value, error: together(first.error, last.error) };
    case 'driftPerCrossingTime':
      return driftFigure(points, crossingTime);
  }
}

const single = ({ value, error }: Point): Figure => ({ value, error });

/** Errors that are independent of each other; null if neither is known. */
export function together(a: number | null, b: number | null): number | null {
  return a === null && b === null ? null : Math.hypot(a ?? 0, b ?? 0);
}

function meanFigure(points: readonly Point[], crossingTime: number | null): Figure {
  const times = timesOf(points, crossingTime);
  const x = Float64Array.from(points, ({ value }) => value);
  if (times !== null) {
    const { mean, error } = meanOf(times, x);
    if (error !== null) return { value: mean, error };
  }
  return { value: average(x), error: meanError(points, x) };
}

/** Own errors do not average out (the noise of finite N is that of the same bodies); scatter does. */
function meanError(points: readonly Point[], x: Float64Array): number | null {
  const own = rmsOfErrors(points);
  if (x.length < 2) return own;
  const level = average(x);
  let squares = 0;
  for (const value of x) squares += (value - level) ** 2;
  const variance = squares / (x.length - 1);
  return Math.hypot(own ?? 0, Math.sqrt((variance * independence(x)) / x.length));
}

/** Snapshots that are worth one fresh one. */
const independence = (x: Float64Array): number =>
  Math.min(x.length, Math.max(1, 2 * autocorrelationTime(x)));

function rmsOfErrors(points: readonly Point[]): number | null {
  const errors = points.flatMap(({ error }) => error ?? []);
  if (errors.length === 0) return null;
  return Math.sqrt(errors.reduce((sum, error) => sum + error * error, 0) / errors.length);
}

function rmsFigure(points: readonly Point[], crossingTime: number | null): Figure {
  const squares = points.map(({ time, value, error }) => ({
    time,
    value: value * value,
    error: error === null ? null : 2 * Math.abs(value) * error,
  }));
  const { value, error } = meanFigure(squares, crossingTime);
  const rms = Math.sqrt(Math.max(0, value));
  if (error === null) return { value: rms, error: null };
  return { value: rms, error: rms > 0 ? error / (2 * rms) : rmsOfErrors(points) };
}

function scatterFigure(points: readonly Point[]): FigureOrReason {
  if (points.length < 2) return { reason: 'a scatter needs two snapshots' };
  const x = Float64Array.from(points, ({ value }) => value);
  const level = average(x);
  let squares = 0;
  for (const value of x) squares += (value - level) ** 2;
  const scatter = Math.sqrt(squares / (x.length - 1));
  const independent = Math.max(2, x.length / independence(x));
  return { value: scatter, error: scatter / Math.sqrt(2 * (independent - 1)) };
}

function driftFigure(points: readonly Point[], crossingTime: number | null): FigureOrReason {
  if (crossingTime === null) return { reason: 'no crossing time is known' };
  const times = timesOf(points, crossingTime);
  if (times === null || points.length < FEWEST_FOR_DRIFT) {
    return { reason: `a drift needs at least ${FEWEST_FOR_DRIFT} snapshots with different times` };
  }
  const x = Float64Array.from(points, ({ value }) => value);
  const length = times[times.length - 1] - times[0];
  const blocks = Math.min(MOST_BLOCKS, Math.floor(Math.min(length / BLOCK, x.length / 2)));
  if (blocks >= 4) {
    const { slope, error } = slopeOf(blockMeans(times, x, blocks));
    return { value: slope, error };
  }
  const { slope, error } = slopeOf({ time: times, mean: x });
  return { value: slope, error: error * Math.sqrt(independence(x)) };
}

/** Times in crossing times if all are known and they grow; else null. */
function timesOf(points: readonly Point[], crossingTime: number | null): Float64Array | null {
  if (crossingTime === null) return null;
  const times = new Float64Array(points.length);
  for (const [k, { time }] of points.entries()) {
    if (time === null) return null;
    times[k] = time / crossingTime;
    if (k > 0 && !(times[k] > times[k - 1])) return null;
  }
  return times;
}
