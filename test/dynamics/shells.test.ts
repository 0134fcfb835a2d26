/** Motions in shells of sets whose streaming and dispersions are known, and their errors over many samples. */
import { describe, expect, it } from 'vitest';
import { shellCount } from '../../src/dynamics/measureExtras.ts';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import type { Shells } from '../../src/dynamics/shells.ts';
import { makeModel } from '../../src/models/make.ts';
import { Random } from '../../src/numerics/random.ts';
import { bodiesOf, measure, measureModel, particlesOf, type Body } from './samples.ts';

const mean = (list: readonly number[]) => list.reduce((sum, x) => sum + x, 0) / list.length;
const rms = (list: readonly number[]) => Math.sqrt(mean(list.map((x) => x * x)));
const codes = (record: MeasureRecord) => record.remarks.map(({ code }) => code);
const known = (list: readonly (number | null)[]): number[] => list.map((x) => x ?? NaN);

function shellsOf(record: MeasureRecord): Shells {
  if (!record.shells) throw new Error('no shells');
  return record.shells;
}

/** N bodies in a sphere of radius 1, even in volume, with velocities that a function gives. */
function sphere(
  count: number,
  seed: number,
  velocity: (x: readonly [number, number, number], r: number, random: Random) => number[],
): Body[] {
  const random = new Random(seed);
  const direction = new Float64Array(3);
  return Array.from({ length: count }, (): Body => {
    const r = Math.cbrt(random.openUniform());
    random.unitVector(direction);
    const [x, y, z] = Array.from(direction, (c) => c * r);
    const [u, v, w] = velocity([x, y, z], r, random);
    return [1 / count, x, y, z, u, v, w];
  });
}

/** Gaussian velocities with a radial and a tangential dispersion. */
function gaussian(
  [x, y, z]: readonly [number, number, number],
  r: number,
  radial: number,
  tangential: number,
  random: Random,
): number[] {
  const free = [0, 0, 0].map(() => tangential * random.normal());
  const along = (free[0] * x + free[1] * y + free[2] * z) / r;
  const wanted = radial * random.normal();
  return [x, y, z].map((c, k) => free[k] + ((wanted - along) * c) / r);
}

// Nothing is bound to so light a sphere at such speeds: shells are then those of all bodies.
const ALL = { with: ['shells'], centre: 'mass', gravity: 1e-6 } as const;

