import { describe, expect, it } from 'vitest';
import { drawOrbit, eccentricAnomaly } from '../../src/models/binaries.ts';
import { makeModel, type MakeOptions } from '../../src/models/make.ts';
import { plummer } from '../../src/models/plummer.ts';
import { Random } from '../../src/numerics/random.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { kolmogorov, KOLMOGOROV_LIMIT } from './samples.ts';
import { within } from './within.ts';

/** Kepler elements of the relative orbit by the textbook: vis-viva and the eccentricity vector. */
function elements(position: ArrayLike<number>, velocity: ArrayLike<number>, gm: number) {
  const dot = (a: ArrayLike<number>, b: ArrayLike<number>) =>
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
  const r = Math.sqrt(dot(position, position));
  const v2 = dot(velocity, velocity);
  const rv = dot(position, velocity);
  const e = [0, 1, 2].map((k) => ((v2 - gm / r) * position[k] - rv * velocity[k]) / gm);
  const h = [0, 1, 2].map((k) => {
    const [i, j] = [(k + 1) % 3, (k + 2) % 3];
    return position[i] * velocity[j] - position[j] * velocity[i];
  });
  const a = 1 / (2 / r - v2 / gm);
  const eccentricity = Math.sqrt(dot(e, e));
  const ecosE = 1 - r / a;
  const esinE = rv / Math.sqrt(gm * a);
  const anomaly = Math.atan2(esinE, ecosE);
  const mean = (anomaly - esinE + 4 * Math.PI) % (2 * Math.PI);
  return { a, eccentricity, pericentre: e, normal: h, mean };
}

describe("Kepler's equation", () => {
  it.each([0, 0.1, 0.9, 0.999999, 1 - 2 ** -53])('is solved for e = %d', (e) => {
    for (const m of [0, 1e-12, 1e-4, 0.3, 1.5, 3.14159, 3.2, 5, 6.283]) {
      const anomaly = eccentricAnomaly(m, e);
      expect(Math.abs(anomaly - e * Math.sin(anomaly) - m)).toBeLessThan(2e-15 * (1 + m));
    }
    expect(eccentricAnomaly(0.7, 0)).toBe(0.7);
  });
});

describe('drawn orbits', () => {
  const gm = 3;
  const range = [0.01, 10] as const;
  const n = 20_000;
  const random = new Random(6);
  const orbit = { position: new Float64Array(3), velocity: new Float64Array(3) };
  const drawn = Array.from({ length: n }, () => {
    drawOrbit(gm, range, random, orbit);
    return elements(orbit.position, orbit.velocity, gm);
  });
  const distributed = (values: (k: number) => number, cdf: (value: number) => number) => {
    expect(
      kolmogorov(
        Float64Array.from({ length: n }, (_, k) => values(k)),
        cdf,
      ),
    ).toBeLessThan(KOLMOGOROV_LIMIT);
  };

  it('have semi-major axes even in their logarithm', () => {
    distributed(
      (k) => drawn[k].a,
      (a) => Math.log(a / 0.01) / Math.log(1000),
    );
  });

  it('have thermal eccentricities, n(<e) = e²', () => {
    // Jeans 1919; Heggie 1975, MNRAS 173, 729.
    distributed(
      (k) => drawn[k].eccentricity,
      (e) => e * e,
    );
  });

  it('have any phase and any orientation', () => {
    distributed(
      (k) => drawn[k].mean,
      (m) => m / (2 * Math.PI),
    );
    for (const axis of [0, 1, 2]) {
      const unit = (v: number[]) => v[axis] / Math.hypot(v[0], v[1], v[2]);
      distributed(
        (k) => unit(drawn[k].pericentre),
        (c) => (1 + c) / 2,
      );
      distributed(
        (k) => unit(drawn[k].normal),
        (c) => (1 + c) / 2,
      );
    }
  });
});

const base: MakeOptions = {
  model: 'plummer',
  count: 4001,
  seed: 8,
  gravity: 2,
  mass: 5,
  scaleRadius: 3,
  masses: 'salpeter',
};

