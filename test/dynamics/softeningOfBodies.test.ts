/** Records of snapshots whose bodies have softening lengths of their own, against plain loops over pairs. */
import { describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import type { MeasureOptions } from '../../src/dynamics/settings.ts';
import { mergedSoftening } from '../../src/dynamics/pairs.ts';
import { makeModel } from '../../src/models/make.ts';
import { Random } from '../../src/numerics/random.ts';
import type { Softening } from '../../src/octree/softening.ts';
import { PROMISED_SIGMAS } from '../../src/octree/forces.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { plainField, softeningOfPair, type Columns } from '../octree/samples.ts';
import { cloud, measure, particlesOf, type Body } from './samples.ts';

const codes = (record: MeasureRecord) => record.remarks.map(({ code }) => code);
const near = (value: number, expected: number, relative: number) =>
  expect(Math.abs(value / expected - 1), `${value} against ${expected}`).toBeLessThan(relative);

const withLengths = (particles: Particles, lengthOf: (i: number) => number): Particles => {
  const softening = new Float64Array(new SharedArrayBuffer(particles.count * 8));
  softening.forEach((_, i) => (softening[i] = lengthOf(i)));
  return { ...particles, columns: { ...particles.columns, softening } };
};
const MIXED = (i: number) => [0.3, 0.003, 0, 0.1][i % 4];
const COLUMN: MeasureOptions = { softening: 'column' };

/** U and W of some of the bodies, by index. */
function plainOf(particles: Particles, kernel: Softening['kernel'], kept: readonly number[]) {
  const pick = (column: ArrayLike<number>) => Float64Array.from(kept, (i) => column[i]);
  const { mass, x, y, z, columns } = particles;
  const lengths = pick(columns.softening ?? []);
  const bodies: Columns = { mass: pick(mass), x: pick(x), y: pick(y), z: pick(z) };
  return plainField(bodies, { kernel, length: 1, lengths });
}

/** A Plummer sphere that stays together when a third of it is gone. */
function cool(count: number, seed: number): Particles {
  const made = makeModel({ model: 'plummer', count, seed });
  for (const column of [made.vx, made.vy, made.vz]) column.forEach((v, i) => (column[i] = 0.3 * v));
  return made;
}

describe.each(['plummer', 'spline'] as const)('%s', (softeningKernel) => {
  const options: MeasureOptions = { ...COLUMN, softeningKernel };

  it('U and W of all and of the bound bodies, by direct sums', async () => {
    for (const unbound of [5, 300]) {
      const made = cool(900, 4);
      for (let i = 0; i < unbound; i++) made.vx[3 * i] += 60 * (i % 2 ? 1 : -1);
      const particles = withLengths(made, MIXED);
      const record = await measure(particles, options);
      const all = Array.from({ length: 900 }, (_, i) => i);
      const whole = plainOf(particles, softeningKernel, all);
      near(record.whole.potential, whole.potential, 1e-12);
      near(record.whole.clausius, whole.clausius, 1e-12);
      const slow = all.filter((i) => Math.abs(made.vx[i]) < 30);
      const bound = plainOf(particles, softeningKernel, slow);
      expect(record.bound.particles).toBe(slow.length);
      near(record.bound.potential, bound.potential, 1e-11);
      near(record.bound.clausius, bound.clausius, 1e-11);
      expect(codes(record)).toContain('softenedRatio');
    }
  });

  it('the same by the tree, with a third of the bodies removed one round and a few another', async () => {
    const made = cool(5000, 5);
    for (let i = 0; i < 5000; i++) made.vy[i] += i % 3 ? (i % 40 ? 0 : 3) : 60 * (i % 2 ? 1 : -1);
    const particles = withLengths(made, MIXED);
    const record = await measure(particles, { ...options, error: 1e-3 });
    expect(record.engine.origin).toBe('tree');
    const all = Array.from({ length: 5000 }, (_, i) => i);
    const whole = plainOf(particles, softeningKernel, all);
    const within = (value: number, plain: number, error: number) =>
      expect(Math.abs(value - plain)).toBeLessThan(PROMISED_SIGMAS * error);
    within(record.whole.potential, whole.potential, record.whole.potentialError);
    within(record.whole.clausius, whole.clausius, record.whole.clausiusError);
    const slow = all.filter((i) => Math.abs(made.vy[i]) < 2);
    expect(record.bound.particles).toBe(slow.length);
    const bound = plainOf(particles, softeningKernel, slow);
    // The error asked for, of the sum over all, over its two thirds.
    near(record.bound.potential, bound.potential, 1e-3);
    near(record.bound.clausius, bound.clausius, 3e-3);
  });

  it('equal lengths are one length', async () => {
    const made = makeModel({ model: 'plummer', count: 700, seed: 6 });
    const each = await measure(
      withLengths(made, () => 0.1),
      options,
    );
    const length = softeningKernel === 'plummer' ? 0.1 * Math.SQRT2 : 0.1;
    const one = await measure(made, { softening: length, softeningKernel });
    near(each.whole.potential, one.whole.potential, 1e-13);
    near(each.whole.clausius, one.whole.clausius, 1e-13);
    near(each.settings.softening.value.length, length, 1e-15);
    expect(codes(each).includes('softeningOfPairs')).toBe(softeningKernel === 'plummer');
    expect(codes(one)).not.toContain('softeningOfPairs');
  });

  it('hard pairs have the softening of their two bodies', async () => {
    const random = new Random(8);
    const bodies = cloud(200, 9).map(([, ...rest]): Body => [1 / 200, ...rest]);
    const [, x, y, z, u, v, w] = bodies[10];
    // Bound without softening, 0.02 apart, and by 0.3 or less with a length of 0.5.
    bodies.push([1 / 200, x + 0.002 * (1 + random.uniform()), y, z, u, v + 0.1, w]);
    const particles = particlesOf(bodies);
    const near10 = (i: number, length: number) => (i === 10 || i === 200 ? length : 0.05);
    const found = async (length: number) => {
      const lengths = withLengths(particles, (i) => near10(i, length));
      return measure(lengths, { ...options, with: ['pairs'] });
    };
    const hard = await found(0.001);
    expect(hard.hardestPairs?.first).toEqual([10]);
    expect(hard.hardestPairs?.second).toEqual([200]);
    expect((await found(0.5)).hardPairs).toBe(0);
    // −½ μ v² + m m′ f(r) by hand.
    const r = particles.x[200] - particles.x[10];
    const lengths = withLengths(particles, (i) => near10(i, 0.001)).columns.softening;
    const pair = softeningOfPair(
      { kernel: softeningKernel, length: 1, lengths: lengths as Float64Array },
      10,
      200,
    );
    const f = softeningKernel === 'plummer' ? 1 / Math.hypot(r, pair.length) : 1 / r;
    expect(2.8 * pair.length).toBeLessThan(r * 2);
    if (softeningKernel === 'plummer' || r > 2.8 * pair.length) {
      near(hard.hardestPairs?.energies[0] ?? NaN, f / 200 ** 2 - 0.25 * (1 / 200) * 0.01, 1e-9);
    }
    expect(hard.pairsMerged?.particles).toBe(200);
  });

  it('self terms in potentials of the file are those of each body', async () => {
    const made = makeModel({ model: 'plummer', count: 300, seed: 10 });
    const particles = withLengths(made, (i) => [0.3, 0.05][i % 2]);
    const all = Array.from({ length: 300 }, (_, i) => i);
    const plain = plainOf(particles, softeningKernel, all);
    const { softening: lengths } = particles.columns;
    // A loop over all j, i itself among them.
    const potential = plain.phi.map((phi, i) => {
      const e = lengths?.[i] ?? NaN;
      const self = softeningKernel === 'plummer' ? Math.hypot(e, e) : e;
      return phi - particles.mass[i] / self;
    });
    const file = { ...particles, columns: { ...particles.columns, potential } };
    const record = await measure(file, { ...options, forces: 'file' });
    expect(codes(record)).toContain('potentialSelfTerm');
    near(record.whole.potential, plain.potential, 1e-10);
  });
});

describe('the setting', () => {
  const particles = particlesOf(cloud(40, 1));

  it('says whose lengths they are', async () => {
    const { settings } = await measure(
      withLengths(particles, (i) => (i % 2 ? 0.1 : 0.3)),
      { ...COLUMN, softeningKernel: 'spline' },
    );
    expect(settings.softening.from).toBe('option');
    const { value } = settings.softening;
    expect(value.ofBodies).toEqual({ least: 0.1, greatest: 0.3 });
    expect(value.kernel).toBe('spline');
    expect(value.support).toBeCloseTo(2.8 * 0.3, 14);
    expect(value.length).toBeGreaterThan(0.1);
    expect(value.length).toBeLessThan(0.3);
  });

  it('lengths all 0 are no softening, and bodies at one point are left out', async () => {
    const bodies = cloud(40, 2);
    bodies[7] = [...bodies[7]];
    bodies.push([...bodies[7]], [...bodies[8]]);
    const lengths = withLengths(particlesOf(bodies), (i) => (i === 41 ? 0.1 : 0));
    const record = await measure(lengths, COLUMN);
    const text = record.remarks.find(({ code }) => code === 'coincidentBodies')?.text;
    expect(text).toContain('1 pair of bodies');
    expect(text).toContain('index 7 and 40');
    const none = withLengths(particles, () => 0);
    const zero = await measure(none, COLUMN);
    near(zero.whole.potential, (await measure(particles)).whole.potential, 1e-13);
    near(zero.whole.clausius, zero.whole.potential, 1e-13);
  });

  it('lengths of extreme sizes leave a sound record or are refused', async () => {
    for (const length of [1e-300, 1e-160, 1e140]) {
      const lengths = withLengths(particles, (i) => (i % 2 ? length : 0.1));
      const { whole, settings } = await measure(lengths, COLUMN);
      expect(Number.isFinite(settings.softening.value.length)).toBe(true);
      const plain = plainOf(
        lengths,
        'plummer',
        Array.from({ length: 40 }, (_, i) => i),
      );
      near(whole.potential, plain.potential, 1e-12);
    }
  });

  it('asks for the column where there is none', async () => {
    await expect(measure(particles, COLUMN)).rejects.toMatchObject({
      code: 'input.missingSoftening',
      message: expect.stringContaining('made.bin') as string,
      remedy: expect.stringContaining('--columns softening=NAME') as string,
    });
    const none = await measure(particles, { ...COLUMN, softeningKernel: 'none' });
    expect(none.settings.softening.value).toEqual({ length: 0, support: 0, kernel: 'none' });
  });

  it('a merged pair has the mean of its squares by mass', () => {
    const lengths = Float64Array.of(1, 0.3, 0.4, 2);
    const pairs = [{ first: 1, second: 2 }];
    const softening: Softening = { kernel: 'plummer', length: 1, lengths };
    const merged = mergedSoftening(pairs, Float64Array.of(1, 3, 1, 1), softening);
    const middle = Math.sqrt((3 * 0.09 + 0.16) / 4);
    Array.from(merged.lengths ?? []).forEach((length, k) =>
      expect(length).toBeCloseTo([1, middle, 2][k], 15),
    );
  });
});
