import { describe, expect, it } from 'vitest';
import { measureParticles } from '../../src/dynamics/measure.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { makeSnapshot, type MakeSnapshotOptions } from '../../src/survey/make.ts';

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
