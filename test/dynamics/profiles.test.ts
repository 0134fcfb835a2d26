/** Profiles against closed forms of the models, and their errors over many samples. */
import { describe, expect, it } from 'vitest';
import { findPeak } from '../../src/dynamics/peak.ts';
import type { Profiles } from '../../src/dynamics/profiles.ts';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { localRelaxationTime } from '../../src/dynamics/times.ts';
import { makeModel } from '../../src/models/make.ts';
import { PARSEC_PER_KMS_IN_MYR, UNIT_SYSTEMS } from '../../src/snapshot/units.ts';
import { bodiesOf, cloud, measure, measureModel, particlesOf, type Body } from './samples.ts';

const mean = (list: readonly number[]) => list.reduce((sum, x) => sum + x, 0) / list.length;
const rms = (list: readonly number[]) => Math.sqrt(mean(list.map((x) => x * x)));
const codes = (record: MeasureRecord) => record.remarks.map(({ code }) => code);
const near = (value: number | null | undefined, expected: number, relative: number) =>
  expect(Math.abs((value ?? NaN) / expected - 1)).toBeLessThan(relative);

function profilesOf(record: MeasureRecord): Profiles {
  if (!record.profiles) throw new Error('no profiles');
  return record.profiles;
}

/** G = M = a = 1: M(r), φ(r), σ²(r), radius and square of the greatest circular velocity. */
const FORMS = {
  // Source: Plummer 1911; peak of r²/(1 + r²)^1.5 at r = √2 by hand.
  plummer: {
    mass: (r: number) => (r * r * r) / (1 + r * r) ** 1.5,
    potential: (r: number) => -1 / Math.sqrt(1 + r * r),
    dispersion2: (r: number) => 1 / (6 * Math.sqrt(1 + r * r)),
    peak: [Math.SQRT2, 0.3849001794597505],
  },
  // Source: Hernquist 1990: M = r²/(1 + r)², φ = −1/(1 + r); peak of r/(1 + r)² at r = 1.
  hernquist: {
    mass: (r: number) => (r / (1 + r)) ** 2,
    potential: (r: number) => -1 / (1 + r),
    // Equation 10 of the paper.
    dispersion2: (r: number) =>
      r * (1 + r) ** 3 * Math.log((1 + r) / r) -
      (r / (12 * (1 + r))) * (25 + 52 * r + 42 * r * r + 12 * r ** 3),
    peak: [1, 0.25],
  },
} as const;

describe.each(['plummer', 'hernquist'] as const)('%s', (model) => {
  const form = FORMS[model];

  it('profiles stray from the model by their errors', async () => {
    const off: Record<string, number[]> = {
      density: [],
      mass: [],
      circular: [],
      escape: [],
      relaxation: [],
    };
    const peaks: Record<string, number[]> = { velocity: [], radius: [] };
    const count = 2000;
    const seeds = 25;
    for (let seed = 1; seed <= seeds; seed++) {
      const record = await measureModel(model, count, seed, { with: ['profiles'], shells: 8 });
      const found = profilesOf(record);
      const stray = (
        key: string,
        k: number,
        value: number | null,
        error: number | null,
        of: number,
      ) => (off[key][8 * (seed - 1) + k] = ((value ?? NaN) - of) / (error ?? NaN));
      found.radii.forEach((r, k) => {
        const [a, b] = [found.inner[k], found.outer[k]];
        const volume = (4 / 3) * Math.PI * (b ** 3 - a ** 3);
        const density = (form.mass(b) - form.mass(a)) / volume;
        stray('density', k, found.density[k], found.densityErrors[k], density);
        stray('mass', k, found.enclosedMass[k], found.enclosedMassErrors[k], form.mass(r));
        const circular = Math.sqrt(form.mass(r) / r);
        stray('circular', k, found.circularVelocity[k], found.circularVelocityErrors[k], circular);
        const escape = Math.sqrt(-2 * form.potential(r));
        stray('escape', k, found.escapeVelocity[k], found.escapeVelocityErrors[k], escape);
        // The dispersion is that of the whole shell, the density that of its middle half.
        const sigma = Math.sqrt(form.dispersion2(r));
        const logarithm = record.relaxation.coulombLogarithm ?? NaN;
        const time = localRelaxationTime(sigma, 1 / count, density, 1, logarithm);
        const isWide = k === 7;
        if (!isWide) {
          stray('relaxation', k, found.relaxationTime[k], found.relaxationTimeErrors[k], time);
        }
      });
      peaks['velocity'].push(
        ((found.peakVelocity ?? NaN) - Math.sqrt(form.peak[1])) / (found.peakVelocityError ?? NaN),
      );
      peaks['radius'].push(
        ((found.peakRadius ?? NaN) - form.peak[0]) / (found.peakRadiusError ?? NaN),
      );
    }
    for (const [key, list] of Object.entries(off)) {
      const all = list.filter((x) => x !== undefined);
      // 200 deviates; enclosed masses of one sample go together, so that some 100 are independent.
      expect(Math.abs(rms(all) - 1), key).toBeLessThan(0.25);
      expect(Math.abs(mean(all)), key).toBeLessThan(0.4);
    }
    // 25 deviates each: the rms to 0.14 at 1σ; the radius of a flat peak has a wider tail.
    expect(rms(peaks['velocity'])).toBeLessThan(1.5);
    expect(rms(peaks['radius'])).toBeLessThan(1.7);
  });

  it('of 200,001 bodies: peak of the circular velocity to half a per cent', async () => {
    const particles = makeModel({ model, count: 200_001, seed: 3 });
    const found = profilesOf(await measure(particles, { with: ['profiles'], error: 1e-3 }));
    near(found.peakVelocity, Math.sqrt(form.peak[1]), 0.005);
    near(found.peakRadius, form.peak[0], 0.04);
    found.radii.forEach((r, k) => {
      near(found.circularVelocity[k], Math.sqrt(form.mass(r) / r), 0.02);
      near(found.escapeVelocity[k], Math.sqrt(-2 * form.potential(r)), 0.005);
    });
  });
});

