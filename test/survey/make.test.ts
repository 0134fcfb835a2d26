import { describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { measureParticles } from '../../src/dynamics/measure.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { makeSnapshot, type MakeSnapshotOptions } from '../../src/survey/make.ts';

const VELOCITIES = ['vx', 'vy', 'vz'] as const;
const COLUMNS = ['mass', 'x', 'y', 'z', ...VELOCITIES] as const;

const make = (options: Partial<MakeSnapshotOptions>) =>
  makeSnapshot({ model: 'plummer', count: 500, seed: 3, ...options }, crewOfOne());

describe('a snapshot scaled to a virial ratio', () => {
  it.each([
    [0.5, 0, undefined],
    [1, 0.1, 'plummer'],
    [1.3, 0.2, 'spline'],
    [0, 0.1, 'plummer'],
  ] as const)('has 2T/|W| = %d with softening %d %s', async (ratio, softening, kernel) => {
    const stated = { softening, ...(kernel && { softeningKernel: kernel }) };
    const particles = await make({ virialRatio: ratio, ...stated });
    const record = await measureParticles(particles, stated, crewOfOne());
    // Direct sums on both sides; 500 bodies of double precision leave some 1e-14.
    expect(record.whole.clausiusRatio).toBeCloseTo(ratio, 12);
  });

  it('is scaled about its own mean velocity, and moved afterwards', async () => {
    const offset = [100, -50, 3] as const;
    const velocity = [7, 0, -2] as const;
    const particles = await make({ virialRatio: 1, offset, velocity });
    const record = await measureParticles(particles, {}, crewOfOne());
    expect(record.whole.virialRatio).toBeCloseTo(1, 11); // 12 digits, less two by the offset of 100.
    record.frame.centreOfMass.forEach((x, i) => expect(x).toBeCloseTo(offset[i], 12));
    record.frame.meanVelocity.forEach((v, i) => expect(v).toBeCloseTo(velocity[i], 12));
  });

  it('is left as drawn without a ratio', async () => {
    const record = await measureParticles(await make({}), {}, crewOfOne());
    expect(record.whole.virialRatio).not.toBeCloseTo(1, 3);
  });
});

describe('a virial ratio and the rest of a model', () => {
  /** The bodies from `begin` to `end` as a set of their own. */
  const part = (set: Particles, begin: number, end: number): Particles => ({
    ...set,
    count: end - begin,
    ...Object.fromEntries(
      COLUMNS.map((name) => [name, Float64Array.from(set[name].subarray(begin, end))]),
    ),
    columns: {},
    componentNames: [],
  });

  it('is that of each of two spheres by itself, on the orbit of their centres', async () => {
    const companion = { model: 'hernquist', count: 200, mass: 0.5, scaleRadius: 0.4 } as const;
    const encounter = { separation: 10, impactParameter: 4, relativeVelocity: 5 };
    const both = await make({ virialRatio: 0.7, companion, encounter });
    const records: MeasureRecord[] = [];
    for (const [begin, end] of [
      [0, 500],
      [500, 700],
    ])
      records.push(await measureParticles(part(both, begin, end), {}, crewOfOne()));
    for (const { whole } of records) expect(whole.virialRatio).toBeCloseTo(0.7, 10);
    const apart = (key: 'centreOfMass' | 'meanVelocity') =>
      records[1].frame[key].map((x, k) => x - records[0].frame[key][k]);
    [10, 0, 0].forEach((x, k) => expect(apart('centreOfMass')[k]).toBeCloseTo(x, 12));
    // 4/10 of the speed is sideways, and by Pythagoras √(1 − 0.16) of it along the line.
    [-5 * Math.sqrt(0.84), 2, 0].forEach((v, k) =>
      expect(apart('meanVelocity')[k]).toBeCloseTo(v, 12),
    );
    const whole = await measureParticles(both, {}, crewOfOne());
    whole.frame.centreOfMass.forEach((x) => expect(x).toBeCloseTo(0, 12));
    whole.frame.meanVelocity.forEach((v) => expect(v).toBeCloseTo(0, 12));
  });

  it('scales the centres of binaries and leaves their orbits as they are', async () => {
    const binaries = { share: 0.4, semiMajorAxis: [1e-4, 1e-4] } as const;
    const set = await make({ virialRatio: 0.3, binaries, masses: 'salpeter' });
    const pairs = 100;
    const systems = { ...part(set, pairs, 500) };
    for (let j = 0; j < pairs; j++) {
      const [a, b] = [2 * j, 2 * j + 1];
      const gm = set.mass[a] + set.mass[b];
      const distance = Math.hypot(set.x[a] - set.x[b], set.y[a] - set.y[b], set.z[a] - set.z[b]);
      const v2 = VELOCITIES.reduce((sum, name) => sum + (set[name][a] - set[name][b]) ** 2, 0);
      // Vis-viva; separations of 1e-6 and more at a distance of some lengths: 1e-9.
      expect(1 / (2 / distance - v2 / gm) / 1e-4).toBeCloseTo(1, 6);
      for (const name of COLUMNS) {
        systems[name][j] =
          name === 'mass' ? gm : (set.mass[a] * set[name][a] + set.mass[b] * set[name][b]) / gm;
      }
    }
    const record = await measureParticles(systems, {}, crewOfOne());
    expect(record.whole.virialRatio).toBeCloseTo(0.3, 9);
  });

  it('stands before escapers are sent off', async () => {
    const escapers = { share: 0.1, speed: 1 };
    const set = await make({ virialRatio: 1, escapers });
    const plain = await make({ virialRatio: 1 });
    expect(set.vx.slice(0, 450)).toEqual(plain.vx.slice(0, 450));
    const record = await measureParticles(set, {}, crewOfOne());
    expect(record.bound.particles).toBeLessThanOrEqual(450);
    expect(record.bound.particles).toBeGreaterThan(430); // A few near φ = 0 go with them.
  });

  it('keeps a rotation', async () => {
    const set = await make({ virialRatio: 1, rotation: 1, count: 2000 });
    const record = await measureParticles(set, {}, crewOfOne());
    expect(record.whole.virialRatio).toBeCloseTo(1, 10);
    const [lx, ly, lz] = record.frame.angularMomentum;
    expect(lz).toBeGreaterThan(10 * Math.hypot(lx, ly));
  });
});

describe('what the snapshot states', () => {
  it('G of the units, and the units', async () => {
    const particles = await make({ units: 'pc-kms-msun', mass: 1e5 });
    // Source: GM of the Sun (IAU 2015 B3) over the parsec (IAU 2015 B2): 4.300917270036e-3.
    expect(particles.gravity).toBeCloseTo(4.300917270036e-3, 14);
    expect(particles.units?.name).toBe('pc-kms-msun');
  });

  it("Plummer's softening, but no length whose kernel it cannot state", async () => {
    expect((await make({ softening: 0.1 })).softening).toBe(0.1);
    expect((await make({ softening: 0.1, softeningKernel: 'spline' })).softening).toBeNull();
    expect((await make({})).softening).toBeNull();
  });
});

describe('what cannot be made', () => {
  it.each([
    [{ units: 'furlongs' }, 'usage.units', 'furlongs'],
    [{ softening: -1 }, 'usage.softening', '-1'],
    [{ softeningKernel: 'spline' as const }, 'usage.softeningKernel', 'spline'],
    [{ virialRatio: -1 }, 'usage.virialRatio', '-1'],
    [{ count: 1, virialRatio: 1 }, 'unanswerable.virialScaling', 'T = 0'],
  ])('%j', async (options, code, found) => {
    await expect(make(options)).rejects.toMatchObject({
      code,
      message: expect.stringContaining(found) as string,
      remedy: expect.stringMatching(/./) as string,
    });
  });
});
