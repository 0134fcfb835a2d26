import { describe, expect, it } from 'vitest';
import { makeModel, type MakeOptions } from '../../src/models/make.ts';
import { plummer } from '../../src/models/plummer.ts';
import { kolmogorov, KOLMOGOROV_LIMIT, radius, speedSquared } from './samples.ts';
import { within } from './within.ts';

const [G, M, a] = [2, 5, 3];
const base: MakeOptions = {
  model: 'plummer',
  count: 20_000,
  seed: 4,
  gravity: G,
  mass: M,
  scaleRadius: a,
};

describe('escapers', () => {
  const set = makeModel({ ...base, escapers: { share: 0.1, speed: 0.7 } });
  const leaving = Array.from({ length: 2000 }, (_, k) => 18_000 + k);

  it('are the last bodies, with ½ v² + φ of their speed at infinity', () => {
    for (const i of leaving) {
      const energy = speedSquared(set, i) / 2 - (G * M) / Math.hypot(a, radius(set, i));
      within(energy, 0.7 ** 2 / 2, 1e-12);
    }
    const others = makeModel(base);
    expect(set.vx.slice(0, 18_000)).toEqual(others.vx.slice(0, 18_000));
    expect(set.x).toEqual(others.x);
  });

  it('move outwards, without preference within that half', () => {
    const cosines = Float64Array.from(leaving, (i) => {
      const { x, y, z, vx, vy, vz } = set;
      const along = x[i] * vx[i] + y[i] * vy[i] + z[i] * vz[i];
      return along / radius(set, i) / Math.sqrt(speedSquared(set, i));
    });
    expect(kolmogorov(cosines, (c) => c)).toBeLessThan(KOLMOGOROV_LIMIT);
  });

  it('have √(|U|/3M) at infinity if nothing is said', () => {
    const plain = makeModel({ ...base, escapers: { share: 0.1 } });
    const i = 19_000;
    const energy = speedSquared(plain, i) / 2 - (G * M) / Math.hypot(a, radius(plain, i));
    // U = −3π/32 G M²/a
    within(energy, ((3 * Math.PI) / 32) * ((G * M) / a / 3 / 2), 1e-12);
  });

  it('raise T as the formula says', () => {
    // T = (1 − s) |U|/2 + s (2|U| + M v²/2): the mean of −φ over the bodies is 2|U|/M.
    const share = 0.25;
    const many = makeModel({ ...base, count: 200_000, escapers: { share, speed: 0.7 } });
    const U = -plummer.potentialEnergy * ((G * M * M) / a);
    const expected = (1 - share) * (U / 2) + share * (2 * U + (M * 0.7 ** 2) / 2);
    let kinetic = 0;
    for (let i = 0; i < many.count; i++) kinetic += 0.5 * many.mass[i] * speedSquared(many, i);
    within(kinetic, expected, 0.007); // v² scatters by about its size: 3/√200,000
  });

  it('of a pair of components know the potential of both', () => {
    const second = { model: 'plummer', count: 10, mass: 4, scaleRadius: 2 } as const;
    const both = makeModel({ ...base, count: 100, second, escapers: { share: 0.5, speed: 0 } });
    const r = radius(both, 70);
    const escape = 2 * G * (M / Math.hypot(a, r) + 4 / Math.hypot(2, r));
    within(speedSquared(both, 70), escape, 1e-12);
  });
});
