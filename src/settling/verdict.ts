/** Records in time → whether, when and how well the run settled, with the numbers that decided it. */
import { UnanswerableError } from '../errors.ts';
import type { MeasureRecord } from '../dynamics/record.ts';
import type { Remark } from '../snapshot/particles.ts';
import { auditOf, type Audit } from './audit.ts';
import { convergenceRadius } from './convergence.ts';
import { cutAt } from './cut.ts';
import { gravityTest } from './gravityTest.ts';
import { LIMITS } from './limits.ts';
import { autocorrelationTime, bootstrapHalfWidth, meanOf } from './means.ts';
import { scalarMeans, type ScalarMean } from './scalars.ts';
import { decide, noiseOf, type Decision, type Finding, type State, type Track } from './rule.ts';
import {
  balanceOf,
  inOrderOfTime,
  radiiOf,
  radiusOf,
  seriesOf,
  type RatioKind,
  type Series,
  virialRadiusOf,
  type SetName,
} from './series.ts';
import { stretchesOf } from './states.ts';

export type VerdictName = State | 'dispersing';

export interface Verdict {
  readonly verdict: VerdictName;
  /** Time from which the run is settled, the half-width of its 68 % interval, and the first snapshot fit for use; null if not settled. */
  readonly settledAt: number | null;
  readonly settledAtError: number | null;
  readonly settledFrom: string | null;
  /** What the verdict speaks of, and its mean over the settled part (the second half if not settled). */
  readonly ratio: {
    readonly kind: RatioKind;
    readonly set: SetName;
    readonly mean: number;
    readonly error: number | null;
    /** Rms of finite N over realisations. */
    readonly noise: number | null;
  };
  readonly evidence: readonly Finding[];
  /** The run in turn: `transient` before the first rest, `disturbed` between two of them. */
  readonly states: readonly {
    readonly from: number;
    readonly to: number;
    readonly state: VerdictName | 'transient' | 'disturbed';
  }[];
  /** One crossing time, in the unit of time of the records. */
  readonly crossingTime: number;
  readonly span: number;
  readonly snapshots: number;
  /** After settling: snapshots worth a fresh one each, and the spacing that makes them so; null if not settled. */
  readonly independentSnapshots: number | null;
  readonly advisedSpacing: number | null;
  /**
   * Radius inside which the run is relaxed by the noise of its own bodies [length]; null if it lies inside
   * the innermost Lagrangian radius, or if all of the run is relaxed, which a remark says.
   */
  readonly convergenceRadius: number | null;
  /** Of every scalar of the records, over the settled part (the second half if not settled). */
  readonly means: readonly ScalarMean[];
  readonly audit: Audit;
  readonly remarks: readonly Remark[];
}

/**
 * Judges a series.
 * @param records - of one run, in any order; of several at one time the last is kept
 * @throws UnanswerableError `unanswerable.series` if fewer than two records have times and figures
 */
export function verdictOf(records: readonly MeasureRecord[]): Verdict {
  const series = seriesOf(records);
  if (series === null) {
    const { ordered } = inOrderOfTime(records);
    throw new UnanswerableError(
      'unanswerable.series',
      `a verdict needs at least two snapshots with a time, a ratio and a half-mass radius; ${ordered.length} of ${records.length} have a time`,
      'give more snapshots of the run, with their times',
    );
  }
  const { track, crossingTime } = series;
  const decision = decide(track);
  const n = track.time.length;
  const from = decision.settledFrom ?? n >> 1;
  const part = (x: Float64Array) => x.subarray(from);
  const level = meanOf(part(track.time), part(track.ratio));
  const settled = decision.settledFrom !== null;
  const independent = settled ? independence(part(track.time), part(track.ratio)) : null;
  const verdict = nameOf(decision, series);
  const at = (k: number) => series.records[k].time as number;
  const span = at(n - 1) - at(0);
  const converged = convergenceRadius(series.records[n - 1], series.set, span);
  const noises = series.records.flatMap((record) => balanceOf(record, series.set)?.noise ?? []);
  return {
    verdict,
    settledAt: settled ? at(from) : null,
    settledAtError: settled ? crossingTime * settledError(track, from) : null,
    settledFrom: settled ? series.records[from].file : null,
    ratio: {
      kind: series.ratio,
      set: series.set,
      mean: level.mean,
      error: level.error,
      noise: noises.length > 0 ? noises[noises.length - 1] : null,
    },
    evidence: decision.findings,
    states: stretchesOf(track, decision, verdict).map(({ from, to, state }) => ({
      from: at(from),
      to: at(to),
      state,
    })),
    crossingTime,
    span,
    snapshots: n,
    independentSnapshots: independent?.count ?? null,
    advisedSpacing: independent === null ? null : independent.spacing * crossingTime,
    convergenceRadius: converged.radius,
    means: scalarMeans(series.records.slice(from), part(track.time)),
    audit: auditOf(series.records),
    remarks: [
      ...series.remarks,
      ...remarksOf(series, decision, level),
      ...(converged.isThroughout ? [RELAXED_THROUGHOUT] : []),
      ...gravityTest(series.records.slice(decision.settledFrom ?? 0)),
    ],
  };
}

