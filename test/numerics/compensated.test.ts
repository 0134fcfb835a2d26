import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { CompensatedSum, compensatedSum } from '../../src/numerics/compensated.ts';

describe('a compensated sum', () => {
  it('keeps what a plain sum loses', () => {
    // Source: Neumaier 1974; in doubles 1 + 1e100 − 1e100 is 0, and so it is with Kahan's sum.
    expect(compensatedSum([1, 1e100, 1, -1e100])).toBe(2);
    expect(compensatedSum([1e16, 1, -1e16])).toBe(1);
    // Ten tenths, each the double nearest to 0.1, add up to 1 within half a unit in the last place.
    expect(compensatedSum(new Float64Array(10).fill(0.1))).toBe(1);
  });

  it('is 0 for nothing, and the value for one', () => {
    expect(compensatedSum([])).toBe(0);
    expect(new CompensatedSum().value()).toBe(0);
    expect(compensatedSum([-3.5])).toBe(-3.5);
  });

  it('adds a million tenths to the last digit', () => {
    const sum = new CompensatedSum();
    for (let i = 0; i < 1e6; i++) sum.add(0.1);
    // The double next to 0.1 is 0.1 + 5.55e-18: a million of them are 100000 + 5.55e-12, nearest to 100000.
    expect(sum.value()).toBe(100000);
  });

  it('is exact to one rounding for whole numbers beyond 2^53 (fast-check)', () => {
    const exact = fc.array(fc.maxSafeInteger(), { minLength: 1, maxLength: 300 });
    fc.assert(
      fc.property(exact, (list) => {
        // Source: exact integers. Error bound of the method: one rounding, plus n² ε² of Σ|x|.
        const sum = list.reduce((total, value) => total + BigInt(value), 0n);
        const sizes = list.reduce((total, value) => total + Math.abs(value), 0);
        const error = Math.abs(compensatedSum(list) - Number(sum));
        const bound = 2 ** -52 * Math.abs(Number(sum)) + list.length ** 2 * 2 ** -105 * sizes;
        expect(error).toBeLessThanOrEqual(bound);
      }),
      { seed: 1, numRuns: 300 },
    );
  });
});
