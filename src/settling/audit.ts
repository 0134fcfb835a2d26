/** What a run should have kept: energy, momentum, centre of mass, mass and bodies. */
import type { MeasureRecord } from '../dynamics/record.ts';

export interface Audit {
  /** Largest |E − E_0| over the larger of |E_0| and |U_0|/4, and when; null if softening is not stated. */
  readonly energyDrift: number | null;
  readonly energyDriftAt: number | null;
  /** What the measured errors of U alone would show: smaller drifts cannot be seen. */
  readonly energyFloor: number;
  /** Largest change of the mean velocity over the velocity dispersion. */
  readonly momentumDrift: number;
  /** Largest departure of the centre of mass from its straight path over the half-mass radius. */
  readonly centreDrift: number;
  /** Largest change of the angular momentum over M r_h σ. */
  readonly angularMomentumDrift: number;
  /** Whether mass and number of bodies stayed the same. */
  readonly massKept: boolean;
  readonly particlesKept: boolean;
  /** Largest step of E between neighbouring snapshots over all of its drift, and when; null if nothing drifts. */
  readonly largestStep: { readonly share: number; readonly at: number } | null;
}

export function auditOf(records: readonly MeasureRecord[]): Audit {
  const [first] = records;
  const start = first.whole;
  const scale = Math.max(Math.abs(start.energy), Math.abs(start.potential) / 4);
  const stated = records.every(({ settings }) => settings.softening.from !== 'default');
  const time = (record: MeasureRecord) => record.time ?? 0;
  const most = (of: (record: MeasureRecord) => number) =>
    records.reduce((largest, record) => Math.max(largest, of(record)), 0);
  const drift = (record: MeasureRecord) => Math.abs(record.whole.energy - start.energy) / scale;
  const worst = records.reduce((a, b) => (drift(b) > drift(a) ? b : a), first);
  const velocity = first.velocityDispersion || 1;
  const radius = first.halfMassRadius || 1;
  const away = (a: readonly number[], b: readonly number[]) =>
    Math.hypot(...a.map((value, k) => value - b[k]));
  let step = 0;
  let at = time(first);
  for (let k = 1; k < records.length; k++) {
    const here = Math.abs(records[k].whole.energy - records[k - 1].whole.energy) / scale;
    if (here > step) {
      step = here;
      at = time(records[k]);
    }
  }
  const floor = most(({ whole }) => whole.potentialError) / scale;
  return {
    energyDrift: stated ? drift(worst) : null,
    energyDriftAt: stated ? time(worst) : null,
    energyFloor: floor,
    momentumDrift:
      most(({ frame }) => away(frame.meanVelocity, first.frame.meanVelocity)) / velocity,
    centreDrift:
      most((record) => {
        const path = first.frame.centreOfMass.map(
          (x, k) => x + first.frame.meanVelocity[k] * (time(record) - time(first)),
        );
        return away(record.frame.centreOfMass, path);
      }) / radius,
    angularMomentumDrift:
      most(({ frame }) => away(frame.angularMomentum, first.frame.angularMomentum)) /
      (start.mass * radius * velocity),
    massKept: records.every(({ whole }) => Math.abs(whole.mass / start.mass - 1) < 1e-9),
    particlesKept: records.every(({ whole }) => whole.particles === start.particles),
    largestStep: stated && drift(worst) > floor ? { share: step / drift(worst), at } : null,
  };
}