describe('against plain loops', () => {
  it('masses of all kinds about any centre', async () => {
    const bodies = cloud(400, 2);
    const record = await measure(particlesOf(bodies), {
      with: ['profiles'],
      shells: 5,
      centre: 'mass',
      gravity: 2,
    });
    const { radii, inner, outer, density, enclosedMass, circularVelocity, escapeVelocity, set } =
      profilesOf(record);
    // G = 2 binds all of them.
    expect(set).toBe('bound');
    expect(record.bound.particles).toBe(400);
    const [cx, cy, cz] = record.frame.centre;
    const list = bodies.map(([m, x, y, z]) => ({ m, r: Math.hypot(x - cx, y - cy, z - cz) }));
    const inside = (r: number) => list.reduce((sum, b) => (b.r < r ? sum + b.m : sum), 0);
    radii.forEach((r, k) => {
      expect(list.filter((b) => b.r < r)).toHaveLength(80 * k + 40);
      near(enclosedMass[k], inside(r), 1e-12);
      near(circularVelocity[k], Math.sqrt((2 * inside(r)) / r), 1e-12);
      const depth = list.reduce((sum, b) => sum + b.m / Math.max(r, b.r), 0);
      near(escapeVelocity[k], Math.sqrt(2 * 2 * depth), 1e-12);
      const [a, b] = [inner[k], outer[k]];
      near(density[k], (inside(b) - inside(a)) / ((4 / 3) * Math.PI * (b ** 3 - a ** 3)), 1e-12);
      expect(list.filter(({ r: d }) => d > a && d < b)).toHaveLength(40);
    });
  });

  it('two shells of no thickness have no density, and a reason', async () => {
    // Permutations of (±3, ±4, 0): 24 places at a distance of exactly 5, and twice as far.
    const signs = [-1, 1].flatMap((a) => [-1, 1].map((b) => [3 * a, 4 * b]));
    const places = signs.flatMap(([a, b]) => [
      ...[
        [a, b, 0],
        [b, a, 0],
        [a, 0, b],
      ],
      ...[
        [b, 0, a],
        [0, a, b],
        [0, b, a],
      ],
    ]);
    const bodies = [1, 2].flatMap((f) =>
      places.map(([x, y, z]): Body => [1, f * x, f * y, f * z, 0, 0, 0]),
    );
    const options = { with: ['profiles'], shells: 2, centre: 'mass' } as const;
    const record = await measure(particlesOf(bodies), options);
    const { radii, density, relaxationTime, escapeVelocity } = profilesOf(record);
    expect(radii).toEqual([5, 10]);
    expect(density).toEqual([null, null]);
    expect(relaxationTime).toEqual([null, null]);
    // All mass counts as outside the radius that it lies at.
    near(escapeVelocity[1], Math.sqrt((2 * 48) / 10), 1e-12);
    expect(codes(record)).toContain('thinShells');
  });
});

