import { expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { averageBalance } from '../../src/survey/average.ts';
import { madeRecord } from '../cli/made.ts';

/** A Kepler orbit of reduced mass 1, G M = 1, a = 1, eccentricity e, at eccentric anomaly E. */
function orbit(e: number, anomaly: number): MeasureRecord {
  const r = 1 - e * Math.cos(anomaly);
  // Source: Kepler's equation and the vis-viva law; r·v = √(GMa) e sin E.
  return madeRecord({
    time: anomaly - e * Math.sin(anomaly),
    whole: {
      ...madeRecord().whole,
      kinetic: 1 / r - 0.5,
      potential: -1 / r,
      clausius: -1 / r,
    },
    momentOfInertiaRate: 2 * e * Math.sin(anomaly),
  });
}

const series = (from: number, to: number, steps: number) =>
  Array.from({ length: steps + 1 }, (_, i) => orbit(0.6, from + ((to - from) * i) / steps));

it('is 1 over a whole orbit, though single moments are far from it', () => {
  const average = averageBalance(series(0, 2 * Math.PI, 400));
  // The trapezoidal rule over 400 uneven steps: some (2π/400)² = 2.5e-4.
  expect(Math.abs(average.clausiusRatio - 1)).toBeLessThan(5e-4);
  expect(average.expectedRatio).toBeCloseTo(1, 12);
  expect(average.smallest).toBeCloseTo(2 - 1.6, 6); // 2T/|W| = 2 − r/a: 1 − e at apocentre …
  expect(average.largest).toBeCloseTo(2 - 0.4, 6); // … and 1 + e at pericentre.
});

it('knows what an unfinished orbit must give', () => {
  const average = averageBalance(series(0.3, 2.5, 400));
  expect(Math.abs(average.expectedRatio - 1)).toBeGreaterThan(0.05);
  expect(Math.abs(average.clausiusRatio - average.expectedRatio)).toBeLessThan(5e-4);
});

it('does not depend on the order of the records', () => {
  const records = series(0, 3, 10);
  expect(averageBalance([...records].reverse())).toEqual(averageBalance(records));
});

it('needs two times', () => {
  const still = madeRecord({ time: 1 });
  for (const records of [[], [still], [still, still], [madeRecord({ time: null }), still]]) {
    expect(() => averageBalance(records)).toThrow(
      expect.objectContaining({ code: 'unanswerable.average' }),
    );
  }
});
