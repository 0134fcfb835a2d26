/** The same record, bit for bit, for any number of threads: work is cut by the data alone. */
import { describe, expect, it } from 'vitest';
import { measureParticles } from '../../dist/dynamics/measure.js';
import type { MeasureRecord } from '../../dist/dynamics/record.js';
import type { MeasureOptions } from '../../dist/dynamics/settings.js';
import { makeModel } from '../../dist/models/make.js';
import { sumForces } from '../../dist/octree/forces.js';
import { startCrew } from '../../dist/parallel/crew.js';
import type { Particles } from '../../dist/snapshot/particles.js';

/** All of a record but what the clock and the number of threads say, as text: doubles survive JSON. */
function bitsOf(record: MeasureRecord): string {
  const { seconds, threads, ...engine } = record.engine;
  expect(threads).toBeGreaterThan(0);
  expect(Object.keys(seconds).length).toBeGreaterThan(0);
  return JSON.stringify({ ...record, engine });
}

async function recordOf(particles: Particles, options: MeasureOptions, threads: number) {
  const crew = startCrew(threads);
  try {
    const record = await measureParticles(particles, options, crew);
    expect(record.engine.threads).toBe(threads);
    return bitsOf(record);
  } finally {
    await crew.close();
  }
}

const OPTIONS: [string, number[], MeasureOptions][] = [
  ['unsoftened', [7, 16], { error: 1e-4 }],
  ['with all extras', [2, 3], { error: 1e-4, with: ['all'] }],
  ['Plummer softening', [3, 16], { error: 1e-3, softening: 0.05 }],
  ['a spline', [2], { error: 1e-3, softening: 0.05, softeningKernel: 'spline' }],
  ['Plummer softening of each body', [2, 3, 7], { error: 1e-4, softening: 'column' }],
  ['splines of each', [3], { error: 1e-3, softening: 'column', softeningKernel: 'spline' }],
];

describe.each(['plummer', 'hernquist'] as const)('%s of 20,000 bodies', (model) => {
  const softening = new Float64Array(new SharedArrayBuffer(20_000 * 8));
  softening.forEach((_, i) => (softening[i] = [0.2, 0.002, 0, 0.05][i % 4]));
  const made = makeModel({ model, count: 20_000, seed: 5 });
  const particles = { ...made, columns: { ...made.columns, softening } };
  // Some fast bodies, so that the bound set takes rounds of subtraction through a tree and body by body.
  for (let i = 0; i < 20_000; i += 80) particles.vx[i] += 4;
  // And some close pairs that move together, so that there are hard ones to merge.
  for (let i = 1; i < 20_000; i += 800) {
    for (const column of [particles.x, particles.y, particles.z]) column[i] = column[i + 1] + 1e-6;
    for (const column of [particles.vx, particles.vy, particles.vz]) column[i] = column[i + 1];
  }

  it.each(OPTIONS)('%s: as on one thread on %j', async (_, many, options) => {
    const one = await recordOf(particles, options, 1);
    for (const threads of many) expect(await recordOf(particles, options, threads)).toBe(one);
  });

  it('accelerations: 1 and 3 threads', async () => {
    const field = async (threads: number) => {
      const crew = startCrew(threads);
      const softening = { kernel: 'plummer', length: 0.02 } as const;
      const options = { gravity: 1, softening, errorWanted: 1e-4, accelerations: true };
      const forces = await sumForces(particles, options, crew);
      await crew.close();
      expect(forces.origin).toBe('tree');
      return forces;
    };
    const [one, three] = [await field(1), await field(3)];
    // Typed arrays, element by element.
    expect(three.acceleration).toEqual(one.acceleration);
    expect(three.potential).toEqual(one.potential);
    expect(three.clausiusShare).toEqual(one.clausiusShare);
  });
});

it('200,001 bodies, for which sums, radii and densities are spread over threads too', async () => {
  const particles = makeModel({ model: 'plummer', count: 200_001, seed: 6, masses: 'salpeter' });
  const options: MeasureOptions = { error: 1e-3, with: ['all'] };
  const one = await recordOf(particles, options, 1);
  expect(one).toContain('"hardPairs":');
  for (const threads of [2, 3]) expect(await recordOf(particles, options, threads)).toBe(one);
});

it('direct sums of 3000 bodies', async () => {
  const particles = makeModel({ model: 'plummer', count: 3000, seed: 7 });
  expect(await recordOf(particles, {}, 2)).toBe(await recordOf(particles, {}, 1));
});