describe('shells', () => {
  it('hold equal numbers, one inside the other, and all bodies', async () => {
    const record = await measureModel('plummer', 1003, 1, { with: ['shells'], shells: 10 });
    const { particles, mass, inner, outer, radii } = shellsOf(record);
    expect(particles.reduce((sum, n) => sum + n, 0)).toBe(1003);
    expect(Math.max(...particles) - Math.min(...particles)).toBeLessThanOrEqual(1);
    expect(Math.abs(mean(mass) * 10 - 1)).toBeLessThan(1e-12);
    expect(inner).toEqual([0, ...outer.slice(0, -1)]);
    radii.forEach((r, k) => {
      expect(r).toBeGreaterThan(inner[k]);
      expect(r).toBeLessThan(outer[k]);
    });
    const farthest = Math.max(
      ...bodiesOf(makeModel({ model: 'plummer', count: 1003, seed: 1 })).map(([, x, y, z]) =>
        Math.hypot(...[x, y, z].map((c, k) => c - record.frame.centre[k])),
      ),
    );
    expect(Math.abs(outer[9] / farthest - 1)).toBeLessThan(1e-12);
  });

  it('are 16, as many as asked for, or fewer of few bodies', () => {
    expect(shellCount(16, true, 1e6)).toBe(16);
    expect(shellCount(16, true, 199)).toBe(9);
    expect(shellCount(16, true, 5)).toBe(1);
    expect(shellCount(30, false, 40)).toBe(30);
    expect(shellCount(30, false, 7)).toBe(7);
  });

  it('have the means and squares of a plain loop over their bodies', async () => {
    const bodies = sphere(500, 2, (x, r, random) => gaussian(x, r, 1, 0.6, random)).map(
      ([, ...rest], i): Body => [(1 + (i % 7)) / 2000, ...rest],
    );
    const record = await measure(particlesOf(bodies), { ...ALL, shells: 4 });
    const found = shellsOf(record);
    expect(found.set).toBe('whole');
    const [cx, cy, cz] = record.frame.centre;
    const [ux, uy, uz] = record.frame.meanVelocity;
    const [lx, ly, lz] = record.frame.angularMomentum;
    const l = Math.hypot(lx, ly, lz);
    const moving = bodies.map(([m, x, y, z, u, v, w]) => {
      const d = [x - cx, y - cy, z - cz];
      const s = [u - ux, v - uy, w - uz];
      const r = Math.hypot(...d);
      const radial = (d[0] * s[0] + d[1] * s[1] + d[2] * s[2]) / r;
      const n = [lx / l, ly / l, lz / l];
      const a = [n[1] * d[2] - n[2] * d[1], n[2] * d[0] - n[0] * d[2], n[0] * d[1] - n[1] * d[0]];
      const azimuthal = (a[0] * s[0] + a[1] * s[1] + a[2] * s[2]) / Math.hypot(...a);
      const polar2 = s[0] ** 2 + s[1] ** 2 + s[2] ** 2 - radial ** 2 - azimuthal ** 2;
      return { m, r, radial, azimuthal, polar2 };
    });
    moving.sort((a, b) => a.r - b.r);
    for (let k = 0; k < 4; k++) {
      const own = moving.slice(125 * k, 125 * (k + 1));
      const mass = own.reduce((sum, { m }) => sum + m, 0);
      const share = own.reduce((sum, { m }) => sum + m * m, 0) / mass ** 2;
      const over = (f: (b: (typeof own)[0]) => number) =>
        own.reduce((sum, b) => sum + b.m * f(b), 0) / mass;
      const [vr, vp] = [over(({ radial }) => radial), over(({ azimuthal }) => azimuthal)];
      // Squares about a mean that comes from the same n bodies are short by 1/n_eff: the sample variance.
      const sr2 = over(({ radial }) => (radial - vr) ** 2) / (1 - share);
      const st2 =
        over(({ polar2, azimuthal }) => polar2 + (azimuthal - vp) ** 2) / 2 / (1 - share / 2);
      const near = (list: readonly (number | null)[], value: number) =>
        expect(Math.abs((list[k] ?? NaN) - value)).toBeLessThan(1e-12);
      near(found.radialVelocity, vr);
      near(found.rotation, vp);
      near(found.radialDispersion, Math.sqrt(sr2));
      near(found.tangentialDispersion, Math.sqrt(st2));
      near(found.anisotropy, 1 - st2 / sr2);
    }
    const tr = moving.reduce((sum, { m, radial }) => sum + m * radial ** 2, 0);
    const tt = moving.reduce(
      (sum, { m, azimuthal, polar2 }) => sum + m * (azimuthal ** 2 + polar2),
      0,
    );
    expect(Math.abs((record.radialToTangential ?? NaN) - (2 * tr) / tt)).toBeLessThan(1e-12);
  });
});

