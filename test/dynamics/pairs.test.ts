/** Hard pairs put into clusters with known orbits, and what merging them leaves. */
import { describe, expect, it } from 'vitest';
import { orbitOf } from '../../src/dynamics/pairOrbit.ts';
import { boundPairs, mergedBodies } from '../../src/dynamics/pairs.ts';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { makeModel } from '../../src/models/make.ts';
import { recentre } from '../../src/models/scaling.ts';
import { Random } from '../../src/numerics/random.ts';
import { buildOctree } from '../../src/octree/build.ts';
import { sumForces } from '../../src/octree/forces.ts';
import { NO_SOFTENING, type Softening } from '../../src/octree/softening.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { natural, pairLaw } from '../octree/samples.ts';
import { bodiesOf, measure, particlesOf, plainBalance, type Body } from './samples.ts';

const near = (value: number | null | undefined, expected: number, relative: number) =>
  expect(Math.abs((value ?? NaN) / expected - 1)).toBeLessThan(relative);
const codes = (record: MeasureRecord) => record.remarks.map(({ code }) => code);
const WITH = { with: ['pairs'] } as const;

function pairsOf(record: MeasureRecord) {
  const { hardPairs, hardPairsEnergy, hardestPairs, pairsMerged } = record;
  if (!hardestPairs || !pairsMerged) throw new Error('no pairs');
  return { hardPairs, hardPairsEnergy, hardestPairs, pairsMerged };
}

/** A Plummer sphere in Hénon units: M = 1, r_v = 1, kT = 1/(6N) on average. Source: Heggie & Mathieu 1986. */
function cluster(count: number, seed: number): Body[] {
  const scaleRadius = (3 * Math.PI) / 16;
  const particles = makeModel({ model: 'plummer', count, seed, scaleRadius });
  recentre(particles);
  return bodiesOf(particles);
}

interface Elements {
  readonly a: number;
  readonly e: number;
  /** Eccentric anomaly. */
  readonly anomaly: number;
}

/**
 * Two bodies on a Kepler orbit in a random plane, about a body's place and velocity. Source: two-body
 * problem, x = a (cos E − e), y = a √(1 − e²) sin E, E˙ = √(G M/a³)/(1 − e cos E).
 */
function kepler(
  [, x, y, z, u, v, w]: Body,
  masses: readonly [number, number],
  { a, e, anomaly }: Elements,
  random: Random,
): [Body, Body] {
  const total = masses[0] + masses[1];
  const rate = Math.sqrt(total / a ** 3) / (1 - e * Math.cos(anomaly));
  const b = a * Math.sqrt(1 - e * e);
  const place = [a * (Math.cos(anomaly) - e), b * Math.sin(anomaly)];
  const speed = [-a * Math.sin(anomaly) * rate, b * Math.cos(anomaly) * rate];
  const p = new Float64Array(3);
  const q = new Float64Array(3);
  random.unitVector(p);
  random.unitVector(q);
  const along = p[0] * q[0] + p[1] * q[1] + p[2] * q[2];
  const length = Math.sqrt(1 - along * along);
  for (let k = 0; k < 3; k++) q[k] = (q[k] - along * p[k]) / length;
  const member = (own: number, share: number): Body => {
    const at = [x, y, z].map((c, k) => c + share * (place[0] * p[k] + place[1] * q[k]));
    const go = [u, v, w].map((c, k) => c + share * (speed[0] * p[k] + speed[1] * q[k]));
    return [own, at[0], at[1], at[2], go[0], go[1], go[2]];
  };
  return [member(masses[0], -masses[1] / total), member(masses[1], masses[0] / total)];
}

const apart = (a: Body, b: Body) => Math.hypot(...[1, 2, 3].map((k) => a[k] - b[k]));

/** Indices of the bodies nearest to a place, the named ones left out, by a search of all. */
function nearest(bodies: readonly Body[], place: Body, without: number[], count: number): number[] {
  const others = bodies.map((_, k) => k).filter((k) => !without.includes(k));
  const distance = bodies.map((b) => apart(b, place));
  return others.sort((a, b) => distance[a] - distance[b]).slice(0, count);
}

