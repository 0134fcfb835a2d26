/** Records → the track that the rule judges: which bodies, which ratio, in which unit of time. */
import type { Balance, LagrangianRadii, MeasureRecord } from '../dynamics/record.ts';
import type { Remark } from '../snapshot/particles.ts';
import { median } from './blocks.ts';
import type { Track } from './rule.ts';

export type SetName = 'whole' | 'bound' | 'pairsMerged';
export type RatioKind = 'virialRatio' | 'clausiusRatio';

export interface Series {
  /** Records that are judged, in order of time, one a time. */
  readonly records: readonly MeasureRecord[];
  readonly set: SetName;
  readonly ratio: RatioKind;
  /** Length of a crossing time [time]: the first snapshot's or the median of the second half, whichever is less. */
  readonly crossingTime: number;
  readonly track: Track;
  readonly remarks: readonly Remark[];
}

/** Share of the mass that is unbound above which the bound set is judged. */
const UNBOUND_SHARE = 0.01;

/** Records of known time in its order; of several at one time the last one given, as of a run that was restarted. */
export function inOrderOfTime(records: readonly MeasureRecord[]): {
  readonly ordered: MeasureRecord[];
  readonly remarks: Remark[];
} {
  const byTime = new Map<number, MeasureRecord>();
  let timeless = 0;
  let repeated = 0;
  for (const record of records) {
    if (record.time === null) timeless++;
    else {
      if (byTime.has(record.time)) repeated++;
      byTime.set(record.time, record);
    }
  }
  const remarks: Remark[] = [];
  if (timeless > 0) {
    remarks.push({
      code: 'timeUnknown',
      text: `${timeless} snapshot(s) do not say their time and are left out`,
      remedy: 'give times in the snapshots’ headers or metadata',
    });
  }
  if (repeated > 0) {
    remarks.push({
      code: 'timeRepeated',
      text: `${repeated} time(s) occur more than once, as after a restart; the later file is kept`,
      remedy: 'take the files of the abandoned part away if that is wrong',
    });
  }
  return { ordered: [...byTime.values()].sort((a, b) => (a.time ?? 0) - (b.time ?? 0)), remarks };
}

/**
 * The series of what can be judged, or null if fewer than two records have a time and figures.
 * The bound set is taken where more than 1 % of the mass is unbound at the end: escapers keep their
 * kinetic energy, and the ratio of all bodies then tells of imbalance where there is none.
 */
export function seriesOf(records: readonly MeasureRecord[]): Series | null {
  const { ordered, remarks } = inOrderOfTime(records);
  const last = ordered.at(-1);
  if (last === undefined) return null;
  const boundShare = last.bound.mass / last.whole.mass;
  // What has come apart is no remnant with escapers.
  const set: SetName =
    boundShare < 1 - UNBOUND_SHARE && boundShare > 0.5
      ? 'bound'
      : pairsRule(ordered)
        ? 'pairsMerged'
        : 'whole';
  const softened = ordered.some(({ settings }) => settings.softening.value.kernel !== 'none');
  const ratio: RatioKind = softened ? 'clausiusRatio' : 'virialRatio';
  const judged = ordered.filter(
    (record) =>
      (balanceOf(record, set)?.[ratio] ?? null) !== null &&
      record.crossingTime !== null &&
      (radiusOf(radiiOf(record, set), 0.5) ?? 0) > 0,
  );
  if (judged.length < 2) return null;
  const late = judged.slice(judged.length >> 1);
  const typical = median(late.map((record) => record.crossingTime as number));
  // A system that flies apart is judged by the time it had, not by the ever longer one that it has.
  const crossingTime = Math.min(judged[0].crossingTime as number, typical);
  const column = (of: (record: MeasureRecord) => number) => Float64Array.from(judged, of);
  const optional = (of: (record: MeasureRecord) => number | null): Float64Array | null => {
    const values = judged.map(of);
    return values.every((value) => value !== null && Number.isFinite(value))
      ? Float64Array.from(values as number[])
      : null;
  };
  const track: Track = {
    time: column((record) => (record.time as number) / crossingTime),
    ratio: column((record) => balanceOf(record, set)?.[ratio] as number),
    logHalf: column((record) => Math.log(radiusOf(radiiOf(record, set), 0.5) as number)),
    logInner: optional((record) => logOf(radiusOf(radiiOf(record, set), 0.1))),
    logVirial: optional((record) => logOf(virialRadiusOf(record, set))),
    energyError: energyErrors(judged),
    effectiveNumber: median(judged.map(({ effectiveNumber }) => effectiveNumber)),
    relaxationTime: relaxationOf(late, crossingTime),
    massChange: Math.abs(Math.log(judged[judged.length - 1].whole.mass / judged[0].whole.mass)),
  };
  return { records: judged, set, ratio, crossingTime, track, remarks };
}

/** The balance of a set; null where it was not measured. */
export const balanceOf = (record: MeasureRecord, set: SetName): Balance | null =>
  record[set] ?? null;

/** Energy of hard pairs over |U| above which they rule the ratio. */
const PAIRS_SHARE = 0.05;

/** Whether hard pairs were sought throughout, and have a share of U that is not small. */
function pairsRule(records: readonly MeasureRecord[]): boolean {
  const shares = records.map(({ pairsMerged, hardPairsEnergy, whole }) =>
    pairsMerged && typeof hardPairsEnergy === 'number'
      ? Math.abs(hardPairsEnergy / whole.potential)
      : null,
  );
  return (
    shares.every((share) => share !== null) && shares.some((share) => (share ?? 0) > PAIRS_SHARE)
  );
}

/** Radii are those of the bodies themselves, whether or not pairs count as one in the balance. */
export const radiiOf = (record: MeasureRecord, set: SetName): LagrangianRadii =>
  set === 'bound' ? record.boundLagrangian : record.lagrangian;

export function radiusOf({ fractions, radii }: LagrangianRadii, fraction: number): number | null {
  return radii[fractions.indexOf(fraction)] ?? null;
}

const logOf = (value: number | null): number | null =>
  value !== null && value > 0 ? Math.log(value) : null;

/** r_v = G M²/(2|U|) of the set: it needs no centre, so a centre that hops cannot spoil it. */
export function virialRadiusOf(
  { settings, ...record }: MeasureRecord,
  set: SetName,
): number | null {
  const { mass, potential } = record[set] ?? record.whole;
  return potential < 0 ? (settings.gravity.value * mass * mass) / (-2 * potential) : null;
}

function relaxationOf(late: readonly MeasureRecord[], crossingTime: number): number | null {
  const times = late.flatMap(({ relaxation }) => relaxation.time ?? []);
  return times.length > 0 ? median(times) / crossingTime : null;
}

/**
 * (E − E_0)/|E_0| of all bodies, or null where it may not be judged: without a stated softening or G the
 * potential may not be the run's own; with other bodies or mass it is another system.
 */
function energyErrors(records: readonly MeasureRecord[]): Float64Array | null {
  const [first] = records;
  const { particles, mass } = first.whole;
  const same = records.every(
    ({ whole }) => whole.particles === particles && Math.abs(whole.mass / mass - 1) < 1e-9,
  );
  const stated = records.every(({ settings }) => settings.softening.from !== 'default');
  // In a field from outside T + U alone is not kept.
  const alone = records.every(({ external }) => external === undefined);
  if (!same || !stated || !alone) return null;
  const start = first.whole.energy;
  const scale = Math.max(Math.abs(start), Math.abs(first.whole.potential) / 4);
  return Float64Array.from(records, ({ whole }) => (whole.energy - start) / scale);
}
