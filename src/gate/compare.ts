/** Is a run statistically the same as reference runs? */
import { InputError, UnanswerableError, UsageError } from '../errors.ts';
import { normalPoint } from '../numerics/normal.ts';
import type { Remark } from '../snapshot/particles.ts';
import { BANDED, bandsOf } from './compareBands.ts';
import { holm } from './compareHolm.ts';
import {
  distinctLabellings,
  permutationTest,
  type PermutationResult,
} from './comparePermutation.ts';
import { COMPARED_QUANTITIES, sameStart, type ComparedRun } from './compareRun.ts';

export interface CompareOptions {
  /** Rate at which correct runs may be called different (0.05). */
  readonly falseAlarm?: number;
  /** Parts of equal length into which the common time is cut (4, fewer for few snapshots). */
  readonly windows?: number;
}

export interface QuantityComparison {
  readonly quantity: string;
  readonly text: string;
  /** `relative`: differences are fractions (of a logarithm). */
  readonly scale: 'relative' | 'absolute';
  /** Mean of the candidates less that of the references, in the window where it stands out most. */
  readonly difference: number;
  readonly from: number;
  readonly to: number;
  /** 1σ of that difference if all runs are alike. */
  readonly standardError: number;
  /** Chance of so large a difference, and the same corrected for the number of quantities (Holm). */
  readonly p: number;
  readonly adjusted: number;
  readonly different: boolean;
  /** Smallest true difference that this test would have called different four times in five. */
  readonly detectable: number;
}

export interface Comparison {
  readonly comparison: 1;
  readonly verdict: 'same' | 'different';
  /** `permutation`, or `bands` of finite-N noise where the runs are too few for it. */
  readonly method: 'permutation' | 'bands';
  /** `same`: the runs start from the same bodies; `paired`: each candidate from those of one reference. */
  readonly start: 'same' | 'paired' | 'other';
  readonly candidates: readonly string[];
  readonly references: readonly string[];
  readonly falseAlarm: number;
  readonly p: number;
  readonly parts: PermutationResult['parts'] | null;
  readonly from: number;
  readonly to: number;
  readonly quantities: readonly QuantityComparison[];
  readonly remarks: readonly Remark[];
}

/** Power at which the smallest detectable difference is stated. */
const POWER_POINT = normalPoint(0.4); // One-sided 80 %.

/**
 * Compares candidate runs with reference runs.
 * @throws UsageError `usage.range`; InputError `input.otherSetup` for another N, mass, G, units or
 *   softening; UnanswerableError `unanswerable.noOverlap`, `unanswerable.noRuns`
 */
export function compareRuns(
  candidates: readonly ComparedRun[],
  references: readonly ComparedRun[],
  { falseAlarm = 0.05, windows = 4 }: CompareOptions = {},
): Comparison {
  if (!(falseAlarm > 0 && falseAlarm < 1))
    throw new UsageError(
      'usage.range',
      `--false-alarm is ${falseAlarm}`,
      'give a rate between 0 and 1',
    );
  if (!Number.isInteger(windows) || windows < 1)
    throw new UsageError('usage.range', `--windows is ${windows}`, 'give a whole number from 1');
  if (candidates.length === 0 || references.length === 0)
    throw new UnanswerableError(
      'unanswerable.noRuns',
      'there are no runs to compare',
      'give a run on either side',
    );
  const all = [...candidates, ...references];
  for (const run of all) refuseOtherSetup(run, references[0]);
  const from = Math.max(...all.map(({ times }) => times[0]));
  const to = Math.min(...all.map(({ times }) => times[times.length - 1]));
  if (to < from) {
    throw new UnanswerableError(
      'unanswerable.noOverlap',
      `the runs have no time in common: one begins at ${from}, another ends at ${to}`,
      'compare runs over the same times',
    );
  }
  const { paired, order, start, remarks } = pairing(candidates, references);
  const few = Math.min(...all.map((run) => run.times.filter((t) => t >= from && t <= to).length));
  const parts = to > from ? Math.max(1, Math.min(windows, Math.floor(few / 3))) : 1;
  const edges = Array.from({ length: parts + 1 }, (_, k) => from + ((to - from) * k) / parts);
  const shared = { falseAlarm, from, to, start, edges };
  const enough =
    distinctLabellings(candidates.length, references.length, paired) * falseAlarm >= 1 - 1e-9;
  const kept = COMPARED_QUANTITIES.filter(({ key }) => all.every(({ values }) => key in values));
  if (enough && all.length > 3) {
    return byPermutation(candidates, order, kept, paired, shared, remarks);
  }
  return byBands(candidates, references, kept, shared, remarks);
}

