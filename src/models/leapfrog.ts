/**
 * A small integrator for demonstrations and tests: leapfrog with one constant time step.
 *
 * Kick, drift, kick: second order, symplectic and reversible, and momentum is kept to rounding where
 * forces are direct sums. Source: Binney & Tremaine 2008, section 3.4.1. It has no individual steps and
 * no regularisation: soften close encounters, or they will break it.
 */
import { UsageError } from '../errors.ts';
import { sumForces } from '../octree/forces.ts';
import type { Softening } from '../octree/softening.ts';
import type { Crew } from '../parallel/crew.ts';
import { allocateColumn, type FloatColumn, type Particles } from '../snapshot/particles.ts';

export interface LeapfrogOptions {
  /** G [length · velocity² / mass]. */
  readonly gravity: number;
  readonly softening: Softening;
  /** Longest time step; it is shortened so that a whole number of steps makes `every`. */
  readonly timeStep: number;
  /** Time from one snapshot to the next. */
  readonly every: number;
  /** Snapshots to give, the first one included. */
  readonly snapshots: number;
  /** Relative error of U wanted from the tree, beyond the number of bodies that are summed directly. */
  readonly errorWanted?: number;
}

/**
 * Runs bodies from where they are and gives snapshots, the first at once. Each has its own arrays, time
 * counted from that of `start` (0 if it has none), and states G and the softening.
 * @throws UsageError `usage.timeStep` if a time or a number of snapshots is not positive
 */
export async function* leapfrog(
  start: Particles,
  options: LeapfrogOptions,
  crew: Crew,
): AsyncGenerator<Particles> {
  const { timeStep, every, snapshots } = options;
  for (const [name, value] of Object.entries({ timeStep, every, snapshots })) {
    if (value > 0 && Number.isFinite(value)) continue;
    throw new UsageError('usage.timeStep', `${name} is ${value}`, 'give a number above 0');
  }
  const steps = Math.ceil(every / timeStep);
  const step = every / steps;
  const first = start.time ?? 0;
  const state = copyOf(start, options, first);
  const { x, y, z, vx, vy, vz } = state;
  const accelerations = async () => {
    const { gravity, softening, errorWanted = 1e-5 } = options;
    const forces = await sumForces(
      state,
      { gravity, softening, errorWanted, accelerations: true },
      crew,
    );
    if (forces.acceleration === null) throw new Error('no accelerations');
    return forces.acceleration;
  };
  let a = await accelerations();
  yield copyOf(state, options, first);
  for (let k = 1; k < snapshots; k++) {
    for (let s = 0; s < steps; s++) {
      advance(vx, a.x, step / 2);
      advance(vy, a.y, step / 2);
      advance(vz, a.z, step / 2);
      advance(x, vx, step);
      advance(y, vy, step);
      advance(z, vz, step);
      a = await accelerations();
      advance(vx, a.x, step / 2);
      advance(vy, a.y, step / 2);
      advance(vz, a.z, step / 2);
    }
    yield copyOf(state, options, first + k * every);
  }
}

function advance(column: FloatColumn, rate: FloatColumn, time: number): void {
  for (let i = 0; i < column.length; i++) column[i] += rate[i] * time;
}

/** A copy in double precision. */
function copyOf(from: Particles, options: LeapfrogOptions, time: number): Particles {
  const copy = (column: FloatColumn) => {
    const to = allocateColumn(column.length);
    to.set(column);
    return to;
  };
  return {
    ...from,
    mass: copy(from.mass),
    x: copy(from.x),
    y: copy(from.y),
    z: copy(from.z),
    vx: copy(from.vx),
    vy: copy(from.vy),
    vz: copy(from.vz),
    time,
    gravity: options.gravity,
    softening: options.softening.kernel === 'plummer' ? options.softening.length : null,
  };
}
