import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { parseTimePattern } from '../../src/snapshot/timePattern.ts';

const refuse = (found: string): never => {
  throw new Error(found);
};
const numberIn = (pattern: string, name: string) =>
  parseTimePattern(pattern, refuse).numberIn(name);

describe('a pattern of names', () => {
  it.each<[string, string, number | null]>([
    ['snap_{time}.bin', 'snap_12.bin', 12],
    ['snap_{time}.bin', 'snap_0012.50.bin', 12.5],
    ['snap_{time}.bin', 'snap_-3e-2.bin', -0.03],
    ['snap_{time}.bin', 'snap_.5.bin', 0.5],
    ['snap_{time}.bin', 'snap_5..bin', 5],
    ['snap_{time}.bin', 'snap_12.dat', null],
    ['snap_{time}.bin', 'old_snap_12.bin', null],
    ['snap_{time}.bin', 'snap_.bin', null],
    ['snap_{time}.bin', 'snap_1e999.bin', null],
    ['snap.{step}', 'snap.000120', 120],
    ['snap.{step}', 'snapX000120', null],
    ['*{time}.bin', 'run-120.bin', 120],
    ['*{time}*', 'run7_t1.5_b.bin', 7],
    ['*_t{time}_*', 'run7_t1.5_b.bin', 1.5],
    ['t={time} (a+b).[x]', 't=2 (a+b).[x]', 2],
    ['{time}', '42', 42],
    ['a-{time}', 'a--1', -1],
  ])('%s in %s: %s', (pattern, name, expected) => {
    expect(numberIn(pattern, name)).toBe(expected);
  });

  it('takes back any number that is written into it', () => {
    fc.assert(
      fc.property(fc.double({ noNaN: true, noDefaultInfinity: true }), (time) => {
        expect(numberIn('a_{time}.bin', `a_${time}.bin`)).toBe(Number(String(time)));
      }),
      { seed: 1 },
    );
  });

  it('tells times from steps', () => {
    expect(parseTimePattern('{step}', refuse).kind).toBe('step');
    expect(parseTimePattern('{time}', refuse).kind).toBe('time');
  });

  it.each([
    ['snap.bin', 'no placeholder'],
    ['{tiem}', '{tiem}'],
    ['{time}_{step}', '{time} and {step}'],
    ['{}', '{}'],
  ])('%s is refused', (pattern, found) => {
    expect(() => parseTimePattern(pattern, refuse)).toThrow(found);
  });
});
