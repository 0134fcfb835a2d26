/**
 * Verdicts on a handful of the bank's real runs (`npm run bench:runs` has them all).
 *
 * Outside check: what the runs are is known from how they were made, not from the rule.
 */
import { describe, expect, it } from 'vitest';
import * as library from '../../src/index.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { lastBurst } from '../../src/settling/burst.ts';
import { verdictOf } from '../../src/settling/verdict.ts';
import { KINDS, recordsOf } from '../bench/runBank.js';

const crew = crewOfOne();

async function judged(kind: string, count: number, seed = 1) {
  const { records, disturbed } = await recordsOf(library, kind, { count, seed }, crew);
  return { records, disturbed, verdict: verdictOf(records) };
}

describe('a run of the bank', () => {
  it.each([
    ['cut short', 128],
    ['merger under way', 128],
    ['losing mass', 128],
  ])('%s is told for what it is', async (kind, count) => {
    const { verdict } = await judged(kind, count);
    expect(KINDS[kind].allowed).toContain(verdict.verdict);
  });

  it('re-heated was at rest until the kick, and is not after it', async () => {
    const { records, disturbed, verdict } = await judged('re-heated', 128);
    const kick = records[disturbed[0]].time as number;
    expect(verdict.settledAt).toBeNull();
    const rest = verdict.states.find(({ state }) => state === 'settled' || state === 'relaxing');
    // No source: within two crossing times of the kick.
    expect(Math.abs((rest?.to ?? 0) - kick)).toBeLessThan(2 * verdict.crossingTime);
    expect(verdict.states.at(-1)?.state).toBe(verdict.verdict);
  });

  it('disturbed and at rest again is told so, with its first rest', async () => {
    const kind = 'disturbed and at rest again';
    const { records, disturbed, verdict } = await judged(kind, 256);
    const kick = records[disturbed[0]].time as number;
    expect(KINDS[kind].allowed).toContain(verdict.verdict);
    expect(verdict.settledAt ?? 0).toBeGreaterThan(kick);
    expect(verdict.states.map(({ state }) => state)).toContain('disturbed');
    const [first] = verdict.states.filter(({ state }) => state === 'settled');
    expect(Math.abs(first.to - kick)).toBeLessThan(2 * verdict.crossingTime);
    // The states follow each other without a gap.
    verdict.states.slice(1).forEach(({ from }, k) => expect(from).toBe(verdict.states[k].to));
  });
});

describe('a burst', () => {
  const t = Float64Array.from({ length: 200 }, (_, k) => k / 10);
  const quiet = t.map((time) => 1 + 0.01 * Math.sin(7 * time));

  it('is found where it is, and the last one counts', () => {
    expect(lastBurst(t, quiet, 0)).toBeNull();
    const burst = (time: number) =>
      (time > 5 && time < 6) || (time > 12 && time < 13.5) ? 0.3 : 0;
    const found = lastBurst(
      t,
      quiet.map((x, k) => x + burst(t[k])),
      0,
    );
    // Windows of one crossing time reach half of one beyond it.
    expect(t[found?.from ?? 0]).toBeGreaterThan(11);
    expect(t[found?.from ?? 0]).toBeLessThan(12.5);
    expect(t[found?.to ?? 0]).toBeGreaterThan(13);
    expect(t[found?.to ?? 0]).toBeLessThan(14.5);
  });

  it('is none where noise explains it', () => {
    const one = quiet.map((x, k) => x + (t[k] > 5 && t[k] < 6 ? 0.1 : 0));
    expect(lastBurst(t, one, 0)).not.toBeNull();
    expect(lastBurst(t, one, 0.1)).toBeNull();
  });
});
