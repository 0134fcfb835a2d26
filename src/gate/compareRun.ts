/** Records of a run → the short form in which runs are compared and a reference is stored. */
import type { MeasureRecord } from '../dynamics/record.ts';
import { UnanswerableError } from '../errors.ts';
import { inOrderOfTime, radiusOf } from '../settling/series.ts';

/** What is compared, each without a unit: how it is made of a record, and how a difference reads. */
export interface ComparedQuantity {
  readonly key: string;
  readonly text: string;
  /** `relative`: the logarithm is compared, a difference is a fraction; `absolute`: the value itself. */
  readonly scale: 'relative' | 'absolute';
}

/** Quantities of a comparison, in the order of the page. */
export const COMPARED_QUANTITIES: readonly ComparedQuantity[] = [
  { key: 'ratio', text: '2T/|U|, or 2T/|W| where forces are softened', scale: 'absolute' },
  { key: 'lagrangian[0.1]', text: 'radius of a tenth of the mass', scale: 'relative' },
  { key: 'lagrangian[0.5]', text: 'half-mass radius', scale: 'relative' },
  { key: 'virialRadius', text: 'G M²/(2|U|)', scale: 'relative' },
  { key: 'velocityDispersion', text: 'velocity dispersion', scale: 'relative' },
  { key: 'boundShare', text: 'share of the mass that is bound', scale: 'absolute' },
  { key: 'energyChange', text: '(E − E_0)/|E_0|', scale: 'absolute' },
  { key: 'meanVelocityChange', text: 'change of the mean velocity over σ', scale: 'absolute' },
  { key: 'angularMomentumChange', text: '|L − L_0| over M r_h σ', scale: 'absolute' },
  { key: 'mass', text: 'mass of all bodies', scale: 'relative' },
  { key: 'particles', text: 'number of bodies', scale: 'relative' },
];

/** What must be alike for a comparison to mean anything. */
export interface RunSetup {
  /** Bodies in the first snapshot. */
  readonly particles: number;
  readonly effectiveNumber: number;
  readonly mass: number;
  readonly gravity: number;
  readonly units: string;
  readonly softening: { readonly length: number; readonly kernel: string };
}

export interface ComparedRun {
  readonly name: string;
  readonly setup: RunSetup;
  /** Crossing time of the first snapshot [time]; null if it has none. */
  readonly crossingTime: number | null;
  /** 1σ of the logarithm of r_10 and r_h over independent draws of the first snapshot. */
  readonly sampling: { readonly inner: number | null; readonly half: number | null };
  readonly times: readonly number[];
  /** One list a quantity, as long as `times`; a quantity that a snapshot lacks is not there. */
  readonly values: Readonly<Record<string, readonly number[]>>;
}

/**
 * The short form of one run.
 * @param records - of one run, in any order; of several at one time the last counts
 * @throws UnanswerableError `unanswerable.emptyRun` if none has a time (one alone needs none)
 */
export function comparedRun(records: readonly MeasureRecord[], name: string): ComparedRun {
  const alone = records.length === 1 && records[0].time === null;
  const ordered = alone ? [...records] : inOrderOfTime(records).ordered;
  if (ordered.length === 0) {
    throw new UnanswerableError(
      'unanswerable.emptyRun',
      `${name}: no snapshot with a time to compare`,
      'give snapshots that could be measured and say their time',
    );
  }
  const first = ordered[0];
  const softened = first.settings.softening.value.kernel !== 'none';
  const values: Record<string, number[]> = {};
  for (const { key } of COMPARED_QUANTITIES) {
    const column = ordered.map((record) => valueOf(key, record, first, softened));
    if (column.every((value) => value !== null && Number.isFinite(value))) {
      values[key] = column as number[];
    }
  }
  const { settings, whole, lagrangian } = first;
  const sampling = (fraction: number): number | null => {
    const k = lagrangian.fractions.indexOf(fraction);
    const radius = lagrangian.radii[k] ?? null;
    const error = lagrangian.errors[k] ?? null;
    return radius === null || error === null || !(radius > 0) ? null : error / radius;
  };
  return {
    name,
    setup: {
      particles: whole.particles,
      effectiveNumber: first.effectiveNumber,
      mass: whole.mass,
      gravity: settings.gravity.value,
      units: JSON.stringify(settings.units.value),
      softening: {
        length: settings.softening.value.length,
        kernel: settings.softening.value.kernel,
      },
    },
    crossingTime: first.crossingTime,
    sampling: { inner: sampling(0.1), half: sampling(0.5) },
    times: ordered.map(({ time }) => time ?? 0),
    values,
  };
}

function valueOf(
  key: string,
  record: MeasureRecord,
  first: MeasureRecord,
  softened: boolean,
): number | null {
  const { whole, frame } = record;
  const log = (value: number | null) => (value !== null && value > 0 ? Math.log(value) : null);
  const dispersion = record.velocityDispersion;
  const distance = (a: readonly number[], b: readonly number[]) =>
    Math.hypot(a[0] - b[0], a[1] - b[1], a[2] - b[2]);
  switch (key) {
    case 'ratio':
      return softened ? whole.clausiusRatio : whole.virialRatio;
    case 'lagrangian[0.1]':
      return log(radiusOf(record.lagrangian, 0.1));
    case 'lagrangian[0.5]':
      return log(radiusOf(record.lagrangian, 0.5));
    case 'virialRadius':
      return log(record.virialRadius);
    case 'velocityDispersion':
      return log(dispersion);
    case 'boundShare':
      return record.bound.mass / whole.mass;
    case 'energyChange':
      return first.whole.energy === 0
        ? null
        : (whole.energy - first.whole.energy) / Math.abs(first.whole.energy);
    case 'meanVelocityChange':
      return distance(frame.meanVelocity, first.frame.meanVelocity) / first.velocityDispersion;
    case 'angularMomentumChange':
      return (
        distance(frame.angularMomentum, first.frame.angularMomentum) /
        (first.whole.mass * first.halfMassRadius * first.velocityDispersion)
      );
    case 'mass':
      return log(whole.mass);
    default:
      return log(whole.particles);
  }
}

/** Whether two runs start from one and the same snapshot, to 1e-6 in every quantity. */
export function sameStart(a: ComparedRun, b: ComparedRun): boolean {
  return (
    Math.abs(a.times[0] - b.times[0]) < 1e-9 * Math.max(1, Math.abs(a.times[0])) &&
    Object.entries(a.values).every(
      ([key, column]) => key in b.values && Math.abs(column[0] - b.values[key][0]) < 1e-6,
    )
  );
}