/** Elements of the pair that bodies 2j and 2j + 1 should be, and its centre. */
function pairOf(set: Particles, j: number) {
  const [a, b] = [2 * j, 2 * j + 1];
  const m = set.mass[a] + set.mass[b];
  const names = ['x', 'y', 'z', 'vx', 'vy', 'vz'] as const;
  const apart = names.map((name) => set[name][b] - set[name][a]);
  const centre = names.map((name) => (set.mass[a] * set[name][a] + set.mass[b] * set[name][b]) / m);
  return { ...elements(apart.slice(0, 3), apart.slice(3), 2 * m), centre, mass: m };
}

describe('binaries in a model', () => {
  const share = 0.5;
  const semiMajorAxis = [1e-4, 1e-2] as const;
  const set = makeModel({ ...base, binaries: { share, semiMajorAxis } });
  const pairs = 1000;

  it('are the first bodies, as many as asked for', () => {
    const axes = Array.from({ length: pairs }, (_, j) => pairOf(set, j).a);
    // 1e-16 of rounding over separations of 1e-6 at distances of 30, and more for near pairs of eccentric
    // orbits
    expect(Math.min(...axes)).toBeGreaterThan(1e-4 * (1 - 1e-5));
    expect(Math.max(...axes)).toBeLessThan(1e-2 * (1 + 1e-5));
    expect(
      kolmogorov(Float64Array.from(axes), (a) => Math.log(a / 1e-4) / Math.log(100)),
    ).toBeLessThan(KOLMOGOROV_LIMIT);
    // The next two bodies are no pair: 2000 single bodies in a sphere of radius 3.
    const next = pairOf(set, pairs);
    expect(next.a < 0 || next.a > 0.02).toBe(true);
  });

  it('have centres that are drawn from the model', () => {
    const fractions = Float64Array.from({ length: pairs }, (_, j) => {
      const [x, y, z] = pairOf(set, j).centre;
      return plummer.enclosedMass(Math.hypot(x, y, z) / 3);
    });
    expect(kolmogorov(fractions, (f) => f)).toBeLessThan(KOLMOGOROV_LIMIT);
    // ⟨v²⟩ of centres is 2T/M = 3π/32 GM/a, by the virial theorem; v² scatters by its own size.
    const squares = Float64Array.from({ length: pairs }, (_, j) => {
      const [, , , vx, vy, vz] = pairOf(set, j).centre;
      return vx * vx + vy * vy + vz * vz;
    });
    const mean = squares.reduce((a, b) => a + b) / pairs;
    expect(Math.abs(mean / ((3 * Math.PI * 10) / 32 / 3) - 1)).toBeLessThan(4.5 / Math.sqrt(pairs));
  });

  it('leave the sum of masses and the masses themselves as they are', () => {
    const single = makeModel(base);
    expect(set.mass).toEqual(single.mass);
  });

  it('may be all bodies, and an odd one stays single', () => {
    const all = makeModel({ ...base, binaries: { share: 1, semiMajorAxis } });
    for (const j of [0, 1, 999, 1999]) expect(pairOf(all, j).a).toBeLessThan(0.0101);
    expect(Number.isFinite(all.x[4000])).toBe(true);
    const one = makeModel({ ...base, count: 2, binaries: { share: 1, semiMajorAxis: [1, 1] } });
    within(pairOf(one, 0).a, 1, 1e-12);
  });

  it('hold in single precision if they can, and are refused if they cannot', () => {
    const wide = { share: 0.1, semiMajorAxis: [0.5, 0.5] } as const;
    const coarse = makeModel({ ...base, count: 100, float32: true, binaries: wide });
    within(pairOf(coarse, 0).a, 0.5, 0.01);
    const tight = { share: 0.1, semiMajorAxis } as const;
    for (const refused of [
      () => makeModel({ ...base, float32: true, binaries: tight }),
      () => makeModel({ ...base, offset: [1e12, 0, 0], binaries: tight }),
    ]) {
      expect(refused).toThrow(
        expect.objectContaining({
          code: 'usage.modelOption',
          message: expect.stringContaining('--semi-major-axis') as string,
        }),
      );
    }
  });
});
