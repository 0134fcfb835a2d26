import { describe, expect, it } from 'vitest';
import { Random } from '../../src/numerics/random.ts';
import { medianOf, robustFit } from '../../src/numerics/robustFit.ts';

const fitOf = (values: readonly number[], ...terms: (readonly number[])[]) =>
  robustFit({
    count: values.length,
    width: 1,
    terms: terms.length,
    load: (k, into) => {
      into[0] = values[k];
      terms.forEach((term, t) => (into[t + 1] = term[k]));
    },
  });

describe('least squares', () => {
  it('of a line agree with the closed form', () => {
    const x = [0.2, 337.4, 118.2, 884.6, 10.1, 226.5, 666.3, 996.3];
    const y = [0.1, 338.8, 118.1, 888, 9.2, 228.1, 668.5, 998.5];
    const n = x.length;
    const mean = (list: number[]) => list.reduce((a, b) => a + b, 0) / n;
    const [mx, my] = [mean(x), mean(y)];
    const sxx = x.reduce((sum, a) => sum + (a - mx) ** 2, 0);
    const slope = x.reduce((sum, a, k) => sum + (a - mx) * (y[k] - my), 0) / sxx;
    const intercept = my - slope * mx;
    const rest = x.reduce((sum, a, k) => sum + (y[k] - intercept - slope * a) ** 2, 0);
    const variance = rest / (n - 2);
    const fit = fitOf(y, x, Array<number>(n).fill(1));
    // Textbook formulas of the straight line; rounding.
    expect(fit.coefficients[0]).toBeCloseTo(slope, 12);
    expect(fit.coefficients[1]).toBeCloseTo(intercept, 10);
    expect(fit.errors[0]).toBeCloseTo(Math.sqrt(variance / sxx), 12);
    expect(fit.errors[1]).toBeCloseTo(Math.sqrt(variance * (1 / n + (mx * mx) / sxx)), 10);
    expect(fit.rms).toBeCloseTo(Math.sqrt(rest / n), 10);
    expect(fit.kept).toBe(n);
  });

  it('have errors that are those of repeated draws', () => {
    const random = new Random(4);
    const x = Array.from({ length: 50 }, () => random.normal());
    const pulls: number[] = [];
    for (let draw = 0; draw < 400; draw++) {
      const y = x.map((a) => 3 * a - 2 + 0.1 * random.normal());
      const { coefficients, errors } = fitOf(y, x, Array<number>(50).fill(1));
      pulls.push((coefficients[0] - 3) / errors[0], (coefficients[1] + 2) / errors[1]);
    }
    const rms = Math.sqrt(pulls.reduce((sum, p) => sum + p * p, 0) / pulls.length);
    // Student's t of 48 degrees: √(48/46) = 1.02; 800 pulls tell it to 2.5 %, and four times that.
    expect(Math.abs(rms - 1.02)).toBeLessThan(0.1);
  });

  it('are not moved by rows that are far off', () => {
    const random = new Random(5);
    const x = Array.from({ length: 200 }, () => 1 + random.uniform());
    const y = x.map((a) => 2 * a + 1e-6 * random.normal());
    y[17] = 1e12;
    y[90] = -1e7;
    const { coefficients, kept } = fitOf(y, x);
    expect(Math.abs(coefficients[0] - 2)).toBeLessThan(1e-6);
    expect(kept).toBe(198);
  });

  it('leave out a term that is a multiple of another, or nothing', () => {
    const x = [1, 2, 3, 4];
    const twice = x.map((a) => 2 * a);
    expect([...fitOf(twice, x, twice).coefficients]).toEqual([2, 0]);
    expect([...fitOf(twice, [0, 0, 0, 0], x).coefficients]).toEqual([0, 2]);
    expect(fitOf([], [])).toMatchObject({ kept: 0, rms: 0 });
  });

  it('keep the numbers of a vector together', () => {
    const random = new Random(6);
    const vectors = Array.from({ length: 60 }, () => [1, 2, 3].map(() => random.normal()));
    const fit = robustFit({
      count: 60,
      width: 3,
      terms: 1,
      load: (k, into) => {
        into.set(vectors[k], 3);
        into.set(vectors[k].map((c, w) => (k === 8 && w === 2 ? 500 : -0.5 * c)));
      },
    });
    expect(fit.coefficients[0]).toBeCloseTo(-0.5, 12);
    expect(fit.kept).toBe(59);
  });
});

it('the lower median', () => {
  expect(medianOf(Float64Array.of(4, 1, 3, 2))).toBe(2);
  expect(medianOf(new Float64Array(0))).toBe(0);
});
