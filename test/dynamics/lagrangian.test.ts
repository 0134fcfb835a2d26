/** Lagrangian radii against cases counted by hand and a plain sorted sum. */
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { lagrangianRadii } from '../../src/dynamics/lagrangian.ts';
import type { Vector } from '../../src/dynamics/record.ts';
import { frameOf } from '../../src/dynamics/sums.ts';
import { Random } from '../../src/numerics/random.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { particlesOf, type Body } from './samples.ts';

const ORIGIN: Vector = [0, 0, 0];

async function radiiOf(
  bodies: Particles,
  fractions: readonly number[],
  centre: Vector = ORIGIN,
  member: Uint8Array | null = null,
) {
  const set = { bodies, member };
  const scratch = new Float64Array(new SharedArrayBuffer(bodies.count * 8));
  const frame = await frameOf(set, crewOfOne());
  return lagrangianRadii(set, frame, centre, fractions, scratch, crewOfOne());
}

/** Bodies of given masses at given radii, along x, y and z in turn. */
const at = (...pairs: [mass: number, r: number][]): Particles =>
  particlesOf(
    pairs.map(([m, r], i): Body => {
      const place = [0, 1, 2].map((k) => (i % 3 === k ? r : 0));
      return [m, place[0], place[1], place[2], 0, 0, 0];
    }),
  );

/** The convention by sorting: midpoints of each body's own mass, linear between, ends held. */
function plainRadii(pairs: readonly [mass: number, r: number][], fractions: readonly number[]) {
  const sorted = pairs.filter(([m]) => m > 0).sort((a, b) => a[1] - b[1]);
  const total = sorted.reduce((sum, [m]) => sum + m, 0);
  let inside = 0;
  const middles = sorted.map(([m]) => {
    inside += m;
    return inside - m / 2;
  });
  return fractions.map((f) => {
    const target = f * total;
    const after = middles.findIndex((middle) => middle > target);
    if (after === 0) return sorted[0][1];
    if (after < 0) return sorted[sorted.length - 1][1];
    const share = (target - middles[after - 1]) / (middles[after] - middles[after - 1]);
    return sorted[after - 1][1] + share * (sorted[after][1] - sorted[after - 1][1]);
  });
}

describe('by hand', () => {
  it('four equal bodies at 1, 2, 3, 4', async () => {
    // Midpoints at 1/8, 3/8, 5/8, 7/8 of the mass.
    const { radii } = await radiiOf(
      at([1, 3], [1, 1], [1, 4], [1, 2]),
      [0.05, 0.125, 0.25, 0.5, 0.625, 0.7, 0.875, 0.95],
    );
    const expected = [1, 1, 1.5, 2.5, 3, 3.3, 4, 4];
    radii.forEach((r, k) => expect(r).toBeCloseTo(expected[k], 14));
  });

  it('unequal masses', async () => {
    // Masses 1, 3 at 1 and 5: midpoints 0.5 and 2.5 of 4; half the mass is at 2, three quarters on.
    const { radii } = await radiiOf(at([3, 5], [1, 1]), [0.125, 0.5, 0.625, 0.9]);
    [1, 4, 5, 5].forEach((r, k) => expect(radii[k]).toBeCloseTo(r, 14));
  });

  it('one body, and one with company that has no mass', async () => {
    expect((await radiiOf(at([2, 7]), [0.1, 0.5, 0.9])).radii).toEqual([7, 7, 7]);
    const massless = at([0, 1], [2, 7], [0, 100]);
    expect((await radiiOf(massless, [0.1, 0.5, 0.9])).radii).toEqual([7, 7, 7]);
  });

  it('ties: many bodies on one shell, and all at the centre', async () => {
    const shell = at(...Array.from({ length: 9 }, (): [number, number] => [1, 2]));
    expect((await radiiOf(shell, [0.01, 0.5, 0.99])).radii).toEqual([2, 2, 2]);
    const point = at([1, 0], [1, 0], [1, 0], [1, 8]);
    expect((await radiiOf(point, [0.5, 0.625, 0.75])).radii).toEqual([0, 0, 4]);
  });

  it('a set without mass has none', async () => {
    const { radii, errors } = await radiiOf(at([0, 1], [0, 2]), [0.5]);
    expect({ radii, errors }).toEqual({ radii: [null], errors: [null] });
  });

  it('members only, about a centre of its own', async () => {
    const bodies = at([1, 3], [5, 9], [1, 6]); // at (3,0,0), (0,9,0), (0,0,6)
    const { radii } = await radiiOf(bodies, [0.25, 0.75], [3, 0, 0], Uint8Array.from([1, 0, 1]));
    expect(radii[0]).toBe(0);
    expect(radii[1]).toBeCloseTo(Math.sqrt(45), 14);
  });

  it('errors are told only where three effective bodies lie on either side', async () => {
    const ten = at(...Array.from({ length: 10 }, (_, i): [number, number] => [1, i + 1]));
    const { errors, radii } = await radiiOf(ten, [0.2, 0.3, 0.5, 0.7, 0.8]);
    expect(errors[0]).toBeNull();
    expect(errors[4]).toBeNull();
    // Radii grow by 1 a body, so that σ(r) = 10 √(f(1−f)/10).
    expect(errors[2]).toBeCloseTo(10 * Math.sqrt(0.25 / 10), 12);
    expect(radii[2]).toBeCloseTo(5.5, 14);
  });
});

