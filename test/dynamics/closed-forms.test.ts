/** Records of systems whose figures are known in closed form. G = M = a = 1 unless said otherwise. */
import { beforeAll, describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import {
  coulombLogarithm,
  crossingTime,
  halfMassRelaxationTime,
  virialRadius,
} from '../../src/dynamics/times.ts';
import { hernquist } from '../../src/models/hernquist.ts';
import { makeModel } from '../../src/models/make.ts';
import { plummer } from '../../src/models/plummer.ts';
import { recentre } from '../../src/models/scaling.ts';
import { UNIT_SYSTEMS, PARSEC_PER_KMS_IN_MYR } from '../../src/snapshot/units.ts';
import type { SofteningKernel } from '../../src/octree/softening.ts';
import {
  bodiesOf,
  cloud,
  measure,
  measureModel,
  particlesOf,
  plainBalance,
  type Body,
} from './samples.ts';

const mean = (list: readonly number[]) => list.reduce((sum, x) => sum + x, 0) / list.length;
const scatter = (list: readonly number[]) => {
  const m = mean(list);
  return Math.sqrt(list.reduce((sum, x) => sum + (x - m) ** 2, 0) / (list.length - 1));
};
const near = (value: number | null, expected: number, relative: number) =>
  expect(Math.abs((value ?? NaN) / expected - 1), `${value} against ${expected}`).toBeLessThan(
    relative,
  );

const CIRCULAR: Body[] = [
  [0.5, 0.5, 0, 0, 0, 0.5, 0],
  [0.5, -0.5, 0, 0, 0, -0.5, 0],
];

describe('two bodies on a circle', () => {
  // Source: Kepler. m = 1/2 each at distance 1: each moves at 1/2; T = 1/8, U = −1/4.
  it('have T = 1/8, U = −1/4 and the ratio 1, wherever they are and go', async () => {
    for (const [x, v] of [
      [0, 0],
      [1e6, 100],
    ]) {
      const moved = CIRCULAR.map(([m, a, b, c, d, e, f]): Body => [m, a + x, b, c, d, e + v, f]);
      const { whole, bound, frame, ...record } = await measure(particlesOf(moved));
      // Far away, positions of doubles near 1e6 are good to 1e-10.
      const digits = x === 0 ? 14 : 9;
      expect(whole.kinetic).toBeCloseTo(0.125, digits);
      expect(whole.potential).toBeCloseTo(-0.25, digits);
      expect(whole.clausius).toBe(whole.potential);
      expect(whole.energy).toBeCloseTo(-0.125, digits);
      expect(whole.virialRatio).toBeCloseTo(1, digits);
      expect(bound).toEqual(whole);
      expect(frame.centreOfMass[0]).toBeCloseTo(x, 9);
      expect(frame.meanVelocity[1]).toBeCloseTo(v, 13);
      // L = 2 · ½ · ½ · ½ about z; I = 2 · ½ · ¼; no change of I on a circle.
      expect(frame.angularMomentum[2]).toBeCloseTo(0.25, digits);
      expect(record.momentOfInertia).toBeCloseTo(0.25, digits);
      expect(record.momentOfInertiaRate).toBeCloseTo(0, digits);
      expect(record.virialRadius).toBeCloseTo(2, digits);
      expect(record.crossingTime).toBeCloseTo(8, digits - 1); // 2√2 · 2^(3/2)
    }
  });

  it.each([
    ['plummer', 0.1, 0.9950371902, 0.9900990099],
    // Beyond its support of 0.28 the spline is Newton's law.
    ['spline', 0.1, 1, 1],
  ] as const)('softened by a %s of %d', async (softeningKernel, softening, depth, share) => {
    const { whole } = await measure(particlesOf(CIRCULAR), { softening, softeningKernel });
    // Source: 1/√(r²+ε²) and r²/(r²+ε²) at r = 1.
    near(whole.potential, -0.25 * depth, 1e-10);
    near(whole.clausius, -0.25 * depth * share, 1e-10);
    near(whole.virialRatio, 0.25 / (0.25 * depth), 1e-10);
    near(whole.clausiusRatio, 0.25 / (0.25 * depth * share), 1e-10);
  });
});

describe.each([
  ['none', 0],
  ['plummer', 0.3],
  ['spline', 0.3],
] as [SofteningKernel, number][])('a cloud of unequal masses, softening %s', (kernel, length) => {
  it('has the sums of plain loops, with any G', async () => {
    const bodies = cloud(120, 3);
    const plain = plainBalance(bodies, { kernel, length });
    const options = kernel === 'none' ? {} : { softening: length, softeningKernel: kernel };
    for (const gravity of [1, 4.3e-3]) {
      const record = await measure(particlesOf(bodies), { ...options, gravity });
      // Some thousand terms of double precision.
      near(record.whole.mass, plain.mass, 1e-13);
      near(record.whole.kinetic, plain.kinetic, 1e-13);
      near(record.whole.potential, gravity * plain.potential, 1e-12);
      near(record.whole.clausius, gravity * plain.clausius, 1e-12);
      near(record.momentOfInertia, plain.inertia, 1e-13);
      near(record.momentOfInertiaRate, plain.rate, 1e-11);
      plain.momentum.forEach((l, k) => expect(record.frame.angularMomentum[k]).toBeCloseTo(l, 11));
      plain.centre.forEach((c, k) => expect(record.frame.centreOfMass[k]).toBeCloseTo(c, 13));
      plain.velocity.forEach((v, k) => expect(record.frame.meanVelocity[k]).toBeCloseTo(v, 13));
      near(record.velocityDispersion, Math.sqrt((2 * plain.kinetic) / plain.mass / 3), 1e-13);
      const squares = bodies.reduce((sum, [m]) => sum + m * m, 0);
      near(record.effectiveNumber, plain.mass ** 2 / squares, 1e-13);
    }
  });
});

describe('many samples of 200 bodies', () => {
  const RUNS = 300;
  const records: Record<'plummer' | 'hernquist', MeasureRecord[]> = { plummer: [], hernquist: [] };
  beforeAll(async () => {
    for (const model of ['plummer', 'hernquist'] as const) {
      for (let seed = 1; seed <= RUNS; seed++) {
        records[model].push(await measureModel(model, 200, seed, { fractions: [0.1, 0.5, 0.9] }));
      }
    }
  });

  // Source: −3π/32 and −1/6; pair sums of N bodies and T about their own mean average (1 − 1/N) of these.
  it.each([
    ['plummer', -0.294524311274, 0.78, 0.804],
    ['hernquist', -1 / 6, 1.414, 1.014],
  ] as const)('%s: U and T average their continuum values less 1/N', (model, U, cU, cT) => {
    const potential = mean(records[model].map(({ whole }) => whole.potential));
    const kinetic = mean(records[model].map(({ whole }) => whole.kinetic));
    // Three standard errors of the mean, from the known scatter c/√N of single samples.
    const error = 3 / Math.sqrt(200 * RUNS);
    near(potential, U * (1 - 1 / 200), cU * error);
    near(kinetic, (-U / 2) * (1 - 1 / 200), cT * error);
  });

  it.each([
    ['plummer', 0.8042830984],
    ['hernquist', 1.1904937],
  ] as const)('%s: the noise told is c/√N with c = %d, and is the scatter seen', (model, c) => {
    const told = mean(records[model].map(({ whole }) => whole.noise ?? NaN)) * Math.sqrt(200);
    const seen = scatter(records[model].map(({ whole }) => whole.virialRatio ?? NaN));
    // Source: first-order expansion, quadrature; second order adds a few per cent at N = 200, the sampling
    // error of a scatter from 300 runs is 4 %.
    near(told, c, 0.06);
    near(seen * Math.sqrt(200), c, 0.15);
  });

  // Source: order statistics, k = √(f(1−f))/(d ln M/d ln r)/f, quadrature-free closed forms.
  it.each([
    ['plummer', [1.274605, 0.900805, 1.638076], plummer],
    ['hernquist', [2.193713, 1.707107, 3.247805], hernquist],
  ] as const)('%s: radii scatter by k/√N and say so', (model, k, closed) => {
    [0.1, 0.5, 0.9].forEach((f, at) => {
      const radii = records[model].map(({ lagrangian }) => lagrangian.radii[at] ?? NaN);
      const logs = radii.map(Math.log);
      // The density centre adds its own error to r_10: a wider margin there; 4 % is the Monte Carlo's.
      near(scatter(logs) * Math.sqrt(200), k[at], f === 0.1 ? 0.3 : 0.15);
      expect(Math.abs(mean(logs) - Math.log(closed.radiusOfMass(f)))).toBeLessThan(
        // Three standard errors, and the bias of a few per cent of a rank of 20 about a centre of its own.
        (3 * k[at]) / Math.sqrt(200 * RUNS) + (f === 0.1 ? 0.08 : 0.02),
      );
      const told = records[model].map(
        ({ lagrangian }) => (lagrangian.errors[at] ?? NaN) / (lagrangian.radii[at] ?? NaN),
      );
      near(mean(told) * Math.sqrt(200), k[at], 0.2);
    });
  });

  it('a large sample tells c and k to a few per cent', async () => {
    const one = await measureModel('plummer', 4096, 1);
    near((one.whole.noise ?? NaN) * 64, 0.8042830984, 0.04);
    near(((one.lagrangian.errors[4] ?? NaN) / one.halfMassRadius) * 64, 0.900805, 0.1);
    const other = await measureModel('hernquist', 4096, 1);
    near((other.whole.noise ?? NaN) * 64, 1.1904937, 0.05);
    near(((other.lagrangian.errors[4] ?? NaN) / other.halfMassRadius) * 64, 1.707107, 0.1);
  });
});

it('unequal masses: noise goes with the effective number', async () => {
  const range: [number, number] = [0.1, 10];
  const records: MeasureRecord[] = [];
  for (let seed = 1; seed <= 120; seed++) {
    const rest = { masses: 'salpeter', massRange: range } as const;
    records.push(await measureModel('plummer', 400, seed, {}, rest));
  }
  const large = await measureModel('plummer', 40_000, 1, { error: 0.01 }, { masses: 'salpeter' });
  // Source: N_eff/N of m^−2.35 between 0.1 and 10 from its moments, 0.2426628621. The scatter of Σm² is
  // √(⟨m⁴⟩/⟨m²⟩²/N), 4 % here (and 40 % at N = 400, which biases N_eff there).
  near(large.effectiveNumber / 40_000, 0.2426628621, 0.12);
  const scaled = records.map(
    ({ whole, effectiveNumber }) => ((whole.virialRatio ?? NaN) - 1) * Math.sqrt(effectiveNumber),
  );
  near(scatter(scaled), 0.804, 0.2); // Monte Carlo of 120: 6.5 %
  const told = records.map(
    ({ whole, effectiveNumber }) => (whole.noise ?? NaN) * Math.sqrt(effectiveNumber),
  );
  near(mean(told), 0.804, 0.08);
});

describe('softened models', () => {
  // Source: continuum double integrals of W and U (1 − W/U).
  it.each([
    ['plummer', 'plummer', 0.1, 0.01883],
    ['plummer', 'spline', 0.1, 0.00546],
    ['hernquist', 'plummer', 0.1, 0.02473],
    ['hernquist', 'spline', 0.1, 0.01077],
    ['plummer', 'plummer', 0.3, 0.08998],
    ['plummer', 'spline', 0.3, 0.04602],
  ] as const)('%s with a %s of %d: 1 − W/U', async (model, softeningKernel, softening, gap) => {
    const gaps: number[] = [];
    for (let seed = 1; seed <= 8; seed++) {
      const options = { softening, softeningKernel };
      const { whole } = await measureModel(model, 2000, seed, options);
      gaps.push(1 - whole.clausius / whole.potential);
    }
    // Eight samples of 2000; the scatter of a single one is known from themselves.
    expect(Math.abs(mean(gaps) - gap)).toBeLessThan((4 * scatter(gaps)) / Math.sqrt(8) + 1e-5);
    expect(scatter(gaps) / gap).toBeLessThan(0.25);
  });
});

describe('scales and times', () => {
  it('of a Plummer sphere', () => {
    const virial = virialRadius(1, 1, plummer.potentialEnergy);
    near(virial, 1.6976527263136, 1e-12); // 16/(3π)
    near(crossingTime(1, 1, virial), 6.256310237604, 1e-11);
    expect(virialRadius(1, 1, 0)).toBeNull();
    expect(crossingTime(1, 1, null)).toBeNull();
  });

  it('in Hénon units: r_v = 1, t_cr = 2√2', () => {
    // Source: Heggie & Mathieu 1986.
    expect(virialRadius(1, 1, -0.5)).toBe(1);
    near(crossingTime(1, 1, 1), 2.8284271247461903, 1e-15);
  });

  const equalMass = (particles: number, coulombFactor: number, gravity = 1, mass = 1, r = 1) => {
    const logarithm = coulombLogarithm({
      particles,
      coulombFactor,
      gravity,
      mass,
      halfMassRadius: r,
      meanSquareVelocity: 0.5,
      softening: 0,
    });
    return halfMassRelaxationTime(particles, mass, gravity, r, logarithm);
  };

  // Source: 0.138 √N r_h^1.5/(√(m G) ln γN), r_h = 1.30476603 · 3π/16 (Spitzer & Hart 1971).
  it.each([
    [256, 0.4, 5.14242749],
    [256, 0.11, 7.13133894],
    [1000, 0.11, 19.78165032],
    [10000, 0.02, 175.49582728],
    [100000, 0.11, 999.21288065],
  ])('N = %i, γ = %d: t_rh = %d', (particles, factor, value) => {
    near(equalMass(particles, factor, 1, 1, (1.3047660265041 * 3 * Math.PI) / 16), value, 1e-8);
  });

  it('of a cluster of 1e5 suns within 3 pc: 363 Myr', () => {
    const { gravity } = UNIT_SYSTEMS['pc-kms-msun'];
    const time = equalMass(1e5, 0.11, gravity, 1e5, 3);
    near((time ?? NaN) * PARSEC_PER_KMS_IN_MYR, 363.312435, 1e-8);
  });

  it('need γN > 3, and know large softening', () => {
    expect(equalMass(27, 0.11)).toBeNull();
    expect(equalMass(28, 0.11)).not.toBeNull();
    const at = (softening: number) =>
      coulombLogarithm({
        particles: 1e6,
        coulombFactor: 0.11,
        gravity: 1,
        mass: 1,
        halfMassRadius: 1,
        meanSquareVelocity: 0.5,
        softening,
      });
    // b_90 = 2Gm/⟨v²⟩ = 4e-6: smaller softening changes nothing, larger one caps Λ at r_h/ε.
    near(at(3e-6), Math.log(1.1e5), 1e-14);
    near(at(5e-6), Math.log(1.1e5), 1e-14); // r_h/ε = 2e5 is not smaller
    near(at(0.01), Math.log(100), 1e-14);
    expect(at(0.4)).toBeNull();
  });

  it('of a whole record agree with its own figures', async () => {
    const record = await measureModel('plummer', 2000, 4);
    const { whole, halfMassRadius: r, virialRadius: v } = record;
    near(v, 1 / (2 * Math.abs(whole.potential)), 1e-12);
    near(record.crossingTime, Math.sqrt(8 * (v ?? NaN) ** 3), 1e-12);
    near(record.relaxation.coulombLogarithm, Math.log(220), 1e-14);
    near(record.relaxation.time, (0.138 * 2000 * r ** 1.5) / Math.log(220), 1e-12);
    expect(record.lagrangian.radii[record.lagrangian.fractions.indexOf(0.5)]).toBe(r);
  });

  it('a sample in Hénon units has E = −1/4', async () => {
    const scaleRadius = (3 * Math.PI) / 16;
    const record = await measureModel('plummer', 4096, 9, { units: 'henon' }, { scaleRadius });
    // 1.5/√N: the noise of T and U at 3σ.
    near(record.whole.energy, -0.25, 0.04);
    near(record.virialRadius, 1, 0.04);
    expect(record.settings.units).toEqual({ value: 'henon', from: 'option' });
  });
});

it('a hard binary at pericentre fakes an excess of kinetic energy', async () => {
  // A smooth cluster is not needed: two far clusters at rest stand for one with T = 1/4, U = −1/2 if
  // the pair adds (E_b (1+e)/(1−e), −E_b − that). Source: E_b = 0.25, e = 0.9: 2(0.25 + 4.75)/(0.5 + 5) = 1.818.
  const cluster = makeModel({
    model: 'plummer',
    count: 4000,
    seed: 2,
    scaleRadius: (3 * Math.PI) / 16,
  });
  recentre(cluster);
  const { whole } = await measure(cluster);
  const [T, U] = [whole.kinetic, whole.potential];
  // Two of its bodies become a pair: m = 1/4000 each, G m²/(2a) = 0.25, at r = a (1 − e), v² = 2m (1+e)/(a(1−e)).
  const m = 1 / 4000;
  const a = (m * m) / 0.5;
  const bodies = bodiesOf(cluster);
  const [, x, y, z, vx, vy, vz] = bodies[0];
  const r = a * 0.1;
  const v = Math.sqrt((2 * m * 1.9) / (a * 0.1));
  bodies[0] = [m, x + r / 2, y, z, vx, vy + v / 2, vz];
  bodies[1] = [m, x - r / 2, y, z, vx, vy - v / 2, vz];
  const record = await measure(particlesOf(bodies));
  const expected = (2 * (T + 4.75)) / (-U + 5);
  // One body has moved in a cluster of 4000: a few parts in 10⁴ of T and U, of which 5 is the larger part.
  near(record.whole.virialRatio, expected, 1e-3);
  near(record.whole.virialRatio, 1.8181818182, 0.01); // and the cluster itself is within 2 % of T = 1/4
});
