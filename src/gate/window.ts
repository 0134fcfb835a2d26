/** Which records of a series a rule speaks of. */
import type { MeasureRecord } from '../dynamics/record.ts';
import type { Verdict } from '../settling/verdict.ts';
import type { Window } from './rules.ts';

/** Indices of the records in a window, or why none can be. */
export type Chosen = readonly number[] | { readonly reason: string };

/**
 * @param records - in order of time
 * @param crossingTime - in the unit of the times, or null if not known
 */
export function recordsIn(
  window: Window,
  records: readonly MeasureRecord[],
  verdict: Verdict | null,
  crossingTime: number | null,
): Chosen {
  const all = records.map((_, k) => k);
  if (window === 'all') return all;
  const between = (from: number, to: number) =>
    all.filter((k) => {
      const { time } = records[k];
      return time !== null && time >= from && time <= to;
    });
  if (window === 'settled') {
    if (verdict === null) return { reason: 'no verdict says whether the run has settled' };
    if (verdict.settledAt === null) {
      return { reason: `the run has not settled: the verdict is ${verdict.verdict}` };
    }
    return between(verdict.settledAt, Infinity);
  }
  if ('lastSnapshots' in window) return all.slice(-window.lastSnapshots);
  if ('lastCrossingTimes' in window) {
    const end = records.at(-1)?.time ?? null;
    if (end === null || crossingTime === null)
      return { reason: 'no crossing time or no times are known' };
    return between(end - window.lastCrossingTimes * crossingTime, Infinity);
  }
  return between(window.from ?? -Infinity, window.to ?? Infinity);
}
