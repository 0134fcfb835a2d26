/** Taking bodies away from a field against the field of those that stay. */
import { describe, expect, it } from 'vitest';
import { sumForces } from '../../src/octree/forces.ts';
import { LEVELS } from '../../src/octree/levels.ts';
import { NO_SOFTENING, type Softening } from '../../src/octree/softening.ts';
import { subtractBodies } from '../../src/octree/subtract.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { columnsOf, modelColumns, plainField, rms, type Columns } from './samples.ts';

/** Removes every k-th body and compares what is left with plain sums over the rest, relative to the rms φ. */
async function errorsAfter(
  bodies: Columns,
  every: number,
  softening: Softening,
  options: { exact?: boolean; level?: (typeof LEVELS)[number] },
) {
  const count = bodies.mass.length;
  const common = { gravity: 2, softening, errorWanted: 1e-5 };
  const forces = await sumForces(bodies, { ...common, ...options });
  const kept = Uint8Array.from({ length: count }, (_, i) => (i % every ? 1 : 0));
  const indices = Array.from({ length: count }, (_, i) => i);
  const removed = Uint32Array.from(indices.filter((i) => kept[i] === 0));
  const stay = indices.filter((i) => kept[i] === 1);
  const before = { potential: forces.potential.slice(), share: forces.clausiusShare.slice() };
  const potential = forces.potential.slice();
  const clausiusShare =
    forces.clausiusShare === forces.potential ? potential : forces.clausiusShare.slice();
  const field = { potential, clausiusShare };
  const done = await subtractBodies(bodies, removed, kept, forces, field, crewOfOne());
  const { mass, x, y, z } = bodies;
  const { lengths } = softening;
  const ofStay =
    lengths === undefined
      ? softening
      : { ...softening, lengths: lengths.filter((_, i) => kept[i]) };
  const plain = plainField(columnsOf(stay.map((i) => [mass[i], x[i], y[i], z[i]])), ofStay);
  const error = (mine: Float64Array, plainOnes: Float64Array) =>
    rms(stay.map((i, k) => mine[i] - 2 * plainOnes[k])) / (2 * rms(plain.phi));
  // The forces of all are not touched.
  expect(forces.potential).toEqual(before.potential);
  expect(forces.clausiusShare).toEqual(before.share);
  return {
    done,
    phi: error(potential, plain.phi),
    share: error(clausiusShare, plain.share),
    removed: removed.length,
  };
}

/** Lengths of the bodies' own; every number of bodies removed below takes some of each. */
const OWN = Float64Array.from(
  { length: 5000 },
  (_, i) => [0.3, 0.003, 0, 0.1, 0.03, 0.003, 1][i % 7],
);

describe.each([
  NO_SOFTENING,
  { kernel: 'plummer', length: 0.1 },
  { kernel: 'spline', length: 0.1 },
  { kernel: 'plummer', length: 0.1, lengths: OWN },
  { kernel: 'spline', length: 0.1, lengths: OWN },
] as Softening[])('softening %o', (wanted) => {
  const withCount = (count: number): Softening =>
    wanted.lengths === undefined ? wanted : { ...wanted, lengths: wanted.lengths.slice(0, count) };

  it.each([3, 40])('direct sums, every %ith of 1500 bodies removed', async (every) => {
    const bodies = modelColumns('plummer', 1500, 1);
    const { done, phi, share } = await errorsAfter(bodies, every, withCount(1500), {});
    expect(done).toBe(true);
    // Rounding of some thousand terms, of which those removed were added and taken away.
    expect(phi).toBeLessThan(1e-13);
    expect(share).toBeLessThan(1e-13);
  });

  it.each([2, 4, 100])('the tree, every %ith of 5000 bodies removed', async (every) => {
    const level = LEVELS[2];
    const bodies = modelColumns('hernquist', 5000, 2);
    const result = await errorsAfter(bodies, every, withCount(5000), { level });
    expect(result.done).toBe(true);
    // The error of the walk over all, and that of the walk over those removed; as in other tests of the tree.
    expect(result.phi).toBeLessThan(2 * level.tolerance);
    expect(result.share).toBeLessThan(2 * level.tolerance);
    expect(result.phi).toBeGreaterThan(1e-9); // it was a tree
  });
});

it('a body at the place of a removed one cannot be told without softening: sum again', async () => {
  for (const [count, every] of [
    [600, 200],
    [5000, 4],
  ]) {
    const bodies = modelColumns('plummer', count, 3);
    for (const c of [bodies.x, bodies.y, bodies.z]) c[1] = c[0];
    const options = count > 4096 ? { level: LEVELS[1] } : {};
    const plummer: Softening = { kernel: 'plummer', length: 0.1 };
    expect((await errorsAfter(bodies, every, plummer, options)).done).toBe(true);
    const { done, phi } = await errorsAfter(bodies, every, NO_SOFTENING, options);
    // Either the pair is known to have been left out of both sums, or the caller is told.
    if (done) expect(phi).toBeLessThan(count > 4096 ? 1e-2 : 1e-13);
  }
});
