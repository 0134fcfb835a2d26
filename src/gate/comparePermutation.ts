/**
 * Two groups of runs compared by exchanging their labels: whatever the distribution of correct runs, a
 * statistic that the labels alone decide is as likely to have any rank as any other.
 *
 * Three statistics: the largest difference of means over its scatter (Westfall & Young 1993,
 * Resampling-Based Multiple Testing, section 2.3), the energy distance (Székely & Rizzo 2013, J. Stat.
 * Plan. Inference 143, 1249), and how far scores of principal components lie outside the two-sigma band of
 * the reference (in the manner of Baker et al. 2015, Geosci. Model Dev. 8, 2829). They are combined to one
 * before the rank is taken, so that the rate of false alarms is that of one test.
 */
import { Random } from '../numerics/random.ts';
import { principalScores } from './comparePrincipal.ts';

/** Labellings above which some are drawn instead of all being gone through. */
const LABELLINGS = 1000;
/** Below this a scatter is rounding: all features are of order 1. */
const LEAST_SCATTER = 1e-9;
/** Least scatter within groups, as a share of that of all runs together, which no labelling changes. */
const LEAST_SHARE = 0.25;

export interface PermutationResult {
  /** Chance of so large a combined statistic if all runs are alike. */
  readonly p: number;
  /** The same for each of the three alone. */
  readonly parts: { readonly largest: number; readonly energy: number; readonly ensemble: number };
  /** The same for the largest difference among some of the features. */
  readonly quantityP: (features: readonly number[]) => number;
  /** |difference| of means from which on the largest one alone would have decided, for each feature. */
  readonly critical: readonly number[];
  /** Standard error of the difference of means, for each feature. */
  readonly standardError: readonly number[];
  /** Labellings gone through, the true one included. */
  readonly labellings: number;
}

/** Number of labellings of `a` and `b` runs that two-sided statistics tell apart. */
export function distinctLabellings(a: number, b: number, paired: boolean): number {
  if (paired) return 2 ** (a - 1);
  let count = 1;
  for (let k = 1; k <= Math.min(a, b); k++) count = (count * (a + b + 1 - k)) / k;
  return Math.round(a === b ? count / 2 : count);
}

/**
 * @param candidates - one row of features a run, each feature of order 1 or less
 * @param references - the same; if `paired`, row k starts from the same bodies as candidate k
 * @param falseAlarm - rate at which correct runs may be called different
 */
export function permutationTest(
  candidates: readonly Float64Array[],
  references: readonly Float64Array[],
  paired: boolean,
  falseAlarm: number,
): PermutationResult {
  const rows = [...candidates, ...references];
  const a = candidates.length;
  const features = rows[0].length;
  const pooled = scatterOf(rows, features);
  const differenceOf = paired ? pairedDifference(rows, a) : groupDifference(rows, a, pooled);
  const scaled = rows.map((row) => row.map((value, f) => value / pooled[f]));
  const distances = distanceMatrix(scaled);
  const scores = principalScores(scaled);
  const t = new Float64Array(features);
  const error = new Float64Array(features);
  const tables: Float64Array[] = [];
  const statistics: [number, number, number][] = [];
  let trueError = error;
  for (const labels of labellings(a, rows.length, paired)) {
    differenceOf(labels, t, error);
    if (tables.length === 0) trueError = error.slice();
    const size = t.map(Math.abs);
    tables.push(size);
    statistics.push([
      Math.log1p(size.reduce((most, value) => Math.max(most, value), 0)),
      Math.log1p(Math.max(0, energyDistance(distances, labels))),
      Math.log1p(outside(scores, labels)),
    ]);
  }
  const n = statistics.length;
  const part = [0, 1, 2].map((k) => {
    const column = Float64Array.from(statistics, (row) => row[k]);
    const mean = column.reduce((sum, value) => sum + value, 0) / n;
    const squares = column.reduce((sum, value) => sum + (value - mean) ** 2, 0);
    return { column, mean, sd: Math.sqrt(squares / n) || 1 };
  });
  const combined = Float64Array.from({ length: n }, (_, i) =>
    Math.max(...part.map(({ column, mean, sd }) => (column[i] - mean) / sd)),
  );
  const sorted = combined.slice().sort();
  const limit = sorted[Math.max(0, n - Math.floor(falseAlarm * n + 1e-9))] ?? sorted[n - 1];
  const criticalT = Math.expm1(Math.max(0, part[0].mean + limit * part[0].sd));
  return {
    p: rankOf(combined),
    parts: {
      largest: rankOf(part[0].column),
      energy: rankOf(part[1].column),
      ensemble: rankOf(part[2].column),
    },
    quantityP: (some) =>
      rankOf(Float64Array.from(tables, (row) => Math.max(...some.map((f) => row[f])))),
    critical: Array.from(trueError, (value) => value * criticalT),
    standardError: Array.from(trueError),
    labellings: n,
  };
}

/** Share of values that reach the first one; equal up to rounding counts. */
function rankOf(values: Float64Array): number {
  const least = values[0] - 1e-9 * Math.max(1, Math.abs(values[0]));
  return values.reduce((count, value) => count + (value >= least ? 1 : 0), 0) / values.length;
}

