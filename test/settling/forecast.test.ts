/** Forecasts of made transients whose end is known, and none where there is nothing to foresee. */
import { describe, expect, it } from 'vitest';
import { Random } from '../../src/numerics/random.ts';
import { LIMITS } from '../../src/settling/limits.ts';
import { decide, type Track } from '../../src/settling/rule.ts';
import { forecastOf } from '../../src/settling/forecast.ts';

const N = 10_000;
const NOISE = LIMITS.noiseRatio / Math.sqrt(N);

/** A swing of the ratio with a period of 1.3 that sinks as exp(−t/damping), ten snapshots a crossing time. */
function swing(length: number, damping: number, seed: number): Track {
  const random = new Random(seed);
  const n = Math.round(length * 10);
  const time = Float64Array.from({ length: n }, (_, k) => k / 10);
  const wave = time.map((t) => 0.4 * Math.exp(-t / damping) * Math.cos((2 * Math.PI * t) / 1.3));
  const ratio = wave.map((x) => 1 + x + 0.3 * NOISE * random.normal());
  const logHalf = wave.map((x) => -0.4 * x + 0.3 * NOISE * random.normal());
  return { time, ratio, logHalf, effectiveNumber: N };
}
/** When the rms over a period sinks below the limit that the forecast speaks of. */
const endOf = (damping: number) =>
  damping * Math.log(0.4 / Math.SQRT2 / Math.max(0.7 * LIMITS.wave, 2.5 * NOISE));

describe('a swing that sinks exponentially', () => {
  it.each([2, 4, 8])('with damping time %d is foreseen from half the way', (damping) => {
    const end = endOf(damping);
    const errors = Array.from({ length: 20 }, (_, seed) => {
      const track = swing(Math.max(5, end / 2), damping, seed + 1);
      const found = forecastOf(track, decide(track));
      expect(found).not.toBeNull();
      return ((found?.settledAt ?? NaN) - end) / (found?.error ?? NaN);
    });
    // Off by no more than three of its errors, nearly always.
    expect(errors.filter((error) => Math.abs(error) < 3).length).toBeGreaterThanOrEqual(18);
  });

  it('is foreseen the better the later', () => {
    const end = endOf(4);
    const offBy = (length: number) => {
      const track = swing(length, 4, 3);
      return Math.abs((forecastOf(track, decide(track))?.settledAt ?? Infinity) - end);
    };
    expect(offBy(0.9 * end)).toBeLessThan(Math.max(1, offBy(0.4 * end)));
  });
});

it('says nothing of a swing that does not sink, and of a run that is settled', () => {
  const steady = swing(10, 1e9, 1);
  expect(forecastOf(steady, decide(steady))).toBeNull();
  const settled = swing(30, 0.5, 1);
  expect(decide(settled).state).toBe('settled');
  expect(forecastOf(settled, decide(settled))).toBeNull();
});

it('of a quiet run that is short it says from when it can be told', () => {
  const random = new Random(4);
  const time = Float64Array.from({ length: 25 }, (_, k) => k / 10);
  const noisy = (level: number) => time.map(() => level + 0.3 * NOISE * random.normal());
  const track: Track = { time, ratio: noisy(1), logHalf: noisy(0), effectiveNumber: N };
  expect(forecastOf(track, decide(track))).toMatchObject({
    settledAt: 0,
    toldAt: LIMITS.quietSpan,
  });
});
