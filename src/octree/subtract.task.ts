/** The field of a few bodies on all that are kept, by direct sums. */
import type { TakeJob } from '../parallel/crew.ts';
import { pairKernelsOf, pairSofteningOf } from './pairs.ts';
import { isOfEach, type Softening } from './softening.ts';

type Column = Float64Array | Float32Array;

export const FEW_CHUNK = 16384;

export interface FewRound {
  readonly x: Column;
  readonly y: Column;
  readonly z: Column;
  readonly kept: Uint8Array;
  readonly few: {
    readonly x: Float64Array;
    readonly y: Float64Array;
    readonly z: Float64Array;
    readonly mass: Float64Array;
    /** e² of each, where bodies have softening lengths of their own. */
    readonly squares: Float64Array;
  };
  readonly softening: Softening;
  readonly phi: Float64Array;
  readonly psi: Float64Array;
}

export function sumOfFew(round: FewRound, takeJob: TakeJob): void {
  const { x, y, z, kept, few, softening, phi, psi } = round;
  const lengths = isOfEach(softening) ? softening.lengths : undefined;
  const { atPoint } = pairKernelsOf(softening.kernel, false, lengths !== undefined);
  const soft = pairSofteningOf(softening.kernel, softening.length);
  const out = new Float64Array(5);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    for (let i = job * FEW_CHUNK; i < Math.min(kept.length, (job + 1) * FEW_CHUNK); i++) {
      if (kept[i] === 0) continue;
      out.fill(0, 0, 2);
      const own = lengths === undefined ? soft : lengths[i] * lengths[i];
      const { x: fx, y: fy, z: fz, mass, squares } = few;
      atPoint(x[i], y[i], z[i], fx, fy, fz, mass, 0, mass.length, out, own, squares);
      phi[i] = out[0];
      if (psi.length > 0) psi[i] = out[1];
    }
  }
}