/** The true labelling first, then all others or a fair sample. */
function* labellings(a: number, n: number, paired: boolean): Generator<Uint8Array> {
  const truth = Uint8Array.from({ length: n }, (_, k) => (k < a ? 1 : 0));
  yield truth;
  const all = distinctLabellings(a, n - a, paired) * (paired || a === n - a ? 2 : 1);
  if (all <= LABELLINGS) {
    for (const labels of paired ? everySwap(a) : everyChoice(a, n)) {
      if (labels.some((value, k) => value !== truth[k])) yield labels;
    }
    return;
  }
  const random = new Random(1);
  for (let draw = 1; draw < LABELLINGS; draw++) {
    const labels = truth.slice();
    if (paired) {
      for (let k = 0; k < a; k++) if (random.uniform() < 0.5) [labels[k], labels[a + k]] = [0, 1];
    } else {
      for (let k = n - 1; k > 0; k--) {
        const other = Math.floor(random.uniform() * (k + 1));
        [labels[k], labels[other]] = [labels[other], labels[k]];
      }
    }
    yield labels;
  }
}

function* everySwap(a: number): Generator<Uint8Array> {
  for (let bits = 0; bits < 2 ** a; bits++) {
    yield Uint8Array.from({ length: 2 * a }, (_, k) => ((bits >> (k % a)) & 1) ^ (k < a ? 1 : 0));
  }
}

function* everyChoice(
  a: number,
  n: number,
  from = 0,
  chosen: number[] = [],
): Generator<Uint8Array> {
  if (chosen.length === a) {
    yield Uint8Array.from({ length: n }, (_, k) => (chosen.includes(k) ? 1 : 0));
    return;
  }
  for (let k = from; k <= n - (a - chosen.length); k++)
    yield* everyChoice(a, n, k + 1, [...chosen, k]);
}

type Difference = (labels: Uint8Array, t: Float64Array, error: Float64Array) => void;

function groupDifference(
  rows: readonly Float64Array[],
  a: number,
  pooled: Float64Array,
): Difference {
  const b = rows.length - a;
  return (labels, t, error) => {
    for (let f = 0; f < t.length; f++) {
      const mean = [0, 0];
      rows.forEach((row, k) => (mean[labels[k]] += row[f] / (labels[k] === 1 ? a : b)));
      let squares = 0;
      rows.forEach((row, k) => (squares += (row[f] - mean[labels[k]]) ** 2));
      // What varies in one run alone (a first escaper) would else stand out without bound.
      const least = LEAST_SHARE * pooled[f];
      const scatter = Math.max(least, Math.sqrt(squares / Math.max(1, a + b - 2)));
      error[f] = scatter * Math.sqrt(1 / a + 1 / b);
      t[f] = (mean[1] - mean[0]) / error[f];
    }
  };
}

function pairedDifference(rows: readonly Float64Array[], a: number): Difference {
  return (labels, t, error) => {
    for (let f = 0; f < t.length; f++) {
      let sum = 0;
      let squares = 0;
      for (let k = 0; k < a; k++) {
        const difference = (rows[k][f] - rows[a + k][f]) * (labels[k] === 1 ? 1 : -1);
        sum += difference;
        squares += difference ** 2;
      }
      const variance = Math.max(0, squares - (sum * sum) / a) / Math.max(1, a - 1);
      error[f] = Math.max(LEAST_SCATTER, Math.sqrt(variance)) / Math.sqrt(a);
      t[f] = sum / a / error[f];
    }
  };
}

/** Scatter of each feature over all runs, which no labelling changes. */
function scatterOf(rows: readonly Float64Array[], features: number): Float64Array {
  return Float64Array.from({ length: features }, (_, f) => {
    const mean = rows.reduce((sum, row) => sum + row[f], 0) / rows.length;
    const squares = rows.reduce((sum, row) => sum + (row[f] - mean) ** 2, 0);
    return Math.max(LEAST_SCATTER, Math.sqrt(squares / rows.length));
  });
}

function distanceMatrix(rows: readonly Float64Array[]): Float64Array[] {
  return rows.map((p) =>
    Float64Array.from(rows, (q) => Math.sqrt(p.reduce((sum, v, f) => sum + (v - q[f]) ** 2, 0))),
  );
}

/** 2 E|X − Y| − E|X − X'| − E|Y − Y'|, times the sizes of the groups over their sum. */
function energyDistance(distances: readonly Float64Array[], labels: Uint8Array): number {
  const sums = [0, 0, 0];
  const n = labels.length;
  let a = 0;
  for (let i = 0; i < n; i++) {
    a += labels[i];
    for (let j = 0; j < i; j++) sums[labels[i] + labels[j]] += distances[i][j];
  }
  const b = n - a;
  return (
    ((a * b) / n) * ((2 * sums[1]) / (a * b) - (2 * sums[2]) / (a * a) - (2 * sums[0]) / (b * b))
  );
}

/** Squares by which candidates' scores are outside ± 2 σ of the reference's, added up. */
function outside(scores: readonly Float64Array[], labels: Uint8Array): number {
  let total = 0;
  for (const column of scores) {
    let [sum, squares, count] = [0, 0, 0];
    column.forEach((score, k) => {
      if (labels[k] === 1) return;
      sum += score;
      squares += score * score;
      count++;
    });
    const mean = sum / count;
    const variance = Math.max(1e-12, squares / count - mean * mean);
    column.forEach((score, k) => {
      if (labels[k] === 1) total += Math.max(0, (score - mean) ** 2 / variance - 4);
    });
  }
  return total;
}
