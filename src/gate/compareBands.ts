/**
 * Bands for too few runs to exchange labels: what finite N alone makes of the difference of two correct runs.
 *
 * Two variances. Runs of other seeds differ for ever, as their bodies were drawn apart: that of the radii is
 * taken from the sampling errors of the first snapshot. Runs from the same bodies share this noise; they
 * differ only in time, once chaos has parted them.
 */
import { normalPoint, normalTail } from '../numerics/normal.ts';
import type { ComparedRun } from './compareRun.ts';

/**
 * Standard deviations times √N_eff: of one moment and of a mean over crossing times between seeds, and in
 * time between runs of the same bodies. Measured on Plummer spheres of 64 to 256 bodies, see
 * docs/compare.md; r_v and the radii settle to what the energy of the draw asks for, and so differ more
 * after some crossing times than at the start.
 */
const NOISE: Readonly<
  Record<string, { readonly start: number; readonly settled: number; readonly time: number }>
> = {
  ratio: { start: 0.85, settled: 0.85, time: 0.6 },
  'lagrangian[0.1]': { start: 1.5, settled: 1.85, time: 1.6 },
  'lagrangian[0.5]': { start: 1.1, settled: 1.5, time: 0.9 },
  virialRadius: { start: 0.85, settled: 1.42, time: 0.5 },
};
/** Sampling errors of the radii × √N_eff of the spheres that the above were measured on. */
const PLUMMER_SAMPLING: Readonly<Record<string, number>> = {
  'lagrangian[0.1]': 1.27,
  'lagrangian[0.5]': 0.9,
};
/** Crossing times over which noise of the radii has a memory, and over which that of the ratio averages out. */
const MEMORY = { radii: 3, ratio: 0.6 } as const;

export interface Band {
  readonly standardError: number;
  readonly p: number;
  /** |difference| that is called different if the other quantities are alike. */
  readonly critical: number;
}

/** Quantities that there is a band for. */
export const BANDED = Object.keys(NOISE);

/**
 * @param difference - of the means over the span, candidates less references, by quantity
 * @param span - common to all runs [crossing times]
 * @param sameBodies - all runs start from the same bodies
 */
export function bandsOf(
  difference: ReadonlyMap<string, number>,
  candidates: readonly ComparedRun[],
  references: readonly ComparedRun[],
  span: number,
  sameBodies: boolean,
  falseAlarm: number,
): Map<string, Band> {
  const runs = [...candidates, ...references];
  const share = 1 / candidates.length + 1 / references.length;
  const root = Math.sqrt(references[0].setup.effectiveNumber);
  const bands = new Map<string, Band>();
  for (const [key, value] of difference) {
    const noise = NOISE[key];
    const averaged =
      key === 'ratio'
        ? // The mean of 2T + W is the change of the virial's boundary term over the time: it falls as 1/t.
          1 / Math.sqrt(1 + (span / MEMORY.ratio) ** 2)
        : Math.sqrt(Math.min(1, MEMORY.radii / Math.max(span, 1e-9)));
    const unit =
      span === 0
        ? noise.start
        : sameBodies
          ? noise.time * averaged
          : // Over time the ratio goes to 1 whatever the seed; the radii of one draw stay its own.
            noise.settled * (key === 'ratio' ? averaged : 1);
    const sigma = (unit / root) * shapeOf(key, runs, root);
    const standardError = Math.max(1e-9, sigma * Math.sqrt(share));
    bands.set(key, {
      standardError,
      p: normalTail(value / standardError),
      critical: standardError * normalPoint(falseAlarm / difference.size),
    });
  }
  return bands;
}

/** Sampling error of a radius over that of a Plummer sphere: a cusp or a shallow core has another one. */
function shapeOf(key: string, runs: readonly ComparedRun[], root: number): number {
  const errors = runs.flatMap(({ sampling }) =>
    key === 'lagrangian[0.1]'
      ? (sampling.inner ?? [])
      : key === 'lagrangian[0.5]'
        ? (sampling.half ?? [])
        : [],
  );
  if (errors.length === 0) return 1;
  const mean = errors.reduce((sum, value) => sum + value, 0) / errors.length;
  return (mean * root) / PLUMMER_SAMPLING[key];
}
