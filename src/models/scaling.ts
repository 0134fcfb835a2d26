/** Moves and scales a set of bodies in place: into its own frame, to a virial ratio, onto an orbit. */
import { UnanswerableError, UsageError } from '../errors.ts';
import type { FloatColumn } from '../snapshot/particles.ts';
import type { BodyView, Motion } from './sampling.ts';

type Vector = readonly [number, number, number];

/**
 * Takes the set's centre of mass out of the positions and its mean velocity (weighted by mass) out of
 * the velocities, in place.
 * @returns what was taken out, in the set's own units
 */
export function recentre(particles: BodyView): { centreOfMass: Vector; meanVelocity: Vector } {
  const { x, y, z, vx, vy, vz } = particles;
  const [cx, cy, cz, ux, uy, uz] = [x, y, z, vx, vy, vz].map((column) =>
    removeMean(particles.mass, column),
  );
  return { centreOfMass: [cx, cy, cz], meanVelocity: [ux, uy, uz] };
}

/**
 * Two rounds: the second takes out the rounding of the first, which matters if the set was far from
 * the origin.
 */
function removeMean(mass: FloatColumn, column: FloatColumn): number {
  let removed = 0;
  for (let round = 0; round < 2; round++) {
    let sum = 0;
    let total = 0;
    for (let i = 0; i < column.length; i++) {
      sum += mass[i] * column[i];
      total += mass[i];
    }
    const mean = total === 0 ? 0 : sum / total;
    for (let i = 0; i < column.length; i++) column[i] -= mean;
    removed += mean;
  }
  return removed;
}

/** Multiplies all velocities by `factor` (finite, at least 0), in place. */
export function scaleVelocities(particles: Motion, factor: number): void {
  if (!(factor >= 0 && Number.isFinite(factor))) {
    throw new UsageError(
      'usage.velocityFactor',
      `The factor for velocities is ${factor}, but must be finite and at least 0.`,
      'Give a factor such as 0.5.',
    );
  }
  for (const column of [particles.vx, particles.vy, particles.vz]) {
    for (let i = 0; i < column.length; i++) column[i] *= factor;
  }
}

/** Adds one vector to all positions and one to all velocities, in place. */
export function shift(particles: Motion, offset: Vector, velocity: Vector): void {
  const { x, y, z, vx, vy, vz } = particles;
  addTo(x, offset[0]);
  addTo(y, offset[1]);
  addTo(z, offset[2]);
  addTo(vx, velocity[0]);
  addTo(vy, velocity[1]);
  addTo(vz, velocity[2]);
}

function addTo(column: FloatColumn, value: number): void {
  if (value === 0) return;
  for (let i = 0; i < column.length; i++) column[i] += value;
}

/**
 * Factor for the velocities that makes 2T/|W| exactly `ratio`.
 * @param kinetic - T > 0 in the frame of the set's mean velocity [mass · velocity²]
 * @param clausius - W < 0, the Clausius virial of the set's own forces [same unit]
 * @param ratio - wanted 2T/|W|, finite and at least 0 (0: all bodies at rest)
 * @throws UsageError `usage.virialRatio`; UnanswerableError `unanswerable.virialScaling` if T or W
 *   leaves nothing to scale (a single body, bodies at rest)
 */
export function virialScaling(kinetic: number, clausius: number, ratio: number): number {
  if (!(ratio >= 0 && Number.isFinite(ratio))) {
    throw new UsageError(
      'usage.virialRatio',
      `The wanted virial ratio is ${ratio}, but must be finite and at least 0.`,
      'Give 1 for equilibrium, less for a start that collapses.',
    );
  }
  if (!(kinetic > 0 && clausius < 0 && Number.isFinite(kinetic) && Number.isFinite(clausius))) {
    throw new UnanswerableError(
      'unanswerable.virialScaling',
      `The bodies have T = ${kinetic} and W = ${clausius}, but scaling to a virial ratio needs T above 0 and W below 0.`,
      'Use at least two bodies that move against each other.',
    );
  }
  return Math.sqrt((ratio * -clausius) / (2 * kinetic));
}
