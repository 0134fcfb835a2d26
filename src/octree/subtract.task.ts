/** The field of a few bodies on all that are kept, by direct sums. */
import type { TakeJob } from '../parallel/crew.ts';
import { pairKernelsOf, pairSofteningOf } from './pairs.ts';
import type { Softening } from './softening.ts';

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
  };
  readonly softening: Softening;
  readonly phi: Float64Array;
  readonly psi: Float64Array;
}

export function sumOfFew(round: FewRound, takeJob: TakeJob): void {
  const { x, y, z, kept, few, softening, phi, psi } = round;
  const { atPoint } = pairKernelsOf(softening.kernel, false);
  const soft = pairSofteningOf(softening.kernel, softening.length);
  const out = new Float64Array(5);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    for (let i = job * FEW_CHUNK; i < Math.min(kept.length, (job + 1) * FEW_CHUNK); i++) {
      if (kept[i] === 0) continue;
      out.fill(0, 0, 2);
      atPoint(x[i], y[i], z[i], few.x, few.y, few.z, few.mass, 0, few.mass.length, out, soft);
      phi[i] = out[0];
      if (psi.length > 0) psi[i] = out[1];
    }
  }
}