interface Shared {
  readonly falseAlarm: number;
  readonly from: number;
  readonly to: number;
  readonly start: Comparison['start'];
  readonly edges: readonly number[];
}

function byPermutation(
  candidates: readonly ComparedRun[],
  references: readonly ComparedRun[],
  kept: typeof COMPARED_QUANTITIES,
  paired: boolean,
  { edges, falseAlarm, ...shared }: Shared,
  remarks: readonly Remark[],
): Comparison {
  const windows = edges.length - 1;
  const rows = (runs: readonly ComparedRun[]) =>
    runs.map((run) =>
      Float64Array.from(
        kept.flatMap(({ key }) =>
          edges.slice(1).map((end, w) => meanOver(run, key, edges[w], end)),
        ),
      ),
    );
  const [a, b] = [rows(candidates), rows(references)];
  const test = permutationTest(a, b, paired, falseAlarm);
  const differenceAt = (f: number) => averageOf(a, f) - averageOf(b, f);
  const different = test.p <= falseAlarm + 1e-9;
  const found = kept.map((quantity, q) => {
    const at = edges.slice(1).map((_, w) => q * windows + w);
    const most = at.reduce((best, f) =>
      Math.abs(differenceAt(f)) / test.standardError[f] >
      Math.abs(differenceAt(best)) / test.standardError[best] + 1e-12
        ? f
        : best,
    );
    return { quantity, most, w: most - q * windows, p: test.quantityP(at) };
  });
  const adjusted = holm(found.map(({ p }) => p));
  return {
    comparison: 1,
    verdict: different ? 'different' : 'same',
    method: 'permutation',
    candidates: candidates.map(({ name }) => name),
    references: references.map(({ name }) => name),
    falseAlarm,
    p: test.p,
    parts: test.parts,
    ...shared,
    quantities: found.map(({ quantity, most, w, p }, k) => ({
      quantity: quantity.key,
      text: quantity.text,
      scale: quantity.scale,
      difference: differenceAt(most),
      from: edges[w],
      to: edges[w + 1],
      standardError: test.standardError[most],
      p,
      adjusted: adjusted[k],
      different: different && Math.abs(differenceAt(most)) >= test.critical[most],
      detectable: test.critical[most] + POWER_POINT * test.standardError[most],
    })),
    remarks,
  };
}

function byBands(
  candidates: readonly ComparedRun[],
  references: readonly ComparedRun[],
  kept: typeof COMPARED_QUANTITIES,
  { falseAlarm, from, to, start }: Shared,
  remarks: readonly Remark[],
): Comparison {
  const crossing = references[0].crossingTime;
  const banded = kept.filter(({ key }) => BANDED.includes(key));
  if (banded.length === 0) {
    throw new UnanswerableError(
      'unanswerable.noRuns',
      'the runs have neither a ratio nor radii in common that a band could be laid about',
      'compare runs of bodies that attract each other',
    );
  }
  const meanOf = (runs: readonly ComparedRun[], key: string) =>
    runs.reduce((sum, run) => sum + meanOver(run, key, from, to), 0) / runs.length;
  const differences = new Map(
    banded.map(({ key }) => [key, meanOf(candidates, key) - meanOf(references, key)]),
  );
  const span = crossing === null ? 0 : (to - from) / crossing;
  const same = start !== 'other';
  const bands = bandsOf(differences, candidates, references, span, same, falseAlarm);
  const adjusted = holm(banded.map(({ key }) => bands.get(key)?.p ?? 1));
  const quantities = banded.map(({ key, text, scale }, k): QuantityComparison => {
    const { standardError, p, critical } = bands.get(key) ?? {
      standardError: 0,
      p: 1,
      critical: 0,
    };
    return {
      quantity: key,
      text,
      scale,
      difference: differences.get(key) ?? 0,
      from,
      to,
      standardError,
      p,
      adjusted: adjusted[k],
      different: adjusted[k] <= falseAlarm,
      detectable: critical + POWER_POINT * standardError,
    };
  });
  // Bodies that are lost are no matter of chance.
  const exact = kept.filter(({ key }) => key === 'mass' || key === 'particles');
  for (const { key, text, scale } of exact) {
    const difference = meanOf(candidates, key) - meanOf(references, key);
    const different = Math.abs(difference) > 1e-6;
    const p = different ? 0 : 1;
    quantities.push({
      quantity: key,
      text,
      scale,
      difference,
      from,
      to,
      standardError: 0,
      p,
      adjusted: p,
      different,
      detectable: 1e-6,
    });
  }
  return {
    comparison: 1,
    verdict: quantities.some(({ different }) => different) ? 'different' : 'same',
    method: 'bands',
    candidates: candidates.map(({ name }) => name),
    references: references.map(({ name }) => name),
    p: Math.min(...quantities.map(({ adjusted: value }) => value)),
    parts: null,
    quantities,
    falseAlarm,
    from,
    to,
    start,
    remarks: [
      ...remarks,
      {
        code: 'compareBands',
        text: 'there are too few runs to exchange labels; differences are held against noise of finite N, which is known for runs near equilibrium, and energy errors are not judged',
        remedy: `give more runs: ${Math.ceil(1 / falseAlarm) - 1} references for one candidate, or six on either side`,
      },
    ],
  };
}