/** The one of the four nearest that a body is bound to most tightly, or −1. */
function partners(bodies: readonly Body[]): number[] {
  return bodies.map((a, i) => {
    const binding = (j: number) => {
      const b = bodies[j];
      const v2 = [4, 5, 6].reduce((sum, k) => sum + (a[k] - b[k]) ** 2, 0);
      return a[0] * b[0] * (1 / apart(a, b) - v2 / 2 / (a[0] + b[0]));
    };
    return nearest(bodies, a, [i], 4).reduce(
      (best, j) => (binding(j) > Math.max(0, best < 0 ? 0 : binding(best)) ? j : best),
      -1,
    );
  });
}

/**
 * kT about a pair: a third of ⟨m v²⟩ of the 32 nearest others about their mean, other bound pairs as one
 * body each, by a search of all.
 */
function plainTemperature(
  bodies: readonly Body[],
  partner: number[],
  i: number,
  j: number,
): number {
  const [a, b] = [bodies[i], bodies[j]];
  const middle = a.map((c, k) => (a[0] * c + b[0] * b[k]) / (a[0] + b[0])) as unknown as Body;
  const others = nearest(bodies, middle, [i, j], 32);
  const objects = new Map(
    others.map((k) => {
      const other = partner[k];
      if (other < 0 || partner[other] !== k) return [k, bodies[k]];
      const [p, q] = [bodies[k], bodies[other]];
      const m = p[0] + q[0];
      const mean = [1, 2, 3, 4, 5, 6].map((c) => (p[0] * p[c] + q[0] * q[c]) / m);
      return [Math.min(k, other), [m, ...mean] as unknown as Body];
    }),
  );
  const list = [...objects.values()];
  const mass = list.reduce((sum, [m]) => sum + m, 0);
  const mean = [4, 5, 6].map((k) => list.reduce((sum, b) => sum + b[0] * b[k], 0) / mass);
  const square = list.reduce(
    (sum, b) => sum + b[0] * [4, 5, 6].reduce((s, k, n) => s + (b[k] - mean[n]) ** 2, 0),
    0,
  );
  return square / 3 / (list.length - 1);
}

