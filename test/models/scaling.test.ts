import { describe, expect, it } from 'vitest';
import { makeModel } from '../../src/models/make.ts';
import { recentre, scaleVelocities, shift, virialScaling } from '../../src/models/scaling.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { energies } from './samples.ts';

const make = (float32 = false) =>
  makeModel({ model: 'hernquist', count: 400, seed: 5, masses: 'salpeter', float32 });

const weightedMean = (set: Particles, name: 'x' | 'y' | 'z' | 'vx' | 'vy' | 'vz') => {
  const total = Array.from(set.mass).reduce((a, b) => a + b);
  return Array.from(set.mass).reduce((sum, m, i) => sum + m * set[name][i], 0) / total;
};

describe('recentre', () => {
  it('puts centre of mass and mean velocity at 0 and says where they were', () => {
    const set = make();
    shift(set, [1e6, -3, 0.5], [0, 200, -1e3]);
    const before = {
      centreOfMass: [weightedMean(set, 'x'), weightedMean(set, 'y'), weightedMean(set, 'z')],
      meanVelocity: [weightedMean(set, 'vx'), weightedMean(set, 'vy'), weightedMean(set, 'vz')],
    };
    const removed = recentre(set);
    for (const key of ['centreOfMass', 'meanVelocity'] as const) {
      for (let k = 0; k < 3; k++) {
        // 400 roundings at the size of the offset
        const limit = 400 * 2 ** -53 * (1 + Math.abs(before[key][k]));
        expect(Math.abs(removed[key][k] - before[key][k])).toBeLessThan(limit);
      }
    }
    for (const name of ['x', 'y', 'z', 'vx', 'vy', 'vz'] as const) {
      // After the second round only the size of the set counts, here at most a few hundred lengths.
      expect(Math.abs(weightedMean(set, name))).toBeLessThan(1e-12);
    }
  });

  it('works to single precision in columns of single precision', () => {
    const set = make(true);
    shift(set, [100, 0, 0], [0, 100, 0]);
    recentre(set);
    // Rounding of a body at distance R is R 2^-24; the mean of 400 rounds at most as the greatest.
    const reach = Array.from(set.x).reduce((a, b) => Math.max(a, Math.abs(b)), 0);
    expect(Math.abs(weightedMean(set, 'x'))).toBeLessThan((100 + reach) * 2 ** -24);
    expect(Math.abs(weightedMean(set, 'vy'))).toBeLessThan(101 * 2 ** -24);
  });
});

describe('scaling to a virial ratio', () => {
  it.each([0, 0.05, 1, 1.6])('makes 2T/|W| = %d to rounding', (wanted) => {
    const set = make();
    recentre(set);
    const { kinetic, potential } = energies(set);
    scaleVelocities(set, virialScaling(kinetic, potential, wanted));
    const after = energies(set);
    // Rounding of 80,000 pairs in an order of its own, the same both times.
    expect(Math.abs((2 * after.kinetic) / -after.potential - wanted)).toBeLessThan(1e-13);
  });

  it('knows two bodies on a circle by hand', () => {
    // m = ½ each, d = 1: T = 1/8 and U = −1/4 on the circular orbit (Kepler); half the speed gives ¼.
    expect(virialScaling(0.125, -0.25, 1)).toBe(1);
    expect(virialScaling(0.125, -0.25, 0.25)).toBe(0.5);
    expect(virialScaling(0.125, -0.25, 0)).toBe(0);
  });

  it.each([-1, NaN, Infinity])('refuses a ratio of %d', (ratio) => {
    expect(() => virialScaling(1, -1, ratio)).toThrow(
      expect.objectContaining({
        code: 'usage.virialRatio',
        message: `The wanted virial ratio is ${ratio}, but must be finite and at least 0.`,
      }),
    );
  });

  it.each([
    [0, -1],
    [1, 0],
    [1, 1],
    [NaN, -1],
    [1, -Infinity],
  ])('cannot scale T = %d and W = %d', (kinetic, clausius) => {
    expect(() => virialScaling(kinetic, clausius, 1)).toThrow(
      expect.objectContaining({
        code: 'unanswerable.virialScaling',
        message: expect.stringContaining(`T = ${kinetic} and W = ${clausius}`) as string,
        remedy: 'Use at least two bodies that move against each other.',
      }),
    );
  });

  it('refuses a factor that would spoil the velocities', () => {
    const set = make();
    const before = set.vx.slice();
    for (const factor of [-1, NaN, Infinity]) {
      expect(() => scaleVelocities(set, factor)).toThrow(
        expect.objectContaining({ code: 'usage.velocityFactor' }),
      );
    }
    expect(set.vx).toEqual(before);
  });
});
