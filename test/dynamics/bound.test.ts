/** The bound set against unbinding by plain sums over all pairs. */
import { describe, expect, it } from 'vitest';
import { makeModel } from '../../src/models/make.ts';
import { recentre, scaleVelocities } from '../../src/models/scaling.ts';
import { Random } from '../../src/numerics/random.ts';
import { NO_SOFTENING, type Softening } from '../../src/octree/softening.ts';
import { pairLaw } from '../octree/samples.ts';
import { bodiesOf, measure, particlesOf, plainBalance, type Body } from './samples.ts';

/**
 * Bodies that stay after removing, round by round, those with ½|v − v_c|² + φ ≥ 0 by the forces of the
 * set alone, at most the least bound quarter at a time, and of 32 bodies or fewer the least bound one.
 * Source: common practice.
 */
function plainBound(bodies: readonly Body[], softening: Softening): Body[] {
  let set = [...bodies];
  for (;;) {
    const mass = set.reduce((sum, [m]) => sum + m, 0);
    const mean = [4, 5, 6].map((k) => set.reduce((sum, b) => sum + b[0] * b[k], 0) / mass);
    const phi = new Float64Array(set.length);
    set.forEach((a, i) => {
      for (let j = 0; j < i; j++) {
        const b = set[j];
        const { f } = pairLaw(softening, Math.hypot(a[1] - b[1], a[2] - b[2], a[3] - b[3]));
        phi[i] -= b[0] * f;
        phi[j] -= a[0] * f;
      }
    });
    const energies = set.map(
      (b, i) => 0.5 * mean.reduce((sum, v, k) => sum + (b[4 + k] - v) ** 2, 0) + phi[i],
    );
    const unbound = energies.filter((e) => e >= 0).sort((a, b) => a - b);
    if (unbound.length === 0) return set;
    const most = set.length > 32 ? Math.floor(set.length / 4) : 1;
    const limit = unbound.length > most ? unbound[unbound.length - most] : 0;
    set = set.filter((_, i) => energies[i] < limit || energies[i] < 0);
    if (set.length === 0) return set;
  }
}

const near = (value: number, expected: number, relative: number) =>
  expect(Math.abs(value / expected - 1), `${value} against ${expected}`).toBeLessThan(relative);

/** A Plummer sphere with its velocities scaled to a ratio 2T/|U| that it has to rounding. */
async function warm(count: number, seed: number, ratio: number) {
  const particles = makeModel({ model: 'plummer', count, seed });
  recentre(particles);
  const { whole } = await measure(particles);
  scaleVelocities(particles, Math.sqrt(ratio / (whole.virialRatio ?? NaN)));
  return particles;
}

describe.each([
  NO_SOFTENING,
  { kernel: 'plummer', length: 0.1 },
  { kernel: 'spline', length: 0.1 },
] as Softening[])('softening $kernel', (softening) => {
  const options =
    softening.kernel === 'none'
      ? {}
      : { softening: softening.length, softeningKernel: softening.kernel };

  it.each([1, 1.6, 2.2, 3.5])('a Plummer sphere of 600 bodies at 2T/|U| = %d', async (ratio) => {
    const particles = await warm(600, 11, ratio);
    const { bound, whole } = await measure(particles, options);
    const plain = plainBound(bodiesOf(particles), softening);
    expect(bound.particles).toBe(plain.length);
    if (ratio === 1.6) expect(bound.particles).toBeLessThan(whole.particles);
    if (plain.length === 0) return;
    const balance = plainBalance(plain, softening);
    // Fields are subtracted round by round: each adds roundings of what was taken away.
    near(bound.mass, balance.mass, 1e-13);
    near(bound.kinetic, balance.kinetic, 1e-11);
    near(bound.potential, balance.potential, 1e-11);
    near(bound.clausius, balance.clausius, 1e-11);
    near(bound.virialRatio ?? NaN, (2 * balance.kinetic) / -balance.potential, 1e-11);
  });

  it('by the tree of 6000 bodies, as by direct sums', async () => {
    const particles = await warm(6000, 12, 1.6);
    const direct = await measure(particles, { ...options, exact: true });
    const tree = await measure(particles, { ...options, error: 1e-5 });
    expect(tree.engine.origin).toBe('tree');
    // Bodies whose energy lies within the error of φ of 0 may fall either way.
    expect(Math.abs(tree.bound.particles - direct.bound.particles)).toBeLessThan(6);
    expect(direct.bound.particles).toBeLessThan(5900);
    near(tree.bound.potential, direct.bound.potential, 1e-3);
    near(tree.bound.kinetic, direct.bound.kinetic, 3e-3);
    near(tree.bound.clausius, direct.bound.clausius, 1e-3);
  });
});