describe('pairs on known orbits', () => {
  const ELEMENTS: Elements[] = [
    { a: 1e-4, e: 0, anomaly: 1 },
    { a: 2e-4, e: 0.5, anomaly: 3 },
    { a: 3e-4, e: 0.9, anomaly: 0 },
    { a: 5e-5, e: 0.99, anomaly: 2 },
    { a: 4e-4, e: 0.7, anomaly: Math.PI },
  ];

  it.each([
    [1000, 'direct sums'],
    [8000, 'the tree'],
  ])('of %i bodies (%s): elements, energies, ids, and nothing else', async (count) => {
    const bodies = cluster(count, 1);
    const random = new Random(2);
    const expected = ELEMENTS.map((elements, k) => {
      const heavy = (1 + k) / count;
      // The partners stand at the end: indices are those of the input.
      const [one, two] = kepler(bodies[50 * k], [heavy, 1 / count], elements, random);
      bodies[50 * k] = one;
      bodies.push(two);
      const energy = heavy / count / (2 * elements.a);
      return { ...elements, energy, first: 50 * k, second: count + k };
    });
    const id = BigUint64Array.from(bodies, (_, i) => (i === 50 ? 2n ** 63n : BigInt(7 * i)));
    const particles = particlesOf(bodies, { columns: { id } });
    const { hardPairs, hardPairsEnergy, hardestPairs } = pairsOf(await measure(particles, WITH));
    expect(hardPairs).toBe(5);
    near(
      hardPairsEnergy,
      expected.reduce((sum, { energy }) => sum + energy, 0),
      1e-9,
    );
    for (const { a, e, energy, first, second } of expected) {
      const k = hardestPairs.first.indexOf(first);
      expect(hardestPairs.second[k]).toBe(second);
      // Positions of order 1 leave 1e-16/1e-6 of the smallest distance.
      near(hardestPairs.semiMajorAxes[k], a, 1e-8);
      expect(Math.abs(hardestPairs.eccentricities[k] - e)).toBeLessThan(1e-6);
      near(hardestPairs.energies[k], energy, 1e-8);
      expect(hardestPairs.firstIds[k]).toBe(first === 50 ? '9223372036854775808' : 7 * first);
      expect(hardestPairs.secondIds[k]).toBe(7 * second);
      // Source: a mean of 3 · 31 squares of normal deviates: √(2/93) if no two are taken as one.
      const relative = hardestPairs.hardnessErrors[k] / hardestPairs.hardness[k];
      expect(relative).toBeGreaterThanOrEqual(Math.sqrt(2 / 93) - 1e-12);
      expect(relative).toBeLessThan(Math.sqrt(2 / 70));
    }
    const order = [...hardestPairs.hardness].sort((a, b) => b - a);
    expect(hardestPairs.hardness).toEqual(order);
  });

  it('is hard above kT: a = 3/N in Hénon units, where kT = 1/(6N)', async () => {
    // Source: Heggie 1975; kT = m σ² = 1/(6N) and G m²/(2a) = kT at a = 3/N, for the cluster as a whole.
    const count = 1000;
    const counted = async (times: number) => {
      let found = 0;
      for (let seed = 1; seed <= 10; seed++) {
        const bodies = cluster(count, seed);
        const random = new Random(seed);
        // At the half-mass radius the dispersion is about the mean one.
        const i = bodies.findIndex(([, x, y, z]) => Math.abs(Math.hypot(x, y, z) - 0.77) < 0.05);
        const elements = { a: (3 / count) * times, e: 0.2, anomaly: 1 };
        const [one, two] = kepler(bodies[i], [1 / count, 1 / count], elements, random);
        bodies[i] = one;
        bodies.push(two);
        found += pairsOf(await measure(particlesOf(bodies), WITH)).hardPairs ?? NaN;
      }
      return found;
    };
    // kT around a pair scatters by 15 %, and the place changes it by some tens of per cent.
    expect(await counted(0.3)).toBe(10);
    expect(await counted(3)).toBe(0);
  });

  it('is found though a third body passes between', async () => {
    const bodies = cluster(500, 3);
    const elements = { a: 2e-3, e: 0.8, anomaly: Math.PI };
    const [one, two] = kepler(bodies[7], [1 / 500, 1 / 500], elements, new Random(4));
    bodies[7] = one;
    bodies.push(two);
    // Nearer to the first than its partner is, but far too fast to be bound.
    bodies.push([1 / 500, one[1] + 1e-3, one[2], one[3], 3, -2, 1]);
    const { hardPairs, hardestPairs } = pairsOf(await measure(particlesOf(bodies), WITH));
    expect(hardPairs).toBe(1);
    expect([hardestPairs.first[0], hardestPairs.second[0]]).toEqual([7, 500]);
  });

  it('does not heat its neighbours: half of all bodies in pairs, all found', async () => {
    const random = new Random(5);
    const count = 400;
    const bodies = cluster(count, 6).flatMap((body) => {
      const elements = { a: 1e-4 * (1 + random.uniform()), e: random.uniform(), anomaly: 2 };
      return kepler(body, [0.5 / count, 0.5 / count], elements, random);
    });
    const { hardPairs, hardestPairs, pairsMerged } = pairsOf(
      await measure(particlesOf(bodies), WITH),
    );
    expect(hardPairs).toBe(count);
    expect(hardestPairs.first).toHaveLength(8);
    expect(hardestPairs.firstIds).toEqual([]);
    expect(pairsMerged.particles).toBe(count);
  });
});

describe('no pairs', () => {
  it('in a sphere of equal bodies without any', async () => {
    for (const count of [1000, 6000]) {
      const record = await measure(particlesOf(cluster(count, 7)), WITH);
      const { hardPairs, pairsMerged, hardestPairs } = pairsOf(record);
      expect(hardPairs).toBe(0);
      expect(pairsMerged).toEqual(record.whole);
      expect(hardestPairs.first).toEqual([]);
      expect(codes(record)).not.toContain('hardPairs');
    }
  });

  it('are told where there is no temperature', async () => {
    const pair = kepler([1, 0, 0, 0, 0, 0, 0], [1, 1], { a: 1, e: 0, anomaly: 0 }, new Random(1));
    const two = await measure(particlesOf(pair), WITH);
    const cold = await measure(
      particlesOf(cluster(100, 8).map(([m, x, y, z]): Body => [m, x, y, z, 0, 0, 0])),
      WITH,
    );
    for (const record of [two, cold]) {
      expect(record.hardPairs).toBeNull();
      expect(record.hardPairsEnergy).toBeNull();
      expect(record.pairsMerged).toEqual(record.whole);
      expect(codes(record)).toContain('noHardPairs');
    }
  });

  it('of bodies without mass, or at one point unsoftened', async () => {
    const bodies = cluster(300, 9);
    const [, ...rest] = bodies[3];
    bodies.push([0, ...rest], [1 / 300, ...bodies[4].slice(1)] as unknown as Body);
    expect(pairsOf(await measure(particlesOf(bodies), WITH)).hardPairs).toBe(0);
  });
});

