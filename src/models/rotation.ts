/**
 * Rotation about the z axis without a change of energy.
 *
 * A body of a spherical model may move either way about the axis: the distribution function stays a
 * solution if some of the bodies with L_z < 0 are turned to the other sense. Source: Lynden-Bell 1960,
 * MNRAS 120, 204.
 */
import type { Random } from '../numerics/random.ts';
import type { Motion } from './sampling.ts';

/**
 * Turns the share |rotation| of those of bodies `begin` … `end − 1` that move against the sense of its
 * sign, in place: v_φ becomes −v_φ.
 */
export function turn(
  { x, y, vx, vy }: Motion,
  rotation: number,
  random: Random,
  begin: number,
  end: number,
): void {
  const share = Math.abs(rotation);
  const sense = Math.sign(rotation);
  for (let i = begin; i < end; i++) {
    const isDrawn = random.uniform() < share;
    const lz = x[i] * vy[i] - y[i] * vx[i];
    if (!isDrawn || !(lz * sense < 0)) continue;
    const twice = (2 * lz) / (x[i] * x[i] + y[i] * y[i]);
    vx[i] += twice * y[i];
    vy[i] -= twice * x[i];
  }
}
