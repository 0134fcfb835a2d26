/** Escapers: bodies of a model that are given a hyperbolic orbit outwards. */
import type { Random } from '../numerics/random.ts';
import type { BodyView } from './sampling.ts';

/**
 * Gives bodies `begin` … `end − 1` the speed √(speed² − 2φ(r)) at their places, in a direction without
 * preference within the half that leads outwards, in place.
 * @param potential - φ of the sphere [velocity²], r from its centre at the origin
 * @param speed - at infinity [velocity]
 */
export function release(
  { x, y, z, vx, vy, vz }: BodyView,
  potential: (r: number) => number,
  speed: number,
  random: Random,
  begin: number,
  end: number,
): void {
  const direction = new Float64Array(3);
  for (let i = begin; i < end; i++) {
    const r = Math.hypot(x[i], y[i], z[i]);
    const now = Math.sqrt(speed * speed - 2 * potential(r));
    random.unitVector(direction);
    const outwards = x[i] * direction[0] + y[i] * direction[1] + z[i] * direction[2];
    const signed = outwards < 0 ? -now : now;
    vx[i] = signed * direction[0];
    vy[i] = signed * direction[1];
    vz[i] = signed * direction[2];
  }
}