describe('few bodies', () => {
  const pair = (m: number, v: number): Body[] => [
    [m, 0.5, 0, 0, 0, v, 0],
    [m, -0.5, 0, 0, 0, -v, 0],
  ];

  it('a pair is bound below its escape speed and not above', async () => {
    // m = 1/2 each at distance 1: φ = −1/2, so that ½v² < ½ below v = 1.
    const slow = await measure(particlesOf(pair(0.5, 0.999)));
    expect(slow.bound).toEqual(slow.whole);
    const fast = await measure(particlesOf(pair(0.5, 1.001)));
    expect(fast.bound.particles).toBe(0);
    expect(fast.bound.virialRatio).toBeNull();
    expect(fast.remarks.map(({ code }) => code)).toContain('nothingBound');
  });

  it('a close pair stays a pair whoever flies away from it', async () => {
    const escaper: Body = [0.5, 0, 40, 0, 0, 100, 0];
    const one = await measure(particlesOf([...pair(0.5, 0.5), escaper]));
    expect(one.bound.particles).toBe(2);
    near(one.bound.virialRatio ?? NaN, 1, 1e-12);
    near(one.bound.mass, 1, 1e-15);
    // Three light bodies flying the same way are most of the bodies, but little of the mass.
    const three = [1, 2, 3].map((k): Body => [1e-3, 0, 1000 * k, 0, 0, 1000, 0]);
    const four = await measure(particlesOf([...pair(0.5, 0.5), ...three]));
    expect(four.bound.particles).toBe(2);
    near(four.bound.virialRatio ?? NaN, 1, 1e-12);
  });

  it('a hierarchical triple is bound as a whole', async () => {
    const third: Body = [0.01, 0, 30, 0, Math.sqrt(1 / 30), 0, 0];
    const record = await measure(particlesOf([...pair(0.5, 0.5), third]));
    expect(record.bound).toEqual(record.whole);
  });

  it('one body alone is bound to nothing', async () => {
    const record = await measure(particlesOf([[1, 0, 0, 0, 3, 0, 0]]));
    expect(record.bound.particles).toBe(0);
  });
});

describe('escapers', () => {
  it.each([
    ['a few, taken away one by one', 60],
    ['many, taken away through a tree of their own', 400],
    ['so many that all is summed again', 1600],
  ])('%s', async (_, escapers) => {
    const particles = makeModel({ model: 'plummer', count: 5000, seed: 21 });
    recentre(particles);
    const rest = bodiesOf(particles).slice(escapers);
    const random = new Random(3);
    const direction = new Float64Array(3);
    for (let i = 0; i < escapers; i++) {
      random.unitVector(direction);
      [particles.vx[i], particles.vy[i], particles.vz[i]] = direction.map((c) => 60 * c);
    }
    const record = await measure(particles);
    const alone = await measure(particlesOf(rest));
    // Whatever way the field of those bodies was taken away, the rest is as if measured alone.
    expect(record.bound.particles).toBe(alone.bound.particles);
    near(record.bound.mass, alone.bound.mass, 1e-12);
    near(record.bound.kinetic, alone.bound.kinetic, 1e-12);
    near(record.bound.potential, alone.bound.potential, 1e-4);
    near(record.bound.virialRatio ?? NaN, alone.bound.virialRatio ?? NaN, 1e-4);
    expect(record.remarks.map(({ code }) => code)).toContain('unboundMass');
    // The bound set has radii of its own.
    near(record.boundLagrangian.radii[4] ?? NaN, alone.halfMassRadius, 0.05);
  });

  it('that all fly the same way do not take the rest with them', async () => {
    const particles = makeModel({ model: 'plummer', count: 1000, seed: 22 });
    recentre(particles);
    for (let i = 0; i < 100; i++) particles.vx[i] += 100;
    const { bound } = await measure(particles);
    // The mean velocity of all is 10, at which no body is bound; that of the rest is 0.
    expect(bound.particles).toBe(900);
  });

  it('nothing is bound in a gas, and all is in a cold start', async () => {
    const gas = await warm(500, 23, 100);
    expect((await measure(gas)).bound.particles).toBeLessThan(5);
    const cold = await warm(500, 23, 0.01);
    const record = await measure(cold);
    expect(record.bound).toEqual(record.whole);
  });
});

it.each(['plummer', 'hernquist'] as const)(
  '%s in equilibrium loses next to no body by errors of the tree',
  async (model) => {
    const particles = makeModel({ model, count: 20_000, seed: 31 });
    const direct = await measure(particles, { exact: true, error: 1e-3 });
    const tree = await measure(particles);
    expect(direct.bound.particles).toBeGreaterThan(19_990);
    expect(Math.abs(tree.bound.particles - direct.bound.particles)).toBeLessThan(5);
  },
);