describe('random sets', () => {
  const FRACTIONS = [0.001, 0.01, 0.1, 0.25, 0.5, 0.75, 0.9, 0.99, 0.999];

  async function expectPlain(pairs: [number, number][]): Promise<void> {
    const { radii } = await radiiOf(at(...pairs), FRACTIONS);
    const expected = plainRadii(pairs, FRACTIONS);
    radii.forEach((r, k) => {
      // Rounding of the enclosed mass (1e-15 of it) moves the point between two bodies: compare with the
      // radii of fractions that differ by that.
      const [low, high] = [-1, 1].map((s) => plainRadii(pairs, [FRACTIONS[k] + s * 1e-13])[0]);
      const slack = 1e-12 * expected[k];
      expect(r).toBeGreaterThanOrEqual(Math.min(low, expected[k]) - slack);
      expect(r).toBeLessThanOrEqual(Math.max(high, expected[k]) + slack);
    });
  }

  it('of any masses and radii (fast-check)', async () => {
    const mass = fc.oneof(
      fc.constant(0),
      fc.constant(1),
      fc.double({ min: 1e-6, max: 1e6, noNaN: true }),
    );
    const r = fc.oneof(
      fc.constantFrom(0, 1, 2),
      fc.double({ min: 1e-12, max: 1e12, noNaN: true }),
      fc.double({ min: 0.5, max: 2, noNaN: true }),
    );
    const pairs = fc.array(fc.tuple(mass, r), { minLength: 1, maxLength: 60 });
    await fc.assert(
      fc.asyncProperty(pairs, async (list) => {
        if (list.every(([m]) => m === 0)) return;
        await expectPlain(list);
      }),
      { numRuns: 300, seed: 7 },
    );
  });

  it.each([1, 2, 3, 4, 5, 6, 17, 1000, 30_000])(
    '%i bodies over 20 decades of radius',
    async (n) => {
      const random = new Random(n);
      const pairs = Array.from({ length: n }, (): [number, number] => [
        random.openUniform() ** 4,
        10 ** (20 * random.uniform() - 10),
      ]);
      await expectPlain(pairs);
    },
  );

  it('a far outlier takes no digits from the rest', async () => {
    const random = new Random(5);
    const pairs = Array.from({ length: 20_000 }, (_, i): [number, number] => [
      1,
      i === 0 ? 1e12 : 1 + 1e-6 * random.uniform(),
    ]);
    await expectPlain(pairs);
  });
});