describe('relaxation times', () => {
  it('of known places', () => {
    // Source: 0.34 σ³/(G² m ρ lnΛ) (Binney & Tremaine 2008, eq. 7.106) at the centre of a Plummer sphere
    // in Hénon units, σ = 0.5319230405 and ρ = 1.1680406476, N = 1000, Λ = 110.
    near(localRelaxationTime(0.5319230405, 1e-3, 1.1680406476, 1, Math.log(110)), 9.3201977, 1e-7);
    // The same book: 18 Gyr/lnΛ for 10 km/s, 1 Msun and 1e3 Msun/pc³.
    const { gravity } = UNIT_SYSTEMS['pc-kms-msun'];
    const time = localRelaxationTime(10, 1, 1e3, gravity, 1) * PARSEC_PER_KMS_IN_MYR;
    near(time, 17_972.3, 1e-5);
  });

  it('of unequal masses go with Σm²/Σm', async () => {
    const of = async (masses: 'equal' | 'salpeter') => {
      const particles = makeModel({ model: 'plummer', count: 20_000, seed: 5, masses });
      return measure(particles, { with: ['profiles'], shells: 4, error: 1e-3 });
    };
    const [equal, mixed] = [await of('equal'), await of('salpeter')];
    const share = 20_000 / mixed.effectiveNumber;
    profilesOf(equal)
      .relaxationTime.slice(0, 3)
      .forEach((time, k) => {
        const other = profilesOf(mixed).relaxationTime[k] ?? NaN;
        // Both scatter by 4 %.
        near((time ?? NaN) / other, share, 0.2);
      });
  });

  it('are null where encounters are not many and weak', async () => {
    const record = await measureModel('plummer', 25, 6, { with: ['profiles'] });
    expect(record.relaxation.coulombLogarithm).toBeNull();
    expect(profilesOf(record).relaxationTime.every((time) => time === null)).toBe(true);
    expect(codes(record)).toContain('noRelaxationTime');
  });
});

describe('the peak of the circular velocity', () => {
  const grid = (radiusOf: (f: number) => number) => {
    const fractions = Array.from({ length: 256 }, (_, k) => ((k + 1) / 256) * (1 - 1e-9));
    return [fractions, fractions.map(radiusOf)] as const;
  };

  it.each<[string, (f: number) => number, number, number]>([
    ['Plummer', (f) => 1 / Math.sqrt(f ** (-2 / 3) - 1), Math.SQRT2, 0.3849001795],
    ['Hernquist', (f) => Math.sqrt(f) / (1 - Math.sqrt(f)), 1, 0.25],
    // Source: M = (r/(1 + r))^(3 − γ) of Dehnen 1993; the peak of M/r by hand, at 2 − γ.
    ['Dehnen, γ = 0', (f) => Math.cbrt(f) / (1 - Math.cbrt(f)), 2, 4 / 27],
    ['Dehnen, γ = 3/2', (f) => f ** (2 / 3) / (1 - f ** (2 / 3)), 0.5, 1 / Math.sqrt(27) / 0.5],
  ])('of %s without noise', (_, radiusOf, radius, height) => {
    const peak = findPeak(...grid(radiusOf), 1e5);
    // What a cubic leaves out, below the noise of 1e5 bodies.
    near(peak?.radius, radius, 0.003);
    near(peak?.height, height, 0.002);
    expect(peak?.radiusError).toBeGreaterThan(0);
  });

  it('is at the edge of a homogeneous sphere, where it has no error', () => {
    const peak = findPeak(...grid(Math.cbrt), 1e5);
    near(peak?.radius, 1, 1e-8);
    near(peak?.height, 1, 1e-8);
    expect(peak?.radiusError).toBeNull();
  });

  it('is not told where M/r falls from the inside on', async () => {
    // Jaffe: M/r = 1/(1 + r).
    expect(findPeak(...grid((f) => f / (1 - f)), 1e5)).toBeNull();
    const bodies = bodiesOf(makeModel({ model: 'plummer', count: 500, seed: 7 }));
    bodies[0] = [10, 0, 0, 0, 0, 0, 0];
    const record = await measure(particlesOf(bodies), { with: ['profiles'], centre: 'potential' });
    expect(profilesOf(record).peakVelocity).toBeNull();
    expect(codes(record)).toContain('noVelocityPeak');
  });
});