describe('softened pairs', () => {
  /** Least and greatest distance on the way, by small steps. Source: velocity Verlet, textbook. */
  function extremes(softening: Softening, x0: number, v0: number): [number, number] {
    const h = 1e-4;
    let [x, y, u, v] = [x0, 0, 0, v0];
    let [low, high] = [Infinity, 0];
    const pull = (r: number) => 2 * pairLaw(softening, r).s;
    let s = pull(Math.hypot(x, y));
    for (let k = 0; k < 200_000; k++) {
      u -= (h / 2) * s * x;
      v -= (h / 2) * s * y;
      x += h * u;
      y += h * v;
      const r = Math.hypot(x, y);
      s = pull(r);
      u -= (h / 2) * s * x;
      v -= (h / 2) * s * y;
      low = Math.min(low, r);
      high = Math.max(high, r);
    }
    return [low, high];
  }

  it.each<[string, Softening]>([
    ['unsoftened', NO_SOFTENING],
    ['Plummer', { kernel: 'plummer', length: 0.4 }],
    ['a spline', { kernel: 'spline', length: 0.4 }],
  ])('%s: turning points are those of the orbit', (_, softening) => {
    const speed = 0.8;
    const [low, high] = extremes(softening, 1, speed);
    const state = { attraction: 2, position: [1, 0, 0], velocity: [0, speed, 0] } as const;
    const { semiMajorAxis, eccentricity } = orbitOf(state, softening);
    near(semiMajorAxis, (low + high) / 2, 1e-5);
    near(eccentricity, (high - low) / (high + low), 1e-5);
    // The same from any other point of the orbit.
    const radial = { attraction: 2, position: [0.5, 0, 0], velocity: [-0.3, 0, 0] } as const;
    expect(orbitOf(radial, softening).eccentricity).toBe(1);
  });

  it('lose energy to the softening, and are judged by what is left', async () => {
    const bodies = cluster(500, 10);
    const elements = { a: 1e-3, e: 0, anomaly: 0 };
    const [one, two] = kepler(bodies[0], [1 / 500, 1 / 500], elements, new Random(1));
    bodies[0] = one;
    bodies.push(two);
    const particles = particlesOf(bodies);
    const of = async (softening: number) =>
      pairsOf(await measure(particles, softening > 0 ? { ...WITH, softening } : WITH));
    // −½ μ v² + m²/√(r² + ε²) with v² = 2m/r.
    const m = 1 / 500;
    const energy = (e: number) => (m * m) / Math.hypot(1e-3, e) - (m * m) / 2e-3;
    near((await of(0)).hardestPairs.energies[0], energy(0), 1e-9);
    near((await of(5e-4)).hardestPairs.energies[0], energy(5e-4), 1e-9);
    expect(energy(2e-3)).toBeLessThan(0);
    expect((await of(2e-3)).hardPairs).toBe(0);
  });
});