const RELAXED_THROUGHOUT: Remark = {
  code: 'relaxedThroughout',
  text: 'two-body encounters have had time to relax the run at every radius that was measured',
  remedy:
    'read it as a system of so many bodies, not as a smooth one: more bodies are needed for that',
};

/** Growing: bound, or losing itself? */
function nameOf({ state }: Decision, { records, set }: Series): VerdictName {
  if (state !== 'expanding') return state;
  const [first, last] = [records[0], records[records.length - 1]];
  const unbound = last.whole.energy >= 0 || last.bound.mass < 0.5 * last.whole.mass;
  const losing = set === 'bound' && last.bound.mass < 0.9 * first.bound.mass;
  return unbound || losing ? 'dispersing' : state;
}

function independence(t: Float64Array, x: Float64Array): { count: number; spacing: number } {
  const length = t[t.length - 1] - t[0];
  const memory = 2 * autocorrelationTime(x);
  const count = Math.max(1, Math.min(t.length, t.length / memory));
  return { count, spacing: length / count };
}

/** Half-width of the interval of the cut: blocks drawn anew, and not less than the spread of the single cuts [crossing times]. */
function settledError(track: Track, from: number): number {
  const { time: t, ratio, logHalf, logVirial } = track;
  const noise = noiseOf(track);
  const floors = [LIMITS.floorRatio, LIMITS.floorRadius, LIMITS.floorRadius].map((floor) =>
    Math.max(floor, noise / 2),
  );
  const columns = [ratio, logHalf, ...(logVirial ? [logVirial] : [])];
  const cuts = columns.map((x, c) => t[cutAt(t, x, floors[c])] - t[0]);
  const spread = (Math.max(...cuts) - Math.min(...cuts)) / 2;
  const spacing = (t[t.length - 1] - t[0]) / (t.length - 1);
  if (from === 0) return Math.max(spacing / 2, 0);
  // The noise of the rest is put anew over the run as it went.
  const rest = columns.map((x) => {
    const level = meanOf(t.subarray(from), x.subarray(from)).mean;
    return Float64Array.from(x.subarray(from), (value) => value - level);
  });
  const width = bootstrapHalfWidth(t.subarray(from), rest, (resampled) =>
    Math.max(
      ...columns.map((x, c) => {
        const again = Float64Array.from(x);
        const noiseAt = resampled[c];
        for (let k = from; k < x.length; k++) again[k] += noiseAt[k - from] - rest[c][k - from];
        return t[cutAt(t, again, floors[c])] - t[0];
      }),
    ),
  );
  return Math.max(width, spread, spacing / 2);
}

/** r_v over r_h of smooth systems is 0.9 (uniform) to 1.3 and above; below this few pairs must rule U. */
const FEW_PAIRS = 0.5;
/** How far the mean may be from 1, beside three standard errors. */
const VIRIAL = 0.03;

function remarksOf(
  { set, track, records }: Series,
  { settledFrom, state }: Decision,
  level: { readonly mean: number; readonly error: number | null },
): Remark[] {
  const remarks: Remark[] = [];
  const last = records[records.length - 1];
  if (set === 'bound') {
    const share = 1 - last.bound.mass / last.whole.mass;
    remarks.push({
      code: 'unboundMass',
      text: `${(100 * share).toPrecision(2)} % of the mass is unbound at the end; the verdict speaks of the bound bodies`,
      remedy: 'compare the ratio of all bodies before it is quoted: escapers raise it',
    });
  }
  const radius = radiusOf(radiiOf(last, set), 0.5) ?? 0;
  const virial = virialRadiusOf(last, 'whole') ?? Infinity;
  const isOver = settledFrom !== null || state === 'oscillating'; // Before a merger clumps do the same.
  if (isOver && last.pairsMerged === undefined && virial < FEW_PAIRS * radius) {
    remarks.push({
      code: 'pairsLikely',
      text: `U is far deeper than a smooth system of that size has: r_v is ${(virial / radius).toPrecision(2)} of r_h; a few close pairs rule T, U and their ratio`,
      remedy: 'measure with --with pairs, and the verdict speaks of each hard pair as one body',
    });
  }
  if (set === 'pairsMerged') {
    remarks.push({
      code: 'pairsMerged',
      text: 'hard pairs hold more than 5 % of U; the verdict speaks of the ratio with each of them as one body',
      remedy: 'quote that ratio: inside a pair 2T/|U| is 1 by itself, whatever the system does',
    });
  }
  const off = Math.abs(level.mean - 1);
  if (settledFrom !== null && off > Math.max(VIRIAL, 3 * (level.error ?? 0))) {
    remarks.push({
      code: 'settledNotVirial',
      text: `settled, but not virial: the mean ratio is ${level.mean.toPrecision(4)}`,
      remedy:
        'look for softening or G other than the run’s, bodies cut away, an external field, escapers or binaries',
    });
  }
  if (track.energyError === null) {
    remarks.push({
      code: 'energyNotJudged',
      text: 'whether the energy was kept is not judged: softening is not stated, mass or number of bodies changed, or external fields act',
      remedy: 'state the softening of the run (--softening, 0 for none)',
    });
  }
  return remarks;
}
