/** Columns of potential and acceleration as a simulation would write them, by plain loops over pairs. */
import type { Softening } from '../../src/octree/softening.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { pairLaw } from '../octree/samples.ts';

export interface WrittenForces {
  readonly potential: Float64Array;
  readonly acceleration: {
    readonly x: Float64Array;
    readonly y: Float64Array;
    readonly z: Float64Array;
  };
}

/**
 * φ and a of all bodies from each other. Source: the definition of the sums and of the kernels (see
 * `pairLaw`).
 */
export function writtenForces(
  { mass, x, y, z, count }: Particles,
  softening: Softening,
  gravity = 1,
): WrittenForces {
  const column = () => new Float64Array(count);
  const potential = column();
  const acceleration = { x: column(), y: column(), z: column() };
  for (let i = 0; i < count; i++) {
    for (let j = 0; j < i; j++) {
      const d = [x[j] - x[i], y[j] - y[i], z[j] - z[i]];
      const { f, s } = pairLaw(softening, Math.hypot(...d));
      potential[i] -= gravity * mass[j] * f;
      potential[j] -= gravity * mass[i] * f;
      (['x', 'y', 'z'] as const).forEach((axis, k) => {
        acceleration[axis][i] += gravity * mass[j] * s * d[k];
        acceleration[axis][j] -= gravity * mass[i] * s * d[k];
      });
    }
  }
  return { potential, acceleration };
}

/** The same bodies with columns. */
export function withColumns(particles: Particles, columns: Partial<WrittenForces>): Particles {
  return { ...particles, columns: { ...particles.columns, ...columns } };
}

/** Accelerations changed one by one. */
export function changedVectors(
  { x, y, z }: WrittenForces['acceleration'],
  change: (component: number, i: number) => number,
): WrittenForces['acceleration'] {
  return { x: x.map(change), y: y.map(change), z: z.map(change) };
}
