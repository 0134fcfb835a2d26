/** What a run was in turn: at rest from–to, disturbed, at rest again. */
import { lastBurst } from './burst.ts';
import { LIMITS } from './limits.ts';
import { decide, noiseOf, partOf, type Decision, type State, type Track } from './rule.ts';

/** Stretch of samples; neighbours share a sample. */
export interface Stretch<Name extends string = State> {
  readonly from: number;
  readonly to: number;
  readonly state: Name | 'transient' | 'disturbed';
}

/** Prefixes that are looked at for a part at rest before a later disturbance. */
const PREFIXES = 24;

/**
 * The states of a series in turn.
 * @param verdict - name of its state at the end
 */
export function stretchesOf<Name extends string>(
  track: Track,
  decision: Decision,
  verdict: Name,
): Stretch<Name | State>[] {
  const n = track.time.length;
  const { settledFrom } = decision;
  const before = restsBefore(track, settledFrom ?? n, settledFrom === null);
  const stretches: Stretch<Name | State>[] = [];
  let at = 0;
  const fill = (to: number, state: Stretch<Name | State>['state']) => {
    if (to > at) stretches.push({ from: at, to, state });
    at = to;
  };
  for (const { from, to, state } of before) {
    fill(from, stretches.length === 0 ? 'transient' : 'disturbed');
    fill(to, state);
  }
  if (settledFrom !== null) fill(settledFrom, before.length === 0 ? 'transient' : 'disturbed');
  fill(n - 1, verdict);
  return stretches;
}

/** Parts at rest among the first `end` samples; the whole of them is not one if it is known to be restless. */
function restsBefore(track: Track, end: number, restless: boolean): Stretch[] {
  const rests: Stretch[] = [];
  let begin = 0;
  for (;;) {
    const next = longestRest(track, begin, end, restless && begin === 0);
    if (next === null) return rests;
    rests.push(next);
    begin = next.to + 1;
  }
}

/** The longest prefix that is at rest at its end, with what was at rest in it before left for the caller. */
function longestRest(track: Track, begin: number, end: number, restless: boolean): Stretch | null {
  const size = end - begin;
  if (size < LIMITS.snapshots) return null;
  for (let k = restless ? PREFIXES - 1 : PREFIXES; k >= 4; k--) {
    const length = Math.floor((size * k) / PREFIXES);
    if (length < LIMITS.snapshots) return null;
    const part = partOf(track, begin, begin + length);
    const { state, settledFrom } = decide(part);
    if (settledFrom === null || (state !== 'settled' && state !== 'relaxing')) continue;
    // What was at rest before the last disturbance in this part comes first.
    const earlier = settledFrom > 0 ? longestRest(track, begin, begin + settledFrom, false) : null;
    if (earlier !== null) return earlier;
    const rest = partOf(part, settledFrom, length);
    // A prefix may reach into what disturbs it next.
    const burst = lastBurst(rest.time, rest.ratio, noiseOf(track));
    const to = burst !== null && burst.from > 1 ? settledFrom + burst.from - 1 : length - 1;
    return { from: begin + settledFrom, to: begin + to, state };
  }
  return null;
}
