/** The gravity test on runs of our own integrator, which are then measured with a G that is not theirs. */
import { beforeAll, describe, expect, it } from 'vitest';
import { measureParticles } from '../../src/dynamics/measure.ts';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import type { MeasureOptions } from '../../src/dynamics/settings.ts';
import { leapfrog } from '../../src/models/leapfrog.ts';
import { makeModel } from '../../src/models/make.ts';
import { sumForces } from '../../src/octree/forces.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { gravityTest, impliedGravity, SOFTENED_CLAUSIUS } from '../../src/settling/gravityTest.ts';
import { verdictOf } from '../../src/settling/verdict.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { UNIT_SYSTEMS } from '../../src/snapshot/units.ts';
import { makeSnapshot } from '../../src/survey/make.ts';

const crew = crewOfOne();
const kernel = 'plummer';

/** A copy of what the integrator moves on. */
const still = (moving: Particles): Particles => structuredClone(moving);

async function runOf(
  gravity: number,
  length: number,
  virialRatio: number,
  snapshots = 60,
): Promise<Particles[]> {
  const start = await makeSnapshot(
    {
      ...{ model: 'plummer', count: 200, seed: 4, virialRatio, gravity },
      ...{ softening: length, softeningKernel: kernel },
    },
    crew,
  );
  const step = 0.05 / Math.sqrt(gravity);
  const run = {
    gravity,
    softening: { kernel, length },
    timeStep: step,
    every: 8 * step,
    snapshots,
  };
  const states: Particles[] = [];
  for await (const state of leapfrog(start, run as Parameters<typeof leapfrog>[1], crew)) {
    states.push({ ...still(state), gravity: null, units: null, softening: null });
  }
  return states;
}

async function measured(
  states: readonly Particles[],
  options: MeasureOptions,
): Promise<MeasureRecord[]> {
  const records: MeasureRecord[] = [];
  for (const state of states) records.push(await measureParticles(state, options, crew));
  return records;
}

const G = UNIT_SYSTEMS['pc-kms-msun'].gravity;
let parsecs: Particles[];
beforeAll(async () => {
  parsecs = await runOf(G, 0.1, 1);
});

describe('impliedGravity', () => {
  // What the run was made with is the truth: no other source.
  it.each([G, 1, 0.01, 10 * G, 1e3])(
    'finds the G of the run, measured with %f',
    async (gravity) => {
      const records = await measured(parsecs, { gravity, softening: 0.1 });
      const implied = impliedGravity(records);
      if (implied === null) throw new Error('nothing found');
      expect(Math.abs(implied.gravity / G - 1)).toBeLessThan(0.02);
      expect(Math.abs(implied.gravity - G)).toBeLessThan(4 * implied.error);
      expect(implied.error / G).toBeLessThan(0.02);
    },
  );

  it('does not take waves and escapers for another G', async () => {
    const states = await runOf(1, 0.1, 0.7, 90);
    const records = await measured(states, { softening: 0.1 });
    const implied = impliedGravity(records);
    if (implied === null) throw new Error('nothing found');
    expect(Math.abs(implied.factor - 1)).toBeLessThan(0.001);
    // The mean of the ratio itself is off: time averages are of T and W, and escapers keep T.
    const ratios = records.map(({ whole }) => whole.clausiusRatio ?? 0);
    const mean = ratios.reduce((sum, ratio) => sum + ratio, 0) / ratios.length;
    expect(Math.abs(mean - 1)).toBeGreaterThan(0.005);
    expect(gravityTest(records)).toEqual([]);
  });

  it('has nothing to say of few snapshots, of a part of the bodies, or of a collapse', async () => {
    const records = await measured(parsecs, { softening: 0.1 });
    expect(impliedGravity(records.slice(0, 18))).toBeNull();
    const selection = { only: 'a', group: null, within: null, about: null, of: 400 };
    expect(impliedGravity(records.map((record) => ({ ...record, selection })))).toBeNull();
    const collapse = await measured(await runOf(1, 0.1, 0.1, 40), { softening: 0.1 });
    expect(impliedGravity(collapse)).toBeNull();
  });
});

describe('the remark', () => {
  it('is not made where G is right', async () => {
    const records = await measured(parsecs, { units: 'pc-kms-msun', softening: 0.1 });
    expect(gravityTest(records)).toEqual([]);
  });

  it('names the units whose G it is, in the verdict', async () => {
    const { remarks } = verdictOf(await measured(parsecs, { softening: 0.1 }));
    const found = remarks.find(({ code }) => code === 'gravityTest');
    expect(found?.text).toMatch(/G = 0\.0043\d* ± [\d.e-]+, that of the unit system pc-kms-msun/);
    expect(found?.remedy).toContain('--units pc-kms-msun');
  });

  it('names a softening where that would balance it', async () => {
    const length = 0.4;
    const states = await runOf(1, length, 1, 100);
    const [remark] = gravityTest(await measured(states, { softening: 0 }));
    const named = Number(/length of about ([\d.]+)/.exec(remark.text)?.[1]);
    // The half-mass radius moves and 200 bodies are no smooth sphere: a third is near enough for a hint.
    expect(Math.abs(named / length - 1)).toBeLessThan(0.35);
  });
});

it('has a table that direct sums confirm', async () => {
  const bodies = makeModel({ model: 'plummer', count: 4000, seed: 11 });
  // r_h of a Plummer sphere: 1/√(2^(2/3) − 1), from its enclosed mass.
  const radius = 1 / Math.sqrt(2 ** (2 / 3) - 1);
  const clausius = async (length: number) => {
    const softening = length > 0 ? { kernel, length } : ({ kernel: 'none', length: 0 } as const);
    const options = { gravity: 1, softening, errorWanted: 1e-6 } as Parameters<typeof sumForces>[1];
    return (await sumForces(bodies, options, crew)).clausius;
  };
  const bare = await clausius(0);
  for (const [length, share] of SOFTENED_CLAUSIUS.filter(([length]) => length > 0.03)) {
    // Another sample of fewer bodies: close pairs and cores differ by about 1/√N.
    expect(Math.abs((await clausius(length * radius)) / bare / share - 1)).toBeLessThan(0.015);
  }
});
