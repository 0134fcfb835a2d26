import { describe, expect, it } from 'vitest';
import { listOf, numberOf, vectorOf, wholeOf } from '../../src/cli/parse.ts';

describe('values of options', () => {
  it('reads numbers as people write them', () => {
    expect(numberOf('--gravity')('4.30091727e-3')).toBe(4.30091727e-3);
    expect(wholeOf('--count', 1)('1e6')).toBe(1_000_000);
    expect(wholeOf('--count', 1)('100_000')).toBe(100_000);
    expect(listOf('--fractions')('0.1, 0.5')).toEqual([0.1, 0.5]);
    expect(vectorOf('--offset')('-1,0,2.5')).toEqual([-1, 0, 2.5]);
  });

  it.each([
    ['--gravity', () => numberOf('--gravity')('1,5')],
    ['--gravity', () => numberOf('--gravity')('')],
    ['--gravity', () => numberOf('--gravity')('Infinity')],
    ['--gravity', () => numberOf('--gravity')('1 km')],
    ['--count', () => wholeOf('--count', 1)('0')],
    ['--count', () => wholeOf('--count', 1)('1.5')],
    ['--count', () => wholeOf('--count', 1)('_5')],
    ['--fractions', () => listOf('--fractions')('0.1,,0.5')],
    ['--offset', () => vectorOf('--offset')('1,2')],
  ])('refuses what is not a value of %s', (option, parse) => {
    expect(parse).toThrow(
      expect.objectContaining({
        code: 'usage.value',
        message: expect.stringContaining(option) as string,
        remedy: expect.stringMatching(/^Write it as/) as string,
      }),
    );
  });
});
