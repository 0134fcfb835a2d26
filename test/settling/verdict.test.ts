/** Verdicts on small runs of our own integrator, whose state is known from how they were started. */
import { describe, expect, it } from 'vitest';
import { measureParticles } from '../../src/dynamics/measure.ts';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { leapfrog } from '../../src/models/leapfrog.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { verdictOf } from '../../src/settling/verdict.ts';
import { makeSnapshot } from '../../src/survey/make.ts';

const crew = crewOfOne();
const softening = { kernel: 'plummer', length: 0.1 } as const;

async function runOf(
  virialRatio: number,
  options: {
    count?: number;
    every?: number;
    snapshots?: number;
    timeStep?: number;
    seed?: number;
  } = {},
): Promise<MeasureRecord[]> {
  const { count = 256, every = 0.5, snapshots = 60, timeStep = 0.05, seed = 1 } = options;
  const start = await makeSnapshot(
    { model: 'plummer', count, seed, virialRatio, softening: 0.1, softeningKernel: 'plummer' },
    crew,
  );
  const records: MeasureRecord[] = [];
  const run = { gravity: 1, softening, timeStep, every, snapshots };
  for await (const particles of leapfrog(start, run, crew)) {
    records.push(await measureParticles(particles, {}, crew));
  }
  return records;
}

describe('a run of our own', () => {
  it('in equilibrium is settled from its start', async () => {
    const verdict = verdictOf(await runOf(1));
    expect(['settled', 'relaxing']).toContain(verdict.verdict);
    // No source: within two crossing times of the first snapshot.
    expect(verdict.settledAt ?? Infinity).toBeLessThan(2 * verdict.crossingTime);
    expect(verdict.ratio.kind).toBe('clausiusRatio');
    expect(Math.abs(verdict.ratio.mean - 1)).toBeLessThan(0.03);
    expect(verdict.audit.momentumDrift).toBeLessThan(1e-12);
    expect(verdict.audit.energyDrift ?? 1).toBeLessThan(0.01);
  });

  it('after a cold start settles later, with its bound bodies', async () => {
    const records = await runOf(0.2, { timeStep: 0.02 });
    const verdict = verdictOf(records);
    expect(['settled', 'relaxing']).toContain(verdict.verdict);
    expect(verdict.settledAt ?? 0).toBeGreaterThan(0);
    expect(verdict.settledFrom).toBe(records.find(({ time }) => time === verdict.settledAt)?.file);
    expect(verdict.states.at(0)?.state).toBe('transient');
  });

  it('with far too much motion disperses', async () => {
    const verdict = verdictOf(await runOf(2.6));
    expect(['dispersing', 'expanding']).toContain(verdict.verdict);
    expect(verdict.settledAt).toBeNull();
  });

  it('with a time step far too long is broken', async () => {
    const verdict = verdictOf(await runOf(0.3, { timeStep: 0.5 }));
    expect(verdict.verdict).toBe('broken');
    expect(verdict.evidence[0].value).toBeGreaterThan(0.02);
  });

  it('cut short is undecided, and says what is missing', async () => {
    const verdict = verdictOf(await runOf(1, { every: 0.05, snapshots: 25 }));
    expect(verdict.verdict).toBe('undecided');
    expect(verdict.evidence[0].text).toMatch(/crossing times; .* needed/);
  });
});

describe('a series', () => {
  it('is judged in order of time, with the later of two records of one time', async () => {
    const records = await runOf(1, { snapshots: 30 });
    const shuffled = [...records].reverse();
    const again = { ...records[4], file: 'again' };
    const verdict = verdictOf([...shuffled, again]);
    expect(verdict.remarks.map(({ code }) => code)).toContain('timeRepeated');
    expect(verdict.snapshots).toBe(30);
    expect(verdict.ratio).toEqual(verdictOf(records).ratio);
  });

  it('without times cannot be judged', async () => {
    const [record] = await runOf(1, { snapshots: 1 });
    expect(() => verdictOf([record])).toThrow(/at least two snapshots/);
    expect(() => verdictOf([])).toThrow(/at least two snapshots/);
  });
});
