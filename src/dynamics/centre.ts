/** Four ways to say where the centre of a system is. */
import type { Forces } from '../octree/forces.ts';
import { densityCentre } from '../octree/neighbours.ts';
import type { Octree } from '../octree/tree.ts';
import type { Crew } from '../parallel/crew.ts';
import type { CentreMethod, Vector } from './record.ts';
import type { SetFrame } from './sums.ts';
import type { Bodies } from './sums.task.ts';

export interface Centre {
  readonly centre: Vector;
  /** The method that was used: another than asked for where that one gives no answer. */
  readonly method: CentreMethod;
  readonly coreRadius: number | null;
}

/**
 * The centre by the method asked for; the core radius always comes from densities.
 * Falls back to the centre of mass where there are too few bodies for densities.
 */
export async function findCentre(
  bodies: Bodies,
  whole: SetFrame,
  forces: Forces,
  tree: Octree,
  method: CentreMethod,
  crew: Crew,
): Promise<Centre> {
  const density = await densityCentre(tree, crew);
  const coreRadius = density?.coreRadius ?? null;
  const [x, y, z] = whole.frame;
  const massCentre: Vector = [x, y, z];
  switch (method) {
    case 'density':
      return density
        ? { centre: density.centre, method, coreRadius }
        : { centre: massCentre, method: 'mass', coreRadius };
    case 'shrinking':
      return { centre: shrinkingSphere(bodies, massCentre), method, coreRadius };
    case 'potential': {
      const i = deepest(forces.potential);
      return { centre: [bodies.x[i], bodies.y[i], bodies.z[i]], method, coreRadius };
    }
    case 'mass':
      return { centre: massCentre, method, coreRadius };
  }
}

function deepest(potential: Float64Array): number {
  let best = 0;
  for (let i = 1; i < potential.length; i++) if (potential[i] < potential[best]) best = i;
  return best;
}

const SHRINK = 0.975;
const LAST_SHARE = 0.01;
const FEWEST = 50;

/**
 * Centre of mass inside a sphere that shrinks by 2.5 % a step about the last one, until it holds 1 %
 * of the bodies or 50. Source: Power et al. 2003, MNRAS 338, 14 (from memory); the floor of 50 bodies
 * is common practice.
 */
export function shrinkingSphere(bodies: Bodies, start: Vector): Vector {
  const { x, y, z, mass, count } = bodies;
  const inside = new Uint32Array(count);
  for (let i = 0; i < count; i++) inside[i] = i;
  let size = count;
  let [cx, cy, cz] = start;
  const fewest = Math.max(Math.min(FEWEST, count), Math.ceil(LAST_SHARE * count));
  let radius = Infinity;
  while (size > fewest) {
    // From the farthest body inward, so that empty space costs no steps.
    let farthest2 = 0;
    for (let k = 0; k < size; k++) {
      const i = inside[k];
      const d2 = (x[i] - cx) ** 2 + (y[i] - cy) ** 2 + (z[i] - cz) ** 2;
      if (d2 > farthest2) farthest2 = d2;
    }
    radius = SHRINK * Math.min(radius, Math.sqrt(farthest2));
    if (!(radius > 0)) break;
    let kept = 0;
    let m = 0;
    let sx = 0;
    let sy = 0;
    let sz = 0;
    for (let k = 0; k < size; k++) {
      const i = inside[k];
      const dx = x[i] - cx;
      const dy = y[i] - cy;
      const dz = z[i] - cz;
      if (dx * dx + dy * dy + dz * dz > radius * radius) continue;
      inside[kept++] = i;
      m += mass[i];
      sx += mass[i] * dx;
      sy += mass[i] * dy;
      sz += mass[i] * dz;
    }
    if (kept === 0 || !(m > 0)) break;
    size = kept;
    cx += sx / m;
    cy += sy / m;
    cz += sz / m;
  }
  return [cx, cy, cz];
}
