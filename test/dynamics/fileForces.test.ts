/** U and W from the columns of the file, against plain sums of what the columns hold. */
import { describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import type { MeasureOptions } from '../../src/dynamics/settings.ts';
import { makeModel } from '../../src/models/make.ts';
import { Random } from '../../src/numerics/random.ts';
import { NO_SOFTENING, type Softening } from '../../src/octree/softening.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { UNIT_SYSTEMS } from '../../src/snapshot/units.ts';
import { changedVectors, withColumns, writtenForces } from './fileColumns.ts';
import { bodiesOf, cloud, measure, particlesOf, plainBalance } from './samples.ts';

const KERNELS: Softening[] = [
  NO_SOFTENING,
  { kernel: 'plummer', length: 0.1 },
  { kernel: 'spline', length: 0.1 },
];
const optionsOf = ({ kernel, length }: Softening): MeasureOptions =>
  kernel === 'none' ? {} : { softening: length, softeningKernel: kernel };
const fromFile = (particles: Particles, options: MeasureOptions = {}) =>
  measure(particles, { ...options, forces: 'file' });
const near = (value: number, expected: number, relative: number) =>
  expect(Math.abs(value / expected - 1), `${value} against ${expected}`).toBeLessThan(relative);
const codes = (record: MeasureRecord) => record.remarks.map(({ code }) => code);
const remark = (record: MeasureRecord, code: string) =>
  record.remarks.find((one) => one.code === code);
/** Codes of what can be wrong with columns. */
const OF_COLUMNS = /^(forces|potential|acceleration)/;
const ofColumns = (record: MeasureRecord) => codes(record).filter((code) => OF_COLUMNS.test(code));
const refusal = async (particles: Particles, options: MeasureOptions = {}) =>
  fromFile(particles, options).then(
    () => null,
    (error: { code: string; message: string; remedy: string }) => error,
  );

const bodies = particlesOf(cloud(400, 1));

describe.each(KERNELS)('softening $kernel', (softening) => {
  const options = optionsOf(softening);
  const written = writtenForces(bodies, softening);
  const plain = plainBalance(bodiesOf(bodies), softening);

  it('columns that are right give the balance of plain sums, and no remark', async () => {
    const record = await fromFile(withColumns(bodies, written), options);
    near(record.whole.potential, plain.potential, 1e-12);
    near(record.whole.clausius, plain.clausius, 1e-12);
    near(record.whole.kinetic, plain.kinetic, 1e-12);
    expect(record.engine.origin).toBe('file');
    expect(record.engine.errorMeasured).toBeLessThan(1e-11);
    expect(record.settings.forces).toEqual({ value: 'file', from: 'option' });
    expect(ofColumns(record)).toEqual([]);
  });

  it('U and W are those of the columns, not ours, and the difference is the error', async () => {
    const random = new Random(2);
    const potential = written.potential.map((phi) => phi * (1.004 + 0.002 * random.normal()));
    const acceleration = changedVectors(written.acceleration, (a) => 0.997 * a + 0.001);
    const far = particlesOf(bodiesOf(bodies).map(([m, x, ...rest]) => [m, x + 50, ...rest]));
    const record = await fromFile(withColumns(far, { potential, acceleration }), options);
    let [u, w] = [0, 0];
    const { mass, x, y, z } = far;
    mass.forEach((m, i) => {
      u += 0.5 * m * potential[i];
      // About the centre of mass, since these accelerations add up to a net force.
      w += m * (x[i] - plain.centre[0] - 50) * acceleration.x[i];
      w += m * (y[i] - plain.centre[1]) * acceleration.y[i];
      w += m * (z[i] - plain.centre[2]) * acceleration.z[i];
    });
    near(record.whole.potential, u, 1e-12);
    near(record.whole.clausius, w, 1e-11);
    near(record.whole.potentialError, Math.abs(u - plain.potential), 1e-6);
    near(record.whole.clausiusError, Math.abs(w - plain.clausius), 1e-6);
    expect(ofColumns(record)).toEqual([]);
  });

  it('signs, self terms and another G are recognised, alone and together', async () => {
    const centre = softening.kernel === 'none' ? 0 : 1 / softening.length;
    for (const sign of [1, -1]) {
      for (const self of centre > 0 ? [0, 1] : [0]) {
        for (const g of [1, 3.7]) {
          const potential = written.potential.map(
            (phi, i) => sign * g * (phi - self * bodies.mass[i] * centre),
          );
          const acceleration = changedVectors(written.acceleration, (a) => sign * g * a);
          const record = await fromFile(withColumns(bodies, { potential, acceleration }), options);
          near(record.whole.potential, g * plain.potential, 1e-10);
          near(record.whole.clausius, g * plain.clausius, 1e-10);
          expect(new Set(ofColumns(record))).toEqual(
            new Set([
              ...(g === 1 ? [] : ['forcesGravity']),
              ...(sign === 1 ? [] : ['potentialSign', 'accelerationSign']),
              ...(self === 0 ? [] : ['potentialSelfTerm']),
            ]),
          );
          if (g !== 1) expect(remark(record, 'forcesGravity')?.text).toContain('G = 3.7');
        }
      }
    }
  });

  it('self terms are told from none in columns of the accuracy of a tree code', async () => {
    if (softening.kernel === 'none') return;
    const random = new Random(3);
    for (const self of [0, 1]) {
      const potential = written.potential.map(
        (phi, i) => phi * (1 + 1e-3 * random.normal()) - (self * bodies.mass[i]) / softening.length,
      );
      const record = await fromFile(withColumns(bodies, { ...written, potential }), options);
      near(record.whole.potential, plain.potential, 5e-4);
      expect(ofColumns(record)).toEqual(self ? ['potentialSelfTerm'] : []);
    }
  });

  it('one wrong body changes its own share and no finding', async () => {
    const potential = written.potential.slice();
    potential[7] = -1e9;
    const acceleration = changedVectors(written.acceleration, (a, i) => (i === 9 ? 1e9 : a));
    const record = await fromFile(withColumns(bodies, { potential, acceleration }), options);
    expect(ofColumns(record)).toEqual([]);
    // The error says that something is wrong with this U.
    expect(record.engine.errorMeasured).toBeGreaterThan(1);
  });

  it('the bound set loses the field of the bodies that are not bound', async () => {
    const fast = particlesOf(
      bodiesOf(bodies).map(([m, x, y, z, u, v, w], i) => [m, x, y, z, u + (i % 50 ? 0 : 90), v, w]),
    );
    for (const columns of [written, { potential: written.potential }]) {
      const record = await fromFile(withColumns(fast, columns), options);
      const own = await measure(fast, options);
      expect(record.bound.particles).toBe(own.bound.particles);
      expect(record.bound.particles).toBeLessThan(fast.count);
      near(record.bound.potential, own.bound.potential, 1e-11);
      near(record.bound.clausius, own.bound.clausius, 1e-11);
    }
  });
});

describe('a part of the columns', () => {
  const softening: Softening = { kernel: 'plummer', length: 0.1 };
  const plain = plainBalance(bodiesOf(bodies), softening);

  it('potentials alone: W is U, or our own where forces are softened', async () => {
    const bare = writtenForces(bodies, NO_SOFTENING, 1.001);
    const record = await fromFile(withColumns(bodies, { potential: bare.potential }));
    expect(record.whole.clausius).toBe(record.whole.potential);
    expect(ofColumns(record)).toEqual([]);
    const { potential } = writtenForces(bodies, softening, 1.001);
    const softened = await fromFile(withColumns(bodies, { potential }), optionsOf(softening));
    near(softened.whole.potential, 1.001 * plain.potential, 1e-12);
    near(softened.whole.clausius, plain.clausius, 1e-12);
    expect(ofColumns(softened)).toEqual(['forcesPartly']);
  });

  it('accelerations alone: U is our own', async () => {
    const { acceleration } = writtenForces(bodies, softening, 1.001);
    const record = await fromFile(withColumns(bodies, { acceleration }), optionsOf(softening));
    near(record.whole.potential, plain.potential, 1e-12);
    near(record.whole.clausius, 1.001 * plain.clausius, 1e-12);
    expect(ofColumns(record)).toEqual(['forcesPartly']);
  });

  it('none is an error that names the option', async () => {
    expect(await refusal(bodies)).toMatchObject({
      code: 'input.missingForces',
      message: expect.stringMatching(/^made\.bin: .*potential or acceleration/) as string,
      remedy: expect.stringContaining('--columns potential=NAME') as string,
    });
  });
});

describe('columns that are something else', () => {
  const written = writtenForces(bodies, NO_SOFTENING);

  it('are refused', async () => {
    const random = new Random(5);
    const noise = () => Float64Array.from(bodies.mass, () => random.normal());
    const potential = noise();
    expect(await refusal(withColumns(bodies, { potential }))).toMatchObject({
      code: 'input.fileForces',
      message: expect.stringContaining('potential') as string,
    });
    const acceleration = { x: noise(), y: noise(), z: noise() };
    expect(await refusal(withColumns(bodies, { ...written, acceleration }))).toMatchObject({
      code: 'input.fileForces',
      message: expect.stringContaining('acceleration') as string,
    });
    const constant = Float64Array.from(bodies.mass, () => -1);
    expect(await refusal(withColumns(bodies, { potential: constant }))).toMatchObject({
      code: 'input.fileForces',
    });
  });

  it('potentials that vanish elsewhere are refused; a softening that explains it is named', async () => {
    const shifted = written.potential.map((phi) => phi + 30);
    expect(await refusal(withColumns(bodies, { potential: shifted }))).toMatchObject({
      code: 'input.fileForces',
      message: expect.stringContaining('constant') as string,
    });
    // Equal masses whose potentials hold self terms at a length of 0.02, and a user who does not say so:
    // that short a softening changes the pairs by less than the constant.
    const equal = makeModel({ model: 'plummer', count: 500, seed: 3 });
    const soft: Softening = { kernel: 'plummer', length: 0.02 };
    const own = writtenForces(equal, soft);
    const potential = own.potential.map((phi) => phi - 1 / 500 / 0.02);
    const error = await refusal(withColumns(equal, { potential }));
    expect(error).toMatchObject({ code: 'input.fileForces' });
    const length = Number(/softening length of ([0-9.]+)/.exec(error?.remedy ?? '')?.[1]);
    expect(length).toBeGreaterThan(0.017);
    expect(length).toBeLessThan(0.023);
    const record = await fromFile(withColumns(equal, { potential }), { softening: 0.02 });
    expect(ofColumns(record)).toContain('potentialSelfTerm');
  });

  it('of a much softer kernel than stated are told', async () => {
    const soft = writtenForces(bodies, { kernel: 'plummer', length: 0.5 });
    const record = await fromFile(withColumns(bodies, { acceleration: soft.acceleration }));
    expect(ofColumns(record)).toContain('forcesDiffer');
  });
});

describe('another G or unit', () => {
  const G = UNIT_SYSTEMS['pc-kms-msun'].gravity;
  const cluster = makeModel({ model: 'plummer', count: 500, seed: 4, mass: 1000, gravity: G });
  const bare = { ...cluster, gravity: null };

  it('is named with the unit system it belongs to', async () => {
    const written = writtenForces(cluster, NO_SOFTENING, G);
    const record = await fromFile(withColumns(bare, written));
    expect(remark(record, 'forcesGravity')).toMatchObject({
      text: expect.stringMatching(/G = 0\.00430092, that of the unit system pc-kms-msun/) as string,
      remedy: expect.stringContaining('--units pc-kms-msun') as string,
    });
    // T and U are both in the units of the file, whatever G was stated.
    near(record.whole.virialRatio ?? 0, (await measure(cluster)).whole.virialRatio ?? 0, 1e-9);
    const stated = await fromFile(withColumns(bare, written), { units: 'pc-kms-msun' });
    expect(ofColumns(stated)).toEqual([]);
  });

  it('of accelerations alone is a unit of acceleration', async () => {
    const written = writtenForces(cluster, NO_SOFTENING, G);
    // 1 (km/s)²/pc in pc/Myr². Source: 1 km/s = 1.022712165046 pc/Myr (IAU 2015 B3).
    const factor = 1.022712165046 ** 2;
    const acceleration = changedVectors(written.acceleration, (a) => factor * a);
    const record = await fromFile(withColumns(cluster, { ...written, acceleration }));
    const text = remark(record, 'forcesGravity')?.text;
    expect(text).toContain('1.04594 times');
    expect(text).toContain('pc/Myr² against (km/s)²/pc');
  });
});

it('single precision and a tree: 20,000 bodies whose columns are right to 1e-7', async () => {
  const sphere = makeModel({ model: 'plummer', count: 20_000, seed: 6 });
  const { sumForces } = await import('../../src/octree/forces.ts');
  const softening: Softening = { kernel: 'spline', length: 0.05 };
  const exact = await sumForces(sphere, {
    gravity: 1,
    softening,
    errorWanted: 1,
    exact: true,
    accelerations: true,
  });
  const self = 1 / 20_000 / 0.05;
  const potential = Float32Array.from(exact.potential, (phi) => phi - self);
  const acceleration = exact.acceleration ?? undefined;
  const particles = { ...sphere, columns: { potential, ...(acceleration && { acceleration }) } };
  const record = await fromFile(particles, optionsOf(softening));
  expect(ofColumns(record)).toEqual(['potentialSelfTerm']);
  near(record.whole.potential, exact.potentialEnergy, 1e-7);
  near(record.whole.clausius, exact.clausius, 1e-12);
  // Our own tree is off by about what was asked for, 1e-5.
  expect(record.engine.errorMeasured).toBeLessThan(1e-4);
});

it('bodies too few to tell a constant, and one alone', async () => {
  for (const count of [2, 3, 4, 5, 6, 9]) {
    const few = particlesOf(cloud(count, count));
    const record = await fromFile(withColumns(few, writtenForces(few, NO_SOFTENING)));
    near(record.whole.potential, plainBalance(bodiesOf(few), NO_SOFTENING).potential, 1e-11);
    expect(ofColumns(record)).toEqual([]);
  }
  const one = particlesOf([[1, 0, 0, 0, 0, 0, 0]]);
  const potential = Float64Array.of(-3);
  const record = await fromFile(withColumns(one, { potential }), { softening: 0.1 });
  expect(record.whole.potential).toBe(0);
  expect(codes(record)).toContain('forcesPartly');
});
