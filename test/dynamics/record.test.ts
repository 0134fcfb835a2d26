/** Records of input at the edge: every figure finite or null with a reason, nothing silent. */
import { describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { EXTRA_NAMES } from '../../src/dynamics/extras.ts';
import { findQuantity, QUANTITIES } from '../../src/dynamics/registry.ts';
import { makeModel } from '../../src/models/make.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { bodiesOf, cloud, measure, particlesOf, type Body } from './samples.ts';

/** Paths of all numbers in a value, and of what is no JSON number. */
function leaves(value: unknown, path = ''): [string, unknown][] {
  if (value === null || typeof value !== 'object') return [[path, value]];
  return Object.entries(value).flatMap(([key, inner]) =>
    leaves(inner, path ? `${path}.${key}` : key),
  );
}

/** Every number finite, every remark complete, T and masses not negative, the order of radii kept. */
function expectSound(record: MeasureRecord): void {
  for (const [path, value] of leaves(record)) {
    if (typeof value === 'number') expect(Number.isFinite(value), `${path} is ${value}`).toBe(true);
    expect(value, path).not.toBeUndefined();
  }
  for (const { code, text, remedy } of record.remarks) {
    expect(code).toMatch(/^[a-z][A-Za-z0-9]+$/);
    expect(text, code).not.toMatch(/NaN|Infinity|undefined|null/);
    expect(text, code).toMatch(/\.$/);
    expect(remedy, code).toMatch(/\.$/);
  }
  for (const set of [record.whole, record.bound]) {
    expect(set.kinetic).toBeGreaterThanOrEqual(0);
    expect(set.potential).toBeLessThanOrEqual(0);
    expect(set.energy).toBe(set.kinetic + set.potential);
    if (set.virialRatio === null) expect(set.potential).toBeCloseTo(0, 300);
    else expect(set.virialRatio).toBeCloseTo((2 * set.kinetic) / -set.potential, 12);
  }
  for (const { radii } of [record.lagrangian, record.boundLagrangian]) {
    const known = radii.filter((r) => r !== null);
    expect([...known].sort((a, b) => a - b)).toEqual(known);
  }
  // A figure that cannot be had is null, and a remark says why.
  if (record.whole.virialRatio === null) expect(codes(record)).toContain('noRatio');
  if (record.coreRadius === null && record.settings.centre.value === 'density') {
    expect(codes(record)).toContain('centreFallback');
  }
  if (record.relaxation.time === null) expect(codes(record)).toContain('noRelaxationTime');
}

const codes = (record: MeasureRecord) => record.remarks.map(({ code }) => code);
const sound = async (
  particles: Particles,
  options: Parameters<typeof measure>[1] = {},
): Promise<MeasureRecord> => {
  const record = await measure(particles, { with: ['all'], ...options });
  expectSound(record);
  return record;
};
const changedBodies = (p: Particles, change: (body: number[], i: number) => void): Particles =>
  particlesOf(
    bodiesOf(p).map((body, i) => {
      const copy = [...body];
      change(copy, i);
      return copy as unknown as Body;
    }),
  );

describe('the registry and a record', () => {
  const OUTSIDE =
    /^(record|file|runFile|time|selection|settings|engine|remarks|frame\.centreMethod|(shells|profiles)\.set)(\.|$)/;

  /** All extras, of a sphere in which two bodies are a hard pair. */
  async function fullRecord(): Promise<MeasureRecord> {
    const bodies = bodiesOf(makeModel({ model: 'plummer', count: 500, seed: 1 }));
    const [m, x, ...rest] = bodies[0];
    bodies[1] = [m, x + 1e-3, ...rest] as unknown as Body;
    const id = Uint32Array.from(bodies, (_, i) => i);
    return measure(particlesOf(bodies, { columns: { id } }), { with: ['all'] });
  }

  it('have the same figures', async () => {
    const record = await fullRecord();
    const inRecord = new Set(
      leaves(record)
        .map(([path]) => path.replace(/\.\d+$/, ''))
        .filter((path) => !OUTSIDE.test(path)),
    );
    expect([...inRecord].sort()).toEqual(QUANTITIES.map(({ key }) => key).sort());
  });

  it('agree on kinds, errors and names', async () => {
    const record = await fullRecord();
    const keys = new Set(QUANTITIES.map(({ key }) => key));
    expect(keys.size).toBe(QUANTITIES.length);
    for (const { key, kind, error, text, source, extra } of QUANTITIES) {
      const value = key
        .split('.')
        .reduce<unknown>((o, k) => (o as Record<string, unknown>)[k], record);
      if (kind === 'number') expect(typeof value, key).toBe('number');
      if (kind === 'integer') expect(Number.isInteger(value), key).toBe(true);
      if (kind === 'vector') expect((value as number[]).length, key).toBe(3);
      if (kind === 'list') expect(Array.isArray(value), key).toBe(true);
      if (kind === 'integers') expect((value as unknown[]).every(Number.isInteger), key).toBe(true);
      if (kind === 'ids') expect(value, key).toHaveLength(1);
      if (extra !== null) expect(EXTRA_NAMES).toContain(extra);
      if (error !== null) expect(keys, key).toContain(error);
      expect(text.length * source.length).toBeGreaterThan(0);
    }
    expect(findQuantity('virialRatio')?.key).toBe('whole.virialRatio');
    expect(findQuantity('bound.virialRatio')?.key).toBe('bound.virialRatio');
    expect(findQuantity('noSuchThing')).toBeUndefined();
  });
});

describe('few bodies', () => {
  it('one: no ratio, no radius, and reasons', async () => {
    const record = await sound(particlesOf([[2, 1, 2, 3, 4, 5, 6]]));
    expect(record.whole.virialRatio).toBeNull();
    expect(record.whole.clausiusRatio).toBeNull();
    expect(record.virialRadius).toBeNull();
    expect(record.crossingTime).toBeNull();
    expect(record.whole.kinetic).toBe(0);
    expect(record.frame.centre).toEqual([1, 2, 3]);
    const remark = record.remarks.find(({ code }) => code === 'noRatio');
    expect(remark?.text).toMatch(/only one body/);
  });

  it('one in single precision', async () => {
    const origin = { file: 'one', format: 'made', mantissaBits: 24, remarks: [] } as const;
    await sound(particlesOf([[2, 1, 2, 3, 4, 5, 6]], { origin }));
  });

  it.each([2, 3, 4, 5, 6, 7, 8, 9, 20])('%i', async (count) => {
    for (const options of [
      {},
      { softening: 0.1 },
      { softening: 0.1, softeningKernel: 'spline' as const },
    ]) {
      const record = await sound(particlesOf(cloud(count, count)), options);
      expect(record.whole.particles).toBe(count);
      expect(record.engine.origin).toBe('direct');
    }
  });

  it.each(['density', 'shrinking', 'mass', 'potential'] as const)(
    'any centre: %s',
    async (centre) => {
      for (const count of [1, 2, 5, 60]) await sound(particlesOf(cloud(count, 7)), { centre });
    },
  );
});

describe('odd snapshots', () => {
  it('nothing moves', async () => {
    const record = await sound(particlesOf(cloud(100, 1, 0)));
    expect(record.whole.virialRatio).toBe(0);
    expect(record.whole.noise).toBeNull();
    expect(record.bound).toEqual(record.whole);
    expect(codes(record)).toContain('cold');
  });

  it('all move together', async () => {
    const bodies = cloud(100, 1, 0).map(([m, x, y, z]): Body => [m, x, y, z, 7, 7, 7]);
    const record = await sound(particlesOf(bodies));
    // (7 − 7 to rounding)² of 1e-31.
    expect(record.whole.virialRatio).toBeLessThan(1e-28);
  });

  it('tracers, one body with mass, and none of two', async () => {
    const one = cloud(50, 2).map(([, ...rest], i): Body => [i === 3 ? 1 : 0, ...rest]);
    const record = await sound(particlesOf(one));
    expect(record.whole.virialRatio).toBeNull();
    expect(codes(record)).toEqual(expect.arrayContaining(['noRatio', 'tracers']));
    const half = cloud(60, 3).map(([m, ...rest], i): Body => [i % 2 ? m : 0, ...rest]);
    await sound(particlesOf(half));
  });

  it('two at one point are left out and named, or refused', async () => {
    const bodies = cloud(30, 4);
    bodies[20] = [bodies[20][0], bodies[5][1], bodies[5][2], bodies[5][3], 0, 0, 0];
    const particles = particlesOf(bodies, {
      origin: { file: 'pair.bin', format: 'made', mantissaBits: 53, remarks: [] },
    });
    const record = await sound(particles);
    const remark = record.remarks.find(({ code }) => code === 'coincidentBodies');
    expect(remark?.text).toMatch(/1 pair .*5 and 20/);
    await expect(measure(particles, { coincident: 'refuse' })).rejects.toMatchObject({
      code: 'input.coincident',
      message: expect.stringMatching(/pair\.bin.*5 and 20/) as string,
      remedy: expect.stringMatching(/softening/) as string,
    });
    // Softened they are a pair like any other.
    const softened = await sound(particles, { softening: 0.1, coincident: 'refuse' });
    expect(codes(softened)).not.toContain('coincidentBodies');
  });

  it('many at one point', async () => {
    const bodies = cloud(5000, 5).map(([m, ...rest], i): Body =>
      i % 2 ? [m, 0.1, 0.2, 0.3, rest[3], rest[4], rest[5]] : [m, ...rest],
    );
    const record = await sound(particlesOf(bodies), { exact: true });
    const remark = record.remarks.find(({ code }) => code === 'coincidentBodies');
    expect(remark?.text).toContain(String((2500 * 2499) / 2));
    await sound(particlesOf(bodies), { softening: 0.2 });
  });

  it('all but one at one point', async () => {
    const bodies = cloud(100, 6).map(([m, x, y, z, ...v], i): Body =>
      i === 50 ? [m, x, y, z, ...v] : [m, 1, 1, 1, ...v],
    );
    await sound(particlesOf(bodies));
    await sound(particlesOf(bodies), { centre: 'shrinking' });
  });

  it('masses over 12 decades', async () => {
    const bodies = cloud(3000, 7).map(([, ...rest], i): Body => [10 ** ((i % 13) - 6), ...rest]);
    const record = await sound(particlesOf(bodies));
    expect(record.effectiveNumber).toBeLessThan(300);
    expect(codes(record)).toContain('wideMassSpectrum');
  });

  it('one heavy body', async () => {
    const bodies = cloud(200, 8).map(([m, ...rest], i): Body => [i ? m * 1e-6 : 1, ...rest]);
    expect(codes(await sound(particlesOf(bodies)))).toContain('dominantBody');
  });

  it('one body at 1e12 changes next to nothing of the rest', async () => {
    const sphere = makeModel({ model: 'plummer', count: 6000, seed: 9 });
    const far = changedBodies(sphere, (body, i) => {
      if (i === 17) body[1] = 1e12;
    });
    const [one, two] = [await sound(sphere), await sound(far)];
    expect(
      Math.abs((two.whole.virialRatio ?? NaN) / (one.whole.virialRatio ?? NaN) - 1),
    ).toBeLessThan(1e-3);
    expect(Math.abs(two.halfMassRadius / one.halfMassRadius - 1)).toBeLessThan(1e-2);
    expect(Math.abs((two.coreRadius ?? NaN) / (one.coreRadius ?? NaN) - 1)).toBeLessThan(1e-2);
    expect(two.bound.particles).toBeGreaterThan(one.bound.particles - 10);
  });

  it('a system at 1e8 that moves at 1e4', async () => {
    const sphere = makeModel({ model: 'plummer', count: 3000, seed: 10 });
    const far = changedBodies(sphere, (body) => {
      body[1] += 1e8;
      body[5] -= 1e4;
    });
    const [one, two] = [await sound(sphere), await sound(far)];
    // Positions are rounded to 1.5e-8, velocities to 2e-12.
    const near = (a: number | null, b: number | null, relative: number) =>
      expect(Math.abs((a ?? NaN) / (b ?? NaN) - 1)).toBeLessThan(relative);
    near(two.whole.virialRatio, one.whole.virialRatio, 1e-8);
    near(two.whole.noise, one.whole.noise, 1e-7);
    near(two.halfMassRadius, one.halfMassRadius, 1e-6);
    near(two.coreRadius, one.coreRadius, 1e-5);
    near(two.momentOfInertia, one.momentOfInertia, 1e-7);
    expect(two.bound.particles).toBe(one.bound.particles);
    expect(codes(two)).toContain('bulkMotion');
  });

  it('the same far system in single precision says what is lost', async () => {
    const far = changedBodies(makeModel({ model: 'plummer', count: 2000, seed: 11 }), (body) => {
      for (let k = 0; k < 7; k++) body[k] = Math.fround(body[k] + (k === 1 ? 1e5 : 0));
    });
    const origin = { file: 'single.bin', format: 'made', mantissaBits: 24, remarks: [] } as const;
    const record = await sound({ ...far, origin });
    expect(codes(record)).toContain('float32Limits');
    const near = await sound({ ...makeModel({ model: 'plummer', count: 500, seed: 1 }), origin });
    expect(codes(near)).not.toContain('float32Limits');
  });

  it('ids that occur twice', async () => {
    const id = Int32Array.from({ length: 50 }, (_, i) => (i === 44 ? 7 : i));
    const record = await sound(particlesOf(cloud(50, 12), { columns: { id } }));
    const remark = record.remarks.find(({ code }) => code === 'duplicateIds');
    expect(remark?.text).toMatch(/1 body .*index 44 \(id 7\)/);
    const wide = BigInt64Array.from({ length: 50 }, (_, i) => 2n ** 60n + BigInt(i % 49));
    const other = await sound(particlesOf(cloud(50, 12), { columns: { id: wide } }));
    expect(other.remarks.find(({ code }) => code === 'duplicateIds')?.text).toContain(
      'index 49 (id 1152921504606846976)',
    );
  });

  it('a large softening, and wrong units', async () => {
    const soft = await sound(particlesOf(cloud(500, 13)), { softening: 100 });
    expect(codes(soft)).toEqual(expect.arrayContaining(['softeningLarge', 'softenedRatio']));
    const model = makeModel({ model: 'plummer', count: 500, seed: 14 });
    const wrong = await sound(model, { gravity: 4.300917270036e-6 });
    const remark = wrong.remarks.find(({ code }) => code === 'unitsUnlikely');
    expect(remark?.text).toMatch(/would be 1 with G = (0\.8|0\.9|1).*natural/);
  });

  it('an error that cannot be had, and relaxation that softening ends', async () => {
    const direct = await sound(particlesOf(cloud(500, 16)), { error: 1e-15 });
    const remark = direct.remarks.find(({ code }) => code === 'errorNotReached');
    expect(remark?.text).toContain('1e-15');
    expect(remark?.remedy).not.toContain('--exact'); // it was exact
    const few = await sound(particlesOf(cloud(9, 17)));
    const why = (record: MeasureRecord) =>
      record.remarks.find(({ code }) => code === 'noRelaxationTime')?.text;
    expect(why(few)).toContain('N = 9');
    expect(why(await sound(particlesOf(cloud(500, 17))))).toBeUndefined();
    expect(why(await sound(particlesOf(cloud(500, 17)), { softening: 5 }))).toContain('softening');
  });

  it('magnitudes near the ends of what is read', async () => {
    // Sums, squares and products of finite numbers either stay finite, or the snapshot is refused.
    const scales: [number, number, number][] = [
      [1e100, 1e150, 1e20],
      [1e-200, 1, 1],
      [1e140, 1e140, 1e140],
      [1, 1e-150, 1],
      [1, 1, 1e150],
      [1e-150, 1e150, 1e-150],
    ];
    for (const [m, x, v] of scales) {
      const bodies = cloud(40, 15).map(([a, ...b]): Body => {
        const [p, q, r, s, t, u] = b;
        return [a * m, p * x, q * x, r * x, s * v, t * v, u * v];
      });
      const outcome = await measure(particlesOf(bodies)).catch((error: unknown) => error);
      if (outcome instanceof Error) expect(outcome).toMatchObject({ code: 'input.overflow' });
      else expectSound(outcome as MeasureRecord);
    }
  });
});

describe('settings', () => {
  const cluster = particlesOf(cloud(30, 1));
  it.each([
    [{ units: 'furlong' }, 'usage.units', 'furlong'],
    [{ gravity: 0 }, 'usage.range', '--gravity 0'],
    [{ gravity: NaN }, 'usage.range', 'NaN'],
    [{ units: 'kpc-kms-msun', gravity: 1 }, 'usage.gravityClash', 'kpc-kms-msun'],
    [{ units: { length: 1, mass: 1, velocity: 1 }, gravity: 1 }, 'usage.gravityClash', 'your own'],
    [{ units: { length: 1, mass: 'x', velocity: 1 } }, 'usage.units', 'units.mass'],
    [{ softening: -1 }, 'usage.softening', '-1'],
    [{ softening: Infinity }, 'usage.softening', 'Infinity'],
    [{ softeningKernel: 'spline' as const }, 'usage.softeningKernel', 'spline'],
    [{ fractions: [0.5, 1] }, 'usage.fractions', '1'],
    [{ error: 0 }, 'usage.range', '--error 0'],
    [{ coulombFactor: -0.1 }, 'usage.range', '--coulomb-factor -0.1'],
  ])('%j is a usage error', async (options, code, found) => {
    await expect(measure(cluster, options)).rejects.toMatchObject({
      code,
      message: expect.stringContaining(found) as string,
      remedy: expect.stringMatching(/./) as string,
    });
  });

  it('come from option, snapshot or default, and say so', async () => {
    const plain = (await measure(cluster)).settings;
    expect(plain.gravity).toEqual({ value: 1, from: 'default' });
    expect(plain.softening.value).toEqual({ length: 0, support: 0, kernel: 'none' });
    const file = particlesOf(cloud(30, 1), { gravity: 2, softening: 0.1 });
    const stated = (await measure(file)).settings;
    expect(stated.gravity).toEqual({ value: 2, from: 'snapshot' });
    expect(stated.softening).toEqual({
      value: { length: 0.1, support: null, kernel: 'plummer' },
      from: 'snapshot',
    });
    const given = (await measure(file, { gravity: 3, softening: 0.2, softeningKernel: 'spline' }))
      .settings;
    expect(given.gravity).toEqual({ value: 3, from: 'option' });
    expect(given.softening.value.support).toBeCloseTo(0.56, 14);
    expect((await measure(file, { softening: 0 })).settings.softening.value.kernel).toBe('none');
    const fractions = (await measure(cluster, { fractions: [0.3] })).settings.fractions;
    expect(fractions).toEqual({ value: [0.1, 0.3, 0.5], from: 'option' });
  });
});
