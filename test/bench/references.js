/** The same bodies by the classical walk (Barnes & Hut 1986) on the engine's own tree. */
import { reusingMemory } from '../../dist/numerics/reuse.js';
import { buildOctree } from '../../dist/octree/build.js';
import { gatherMultipoles } from '../../dist/octree/forces.js';
import { sumsAtBodies } from '../../dist/octree/pointWalk.js';
import { NONE } from './models.js';
import { least, rms } from './tools.js';

/** With quadrupoles. */
const CLASSICAL = { order: 2, openingAngle: 0.7, softening: NONE };
/** Of more bodies than this it takes a part. */
const ALL_UP_TO = 1e6;

/**
 * Seconds that the walk takes for all bodies, and its rms error of φ over the mean.
 * @param exact - exact sums at some bodies
 */
export async function classicalWalk(particles, exact, crew) {
  return reusingMemory(async () => {
    const { count } = particles;
    const tree = await buildOctree(particles, crew);
    const source = await gatherMultipoles(tree, CLASSICAL.order, NONE, crew);
    const part = Math.max(1, Math.ceil(count / ALL_UP_TO));
    const places = Uint32Array.from({ length: Math.floor(count / part) }, (_, k) => k * part);
    const { seconds, result } = await least(1, () => sumsAtBodies(source, places, CLASSICAL, crew));
    const placeOf = new Map(Array.from(places, (place, k) => [tree.bodies.input[place], k]));
    const sampled = exact.filter(({ body }) => placeOf.has(body));
    const errors = sampled.map(
      ({ body, phi }) => (result.sums[2 * placeOf.get(body)] - phi) / exact.mean,
    );
    return { seconds: (seconds * count) / places.length, rms: rms(errors) };
  });
}