describe('known motions', () => {
  it('solid rotation: Ω π/4 ⟨r⟩ in each shell, and nothing else', async () => {
    // ⟨sin θ⟩ over a sphere is π/4. The axis is a tilted one.
    const omega = [0.3, 0.6, 0.2];
    const spin = Math.hypot(...omega);
    const bodies = sphere(20_000, 3, ([x, y, z]) => [
      omega[1] * z - omega[2] * y,
      omega[2] * x - omega[0] * z,
      omega[0] * y - omega[1] * x,
    ]);
    const record = await measure(particlesOf(bodies), { ...ALL, shells: 5 });
    const { axis, outer, inner, rotation, rotationErrors, radialVelocity } = shellsOf(record);
    axis?.forEach((c, k) => expect(Math.abs(c - omega[k] / spin)).toBeLessThan(0.01));
    const off = outer.map((b, k) => {
      const a = inner[k];
      const meanRadius = (0.75 * (b ** 4 - a ** 4)) / (b ** 3 - a ** 3);
      const expected = (spin * Math.PI * meanRadius) / 4;
      expect(Math.abs((rotation[k] ?? NaN) / expected - 1)).toBeLessThan(0.02);
      // About the centre of mass of the sample, the motion along the radius is rounding.
      expect(Math.abs(radialVelocity[k] ?? NaN)).toBeLessThan(1e-3);
      return ((rotation[k] ?? NaN) - expected) / (rotationErrors[k] ?? NaN);
    });
    expect(rms(off)).toBeLessThan(2);
    // v_r is 0 about the point that everything turns around, so there is no β and T_r is nothing.
    expect(record.radialToTangential).toBeLessThan(1e-4);
  });

  it('expansion: H ⟨r⟩, no dispersion across the radius, no rotation', async () => {
    const bodies = sphere(5000, 4, (x) => x.map((c) => 2 * c));
    const record = await measure(particlesOf(bodies), { ...ALL, shells: 4 });
    const { inner, outer, radialVelocity, rotation, tangentialDispersion } = shellsOf(record);
    outer.forEach((b, k) => {
      const a = inner[k];
      const meanRadius = (0.75 * (b ** 4 - a ** 4)) / (b ** 3 - a ** 3);
      expect(Math.abs((radialVelocity[k] ?? NaN) / (2 * meanRadius) - 1)).toBeLessThan(0.01);
      expect(Math.abs(rotation[k] ?? 0)).toBeLessThan(1e-12);
      expect(tangentialDispersion[k]).toBeLessThan(1e-12);
    });
    expect(record.radialToTangential).toBeNull();
    expect(codes(record)).toContain('noRadialToTangential');
  });

  it('at rest: nothing to tell, and a reason', async () => {
    const record = await measure(particlesOf(sphere(200, 5, () => [0, 0, 0])), {
      with: ['shells'],
    });
    const { axis, anisotropy, radialDispersion } = shellsOf(record);
    expect(axis).toBeNull();
    expect(anisotropy.every((beta) => beta === null)).toBe(true);
    expect(radialDispersion.every((sigma) => sigma === 0)).toBe(true);
    expect(record.radialToTangential).toBeNull();
    expect(codes(record)).toEqual(expect.arrayContaining(['noRadialToTangential', 'thinShells']));
  });

  it('too few bodies: null, and a reason', async () => {
    const record = await measureModel('plummer', 12, 6, { with: ['shells'], shells: 6 });
    expect(shellsOf(record).radialVelocity.every((v) => v === null)).toBe(true);
    expect(codes(record)).toContain('thinShells');
  });
});

describe('anisotropy', () => {
  it('of the form of Osipkov and Merritt, β = r²/(r² + r_a²)', async () => {
    // Source: Osipkov 1979, Merritt 1985 (from memory): this form of β. Here it is put in by hand.
    const ra2 = 0.25;
    const bodies = sphere(40_000, 7, (x, r, random) =>
      gaussian(x, r, 1, Math.sqrt(1 - (r * r) / (r * r + ra2)), random),
    );
    const record = await measure(particlesOf(bodies), { ...ALL, shells: 8 });
    const { inner, outer, anisotropy, anisotropyErrors, radialDispersion } = shellsOf(record);
    const off = outer.map((b, k) => {
      // β of the shell is the mean of β over its volume, since σ_r is the same everywhere.
      const steps = Array.from({ length: 200 }, (_, i) => {
        const a = inner[k];
        const r = Math.cbrt(a ** 3 + ((i + 0.5) / 200) * (b ** 3 - a ** 3));
        return (r * r) / (r * r + ra2);
      });
      expect(Math.abs((radialDispersion[k] ?? NaN) - 1)).toBeLessThan(0.05);
      return ((anisotropy[k] ?? NaN) - mean(steps)) / (anisotropyErrors[k] ?? NaN);
    });
    // Eight normal deviates.
    expect(rms(off)).toBeLessThan(2);
    expect(anisotropy[7]).toBeGreaterThan(0.7);
    expect(anisotropy[0]).toBeLessThan(0.45);
  });

  it('2T_r/T_t = 1/(1 − β), and the caution where orbits are radial', async () => {
    // Source: β = 0.41176 is 1.7, the limit of Polyachenko & Shukhman 1981 (from memory).
    const of = (beta: number) =>
      measure(
        particlesOf(
          sphere(20_000, 8, (x, r, random) => gaussian(x, r, 1, Math.sqrt(1 - beta), random)),
        ),
        ALL,
      );
    const limit = await of(0.41176471);
    const off = (limit.radialToTangential ?? NaN) - 1.7;
    expect(Math.abs(off)).toBeLessThan(3 * (limit.radialToTangentialError ?? NaN));
    expect(codes(limit)).toContain('radialOrbits');
    expect(codes(await of(0))).not.toContain('radialOrbits');
    expect(codes(await of(-1))).not.toContain('radialOrbits');
  });
});