describe('the balance with pairs merged', () => {
  it('is that of the bodies with each pair at its centre of mass', async () => {
    for (const softening of [NO_SOFTENING, { kernel: 'plummer', length: 1e-5 }] as const) {
      const bodies = cluster(600, 11);
      const random = new Random(12);
      const centres = [10, 20, 30].map((i) => {
        const [m, ...rest] = bodies[i];
        const elements = { a: 1e-4, e: 0.6, anomaly: random.uniform() * 6 };
        const [one, two] = kepler(bodies[i], [2 * m, m], elements, random);
        bodies[i] = one;
        bodies.push(two);
        return [3 * m, ...rest] as Body;
      });
      const merged = bodies.slice(0, 600);
      [10, 20, 30].forEach((i, k) => (merged[i] = centres[k]));
      const plain = plainBalance(merged, softening);
      const options = softening.length > 0 ? { ...WITH, softening: softening.length } : WITH;
      const record = await measure(particlesOf(bodies), options);
      const { hardPairs, pairsMerged } = pairsOf(record);
      expect(hardPairs).toBe(3);
      expect(pairsMerged.particles).toBe(600);
      near(pairsMerged.mass, record.whole.mass, 1e-14);
      // Rounding of the pairs' own, large energies.
      near(pairsMerged.kinetic, plain.kinetic, 1e-10);
      near(pairsMerged.potential, plain.potential, 1e-10);
      near(pairsMerged.clausius, plain.clausius, 1e-10);
      const remark = record.remarks.find(({ code }) => code === 'hardPairs');
      expect(remark?.text).toContain('3 hard pairs');
    }
  });

  it('takes back what a pair at pericentre does to the ratio', async () => {
    // Source: E_b = 1/4, e = 0.9 at pericentre beside T = 1/4, U = −1/2: 2 (0.25 + 4.75)/(0.5 + 5) = 1.818,
    // and 1 without the pair.
    const count = 4000;
    const bodies = cluster(count, 2);
    const m = 1 / count;
    const before = await measure(particlesOf(bodies));
    const elements = { a: (m * m) / 0.5, e: 0.9, anomaly: 0 };
    const [one, two] = kepler(bodies[0], [m, m], elements, new Random(3));
    const record = await measure(particlesOf([one, two, ...bodies.slice(1)]), WITH);
    near(record.whole.virialRatio, 20 / 11, 0.02);
    const { hardPairs, hardPairsEnergy, pairsMerged } = pairsOf(record);
    expect(hardPairs).toBe(1);
    near(hardPairsEnergy, 0.25, 1e-6);
    // One body of 4000 is twice as heavy now.
    near(pairsMerged.virialRatio, before.whole.virialRatio ?? NaN, 2e-3);
    expect(Math.abs((pairsMerged.virialRatio ?? NaN) - 1)).toBeLessThan(
      3 * (pairsMerged.noise ?? NaN),
    );
  });

  it('keeps places and velocities of pairs far from the origin', () => {
    const far: Body[] = [
      [1, 1e6, 0, 0, 0, 0, 0],
      [3, 1e6 + 1e-3, 0, 0, 0, 4, 0],
      [1, 0, 0, 0, 0, 0, 0],
    ];
    const { x, vy, mass, count } = mergedBodies([{ first: 1, second: 0 }], particlesOf(far));
    expect([count, ...mass]).toEqual([2, 4, 1]);
    expect(Math.abs(x[0] - (1e6 + 0.75e-3))).toBeLessThan(2e-10);
    expect(vy[0]).toBe(3);
  });
});

it('pairs and temperatures of a tree are those of a search of all', async () => {
  const random = new Random(14);
  const bodies = cluster(900, 13).flatMap((body, i) =>
    i % 9 === 0
      ? kepler(body, [body[0] / 3, (2 * body[0]) / 3], { a: 5e-4, e: 0.3, anomaly: i }, random)
      : [body],
  );
  const particles = particlesOf(bodies);
  const tree = await buildOctree(particles, crewOfOne());
  const forces = await sumForces(particles, natural(NO_SOFTENING), crewOfOne());
  const found = await boundPairs({ particles, tree, forces }, crewOfOne());
  const put = found.filter(({ first, second }) => Math.abs(first - second) === 1);
  expect(put).toHaveLength(100);
  const partner = partners(bodies);
  for (const { first, second, energy, temperature, around } of found) {
    const [a, b] = [bodies[first], bodies[second]];
    const v2 = [4, 5, 6].reduce((sum, k) => sum + (a[k] - b[k]) ** 2, 0);
    const r = Math.hypot(...[1, 2, 3].map((k) => a[k] - b[k]));
    near(energy, (a[0] * b[0]) / r - ((a[0] * b[0]) / (a[0] + b[0])) * 0.5 * v2, 1e-9);
    near(temperature, plainTemperature(bodies, partner, first, second), 1e-9);
    expect(around).toBeLessThanOrEqual(32);
  }
  const mutual = partner.flatMap((j, i) => (j > i && partner[j] === i ? [[i, j]] : []));
  const asFound = found.map(({ first, second }) => [first, second].sort((a, b) => a - b));
  expect(asFound.sort((a, b) => a[0] - b[0])).toEqual(mutual);
});