/** Time average of the straight lines between snapshots. */
function meanOver(run: ComparedRun, key: string, from: number, to: number): number {
  const { times, values } = run;
  const x = values[key];
  const at = (t: number, k: number) =>
    times[k + 1] === undefined || times[k + 1] === times[k]
      ? x[k]
      : x[k] + ((x[k + 1] - x[k]) * (t - times[k])) / (times[k + 1] - times[k]);
  if (!(to > from)) {
    let k = 0;
    while (k + 1 < times.length && times[k + 1] <= from) k++;
    return at(from, k);
  }
  let sum = 0;
  for (let k = 0; k + 1 < times.length; k++) {
    const begin = Math.max(from, times[k]);
    const end = Math.min(to, times[k + 1]);
    if (end > begin) sum += ((end - begin) * (at(begin, k) + at(end, k))) / 2;
  }
  return sum / (to - from);
}

function averageOf(rows: readonly Float64Array[], f: number): number {
  return rows.reduce((sum, row) => sum + row[f], 0) / rows.length;
}

/** Which runs start from the same bodies; paired if each candidate has a reference of its own. */
function pairing(
  candidates: readonly ComparedRun[],
  references: readonly ComparedRun[],
): {
  paired: boolean;
  order: readonly ComparedRun[];
  start: Comparison['start'];
  remarks: Remark[];
} {
  const runs = [...candidates, ...references];
  // Runs of one start tell of chaos alone, and may be exchanged freely.
  if (runs.every((run) => sameStart(run, references[0])))
    return { paired: false, order: references, start: 'same', remarks: [] };
  const left = [...references];
  const partners = candidates.map((candidate) => {
    const k = left.findIndex((reference) => sameStart(candidate, reference));
    return k < 0 ? null : left.splice(k, 1)[0];
  });
  const order = partners.filter((partner) => partner !== null);
  if (order.length === candidates.length && left.length === 0)
    return { paired: true, order, start: 'paired', remarks: [] };
  const remark: Remark = {
    code: 'compareSharedStart',
    text: `${order.length} of the candidates start from the bodies of a reference, the others do not: false alarms are rarer than asked, and less is seen`,
    remedy: 'give pairs only, or runs of other seeds only',
  };
  return {
    paired: false,
    order: references,
    start: 'other',
    remarks: order.length > 0 ? [remark] : [],
  };
}

function refuseOtherSetup(run: ComparedRun, reference: ComparedRun): void {
  const [a, b] = [run.setup, reference.setup];
  const unlike = (x: number, y: number) =>
    Math.abs(x - y) > 1e-6 * Math.max(Math.abs(x), Math.abs(y));
  const clash =
    a.particles !== b.particles
      ? `has ${a.particles} bodies at its start, the reference ${b.particles}`
      : a.units !== b.units
        ? `has the units ${a.units}, the reference ${b.units}`
        : unlike(a.gravity, b.gravity)
          ? `was measured with G = ${a.gravity}, the reference with ${b.gravity}`
          : a.softening.kernel !== b.softening.kernel ||
              unlike(a.softening.length, b.softening.length)
            ? `was measured with the softening ${a.softening.kernel} ${a.softening.length}, the reference with ${b.softening.kernel} ${b.softening.length}`
            : unlike(a.mass, b.mass)
              ? `has the mass ${a.mass} at its start, the reference ${b.mass}`
              : null;
  if (clash === null) return;
  throw new InputError(
    'input.otherSetup',
    `${run.name} ${clash}`,
    'compare runs of one setup, measured with the same options, and make the reference again if the setup has changed',
  );
}
