/**
 * Bands for too few runs to exchange labels: what finite N alone makes of the difference of two correct runs.
 *
 * Two variances. Runs of other seeds differ for ever, as their bodies were drawn apart: that of the radii is
 * taken from the sampling errors of the first snapshot. Runs from the same bodies share this noise; they
 * differ only in time, once chaos has parted them.
 */
import { normalPoint, normalTail } from '../numerics/normal.ts';
import type { ComparedRun } from './compareRun.ts';

/** Standard deviations times √N_eff of quantities without memory of a model: see docs/compare.md. */
const NOISE: Readonly<Record<string, { readonly seeds: number; readonly time: number }>> = {
  ratio: { seeds: 0.85, time: 0.6 },
  'lagrangian[0.1]': { seeds: 1.5, time: 1.6 },
  'lagrangian[0.5]': { seeds: 0.9, time: 0.9 },
  virialRadius: { seeds: 0.8, time: 0.5 },
};
/** Crossing times over which noise in time has a memory, and in which it averages out. */
const MEMORY = { ratio: 0.3, radii: 3 } as const;

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
  const [{ setup, sampling }] = references;
  const share = 1 / candidates.length + 1 / references.length;
  const bands = new Map<string, Band>();
  for (const [key, value] of difference) {
    const noise = NOISE[key];
    const root = Math.sqrt(setup.effectiveNumber);
    const isRatio = key === 'ratio';
    const measured =
      key === 'lagrangian[0.1]' ? sampling.inner : key === 'lagrangian[0.5]' ? sampling.half : null;
    const inTime =
      (noise.time / root) *
      Math.sqrt(Math.min(1, (isRatio ? MEMORY.ratio : MEMORY.radii) / Math.max(span, 1e-9)));
    // Over time the ratio goes to 1 whatever the seed; the radii of one draw stay its own.
    const between = sameBodies
      ? 0
      : isRatio
        ? span > 0
          ? 0
          : noise.seeds / root
        : (measured ?? noise.seeds / root);
    // At one time alone there is nothing to average: draws differ by what they differ at the start.
    const variance = span > 0 ? inTime ** 2 + between ** 2 : between ** 2;
    const standardError = Math.max(1e-9, Math.sqrt(variance * share));
    bands.set(key, {
      standardError,
      p: normalTail(value / standardError),
      critical: standardError * normalPoint(falseAlarm / difference.size),
    });
  }
  return bands;
}
