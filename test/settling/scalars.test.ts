/** Means and trends of all scalars, the convergence radius, and which set a verdict speaks of. */
import { describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { convergenceRadius, relaxationInside } from '../../src/settling/convergence.ts';
import { scalarMeans } from '../../src/settling/scalars.ts';
import { verdictOf } from '../../src/settling/verdict.ts';
import { Random } from '../../src/numerics/random.ts';
import { madeRecord } from '../cli/made.ts';

const N = 60;
const base = madeRecord();
/** A series one tenth of a crossing time apart whose radius grows by 0.01 a crossing time. */
function seriesWith(change: (k: number) => Partial<MeasureRecord> = () => ({})): MeasureRecord[] {
  const random = new Random(3);
  const crossingTime = base.crossingTime ?? 1;
  return Array.from({ length: N }, (_, k) => ({
    ...base,
    time: k * 0.2 * crossingTime,
    velocityDispersion: 0.5 + 0.01 * random.normal(),
    virialRadius: 2 + 0.01 * (k * 0.2),
    ...change(k),
  }));
}
const times = Float64Array.from({ length: N }, (_, k) => k * 0.2);

describe('means of scalars', () => {
  const means = scalarMeans(seriesWith(), times);
  const of = (key: string) => means.find(({ quantity }) => quantity === key);

  it('have the mean and the trend that were put in', () => {
    expect(of('virialRadius')?.mean).toBeCloseTo(2 + 0.01 * 5.9, 6);
    expect(of('virialRadius')?.trend).toBeCloseTo(0.01, 9);
    const { mean = NaN, error } = of('velocityDispersion') ?? {};
    expect(Math.abs(mean - 0.5)).toBeLessThan(4 * (error ?? 0));
    // White noise of 0.01 in 60 samples: 0.0013, known to a quarter by seven blocks (no source: statistics).
    expect(error).toBeGreaterThan(0.0005);
    expect(error).toBeLessThan(0.004);
  });

  it('are of every scalar, members of lists among them, and of no error', () => {
    expect(of('whole.virialRatio')).toBeDefined();
    expect(of('lagrangian[0.5]')).toBeDefined();
    expect(means.some(({ quantity }) => /Error/.test(quantity))).toBe(false);
    for (const { mean } of means) expect(Number.isFinite(mean)).toBe(true);
  });

  it('leave out what some record does not have', () => {
    const some = scalarMeans(
      seriesWith((k) => (k === 7 ? { coreRadius: null } : {})),
      times,
    );
    expect(some.some(({ quantity }) => quantity === 'coreRadius')).toBe(false);
  });
});

describe('the convergence radius', () => {
  it('has the relaxation time of Power et al. 2003, MNRAS 338, 14, eq. 20', () => {
    // κ = √200/8 N/ln N (ρ̄/ρ_crit)^−½ for N = 1000 and a ratio of 1e6 is 0.2559104777, by hand.
    const critical = 1;
    const period = (density: number) => Math.sqrt((3 * Math.PI) / density);
    const radius = 2;
    const mass = ((4 * Math.PI) / 3) * 1e6 * critical * radius ** 3;
    const kappa = relaxationInside(1000, mass, radius, 1) / period(200 * critical);
    expect(kappa).toBeCloseTo(0.2559104777, 9);
  });

  it('lies where that is 0.6 of the span, between Lagrangian radii', () => {
    const fractions = [0.1, 0.2, 0.5, 0.9];
    const radii = [1, 2, 5, 9];
    const record: MeasureRecord = {
      ...base,
      effectiveNumber: 1000,
      lagrangian: { fractions, radii, errors: [0, 0, 0, 0] },
    };
    const { mass } = record.whole;
    const G = record.settings.gravity.value;
    const at = (k: number) =>
      relaxationInside(fractions[k] * 1000, fractions[k] * mass, radii[k], G);
    const span = at(1) / 0.6;
    expect(convergenceRadius(record, 'whole', span).radius).toBeCloseTo(2, 9);
    const between = convergenceRadius(record, 'whole', Math.sqrt(at(1) * at(2)) / 0.6).radius;
    expect(between).toBeCloseTo(Math.sqrt(10), 9);
    expect(convergenceRadius(record, 'whole', at(0) / 2)).toEqual({
      radius: null,
      isThroughout: false,
    });
    expect(convergenceRadius(record, 'whole', 100 * at(3))).toMatchObject({ isThroughout: true });
  });
});

describe('hard pairs', () => {
  const merged = { ...base.whole, virialRatio: 0.97, clausiusRatio: 0.97 };
  const withPairs = (energy: number) =>
    verdictOf(seriesWith(() => ({ hardPairs: 3, hardPairsEnergy: energy, pairsMerged: merged })));

  it('with more than 5 % of U make the verdict speak of each as one body', () => {
    const { ratio, remarks } = withPairs(0.3 * base.whole.potential);
    expect(ratio).toMatchObject({ set: 'pairsMerged', mean: expect.closeTo(0.97, 12) as number });
    expect(remarks.map(({ code }) => code)).toContain('pairsMerged');
  });

  it('with less leave it as it is', () => {
    expect(withPairs(0.01 * base.whole.potential).ratio.set).toBe('whole');
  });

  it('that were not sought are guessed at from a system that is far too bound for its size', () => {
    const deep = { ...base.whole, potential: 20 * base.whole.potential };
    const codes = (whole: MeasureRecord['whole']) =>
      verdictOf(seriesWith(() => ({ whole }))).remarks.map(({ code }) => code);
    expect(codes(deep)).toContain('pairsLikely');
    expect(codes(base.whole)).not.toContain('pairsLikely');
  });
});