describe('errors over many samples', () => {
  it('of a Plummer sphere: means, dispersions and β stray by them', async () => {
    const off: Record<string, number[]> = {
      v: [],
      beta: [],
      radial: [],
      tangential: [],
      ratio: [],
    };
    const errors: number[] = [];
    for (let seed = 1; seed <= 60; seed++) {
      const record = await measureModel('plummer', 1000, seed, { with: ['shells'], shells: 5 });
      const found = shellsOf(record);
      off['v'].push(
        ...known(found.radialVelocity).map((v, k) => v / known(found.radialVelocityErrors)[k]),
      );
      off['beta'].push(
        ...known(found.anisotropy).map((b, k) => b / known(found.anisotropyErrors)[k]),
      );
      const [ratio, error] = [
        record.radialToTangential ?? NaN,
        record.radialToTangentialError ?? NaN,
      ];
      off['ratio'].push((ratio - 1) / error);
      errors.push(error * Math.sqrt(1000));
      // Inside a thin shell the model's dispersion hardly changes: the middle ones do.
      for (const k of [1, 2, 3]) {
        // Source: σ² = 1/(6 √(1 + r²)), Plummer 1911 with G = M = a = 1.
        const sigma = Math.sqrt(1 / (6 * Math.sqrt(1 + found.radii[k] ** 2)));
        off['radial'].push(
          (known(found.radialDispersion)[k] - sigma) / known(found.radialDispersionErrors)[k],
        );
        off['tangential'].push(
          (known(found.tangentialDispersion)[k] - sigma) /
            known(found.tangentialDispersionErrors)[k],
        );
      }
    }
    for (const [key, list] of Object.entries(off)) {
      // Deviates of 1σ: of n the rms is known to 1/√(2n), for 60 to 9 %, and heavy tails of v² add to it.
      expect(Math.abs(rms(list) - 1), key).toBeLessThan(list.length > 100 ? 0.2 : 0.3);
      expect(Math.abs(mean(list)), key).toBeLessThan(3.5 / Math.sqrt(list.length));
    }
    // Source: √(1.8 ⟨v⁴⟩)/⟨v²⟩ = 1.7217 for the isotropic Plummer sphere, and the same error for 1/(1 − β).
    expect(Math.abs(mean(errors) / 1.7217 - 1)).toBeLessThan(0.03);
  });
});

it('shells and ratio are those of the bound bodies where these are most of the mass', async () => {
  const bodies = bodiesOf(makeModel({ model: 'plummer', count: 800, seed: 9 }));
  const with20 = bodies.map(([m, x, y, z, u, v, w], i): Body => {
    const r = Math.hypot(x, y, z);
    return i < 20 ? [m, x, y, z, (9 * x) / r, (9 * y) / r, (9 * z) / r] : [m, x, y, z, u, v, w];
  });
  const record = await measure(particlesOf(with20), { with: ['shells'] });
  expect(record.bound.particles).toBeLessThanOrEqual(780);
  const { set, particles } = shellsOf(record);
  expect(set).toBe('bound');
  expect(particles.reduce((sum, n) => sum + n, 0)).toBe(record.bound.particles);
  // Twenty bodies at nine times the others' speed would have made it some ten.
  expect(record.radialToTangential).toBeLessThan(1.4);
});
