import { describe, expect, it } from 'vitest';
import {
  bytesText,
  duration,
  figure,
  short,
  significant,
  vectorText,
  wholeNumber,
  yearsText,
} from '../../src/cli/figure.ts';

// Source of the rule: two digits of the uncertainty and the value to the same place, as in the
// Guide to the Expression of Uncertainty in Measurement (JCGM 100:2008), 7.2.6.
describe('a figure with an error', () => {
  it.each([
    [10.0573, 0.0275, '10.057 ± 0.028'],
    [-0.2943211, 0.0000234, '-0.294321 ± 0.000023'],
    [1.0023, 0.0996, '1.00 ± 0.10'],
    [0.12, 3.4, '0.1 ± 3.4'],
    [12345, 234, '12350 ± 230'],
    [0, 0.01, '0.000 ± 0.010'],
    [-4300917270, 1234567, '(-4.3009 ± 0.0012)e+9'],
    [6.626e-34, 1.2e-36, '(6.626 ± 0.012)e-34'],
    [3, 4e7, '(0.0 ± 4.0)e+7'],
  ])('%d with error %d reads %s', (value, error, text) => {
    expect(figure(value, error)).toBe(text);
  });

  it('shows ten digits at most, and the small error by itself', () => {
    expect(figure(-0.29452431127, 3.2e-16)).toBe('-0.2945243113 ± 3.2e-16');
  });

  it('can be read back to within half of the last place', () => {
    for (let i = 0; i < 2000; i++) {
      const value = Math.sin(i * 12.9898) * 43758.5453 * 10 ** ((i % 41) - 20);
      const error = Math.abs(value) * 10 ** -(i % 7) * 0.37 + 1e-25;
      const [, v, e, power] = /^\(?(\S+) ± ([^)\s]+)\)?(e\S+)?$/.exec(figure(value, error)) ?? [];
      const read = Number(v + (power ?? ''));
      // The error has two digits: its last place is at most a tenth of it, half of that 5 %.
      expect(Math.abs(read - value)).toBeLessThanOrEqual(0.0501 * error);
      expect(Math.abs(Number(e + (power ?? '')) - error)).toBeLessThanOrEqual(0.0501 * error);
    }
  });
});

describe('a figure without an error', () => {
  it('has six digits, and an exponent if it is very large or small', () => {
    expect(figure(0.1473334567)).toBe('0.147333');
    expect(figure(1234567.89)).toBe('1.23457e+6');
    expect(figure(0.00001234567)).toBe('1.23457e-5');
    expect(figure(0)).toBe('0');
  });

  it('says so where there is none', () => {
    for (const value of [null, NaN, Infinity]) expect(figure(value)).toBe('n/a');
  });

  it('ignores an error that is no error', () => {
    for (const error of [0, NaN, Infinity, null]) expect(figure(1.5, error)).toBe('1.50000');
  });
});

it('says settings as briefly as they are', () => {
  expect([1, 0.00430091727, 1e-5, 9.3e-6, 1e21].map((value) => short(value, 9))).toEqual([
    '1',
    '0.00430091727',
    '1e-5',
    '9.3e-6',
    '1e+21',
  ]);
  expect(significant(999999.9)).toBe('1.00000e+6');
  expect(wholeNumber(1234567)).toBe('1,234,567');
});

it('shows the components of a vector to one place, and rounding noise as 0', () => {
  expect(vectorText([0.0123456, -3e-17, 0], 1)).toBe('0.01235  0.00000  0.00000');
  expect(vectorText([1.5e9, 0, -2e3], null)).toBe('(1.50000  0.00000  0.00000)e+9');
  expect(vectorText([0, 0, 0], 0)).toBe('0  0  0');
});

it('says durations, sizes and years in units that people use', () => {
  const plain = [0.0004, 0.25, 9.96, 59.7, 119.7, 200].map(duration).join('|');
  expect(plain.replaceAll('\u00a0', ' ')).toBe('0.4 ms|0.25 s|10 s|60 s|2 min 0 s|3 min 20 s');
  expect([12, 57500, 5.6e8].map(bytesText)).toEqual(['12 bytes', '57.5 kB', '560 MB']);
  expect([12.5, 12500, 4.337e6, 1.3e10].map(yearsText)).toEqual([
    '12.5 yr',
    '12.5 kyr',
    '4.337 Myr',
    '13 Gyr',
  ]);
});
