/** Series of made-up records for tests of rules. */
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { madeRecord } from '../cli/made.ts';

export interface MadePoint {
  readonly ratio?: number | null;
  readonly noise?: number | null;
  readonly radius?: number;
  readonly energy?: number;
}

/** One record a point, `spacing` crossing times apart; the crossing time is 1. */
export function madeSeries(
  points: readonly MadePoint[],
  spacing = 0.5,
  softening: 'default' | 'option' = 'option',
): MeasureRecord[] {
  return points.map(({ ratio = 1, noise = 0.01, radius = 1, energy = -0.25 }, k) => {
    const record = madeRecord({ file: `made_${k}`, time: k * spacing, crossingTime: 1 });
    const balance = {
      ...record.whole,
      virialRatio: ratio,
      clausiusRatio: ratio,
      noise,
      energy,
      potential: -0.5,
      potentialError: 1e-6,
    };
    const radii = { fractions: [0.1, 0.5], radii: [0.4 * radius, radius], errors: [0.02, 0.03] };
    return {
      ...record,
      whole: balance,
      bound: balance,
      lagrangian: radii,
      boundLagrangian: radii,
      halfMassRadius: radius,
      settings: {
        ...record.settings,
        softening: { ...record.settings.softening, from: softening },
      },
    };
  });
}
