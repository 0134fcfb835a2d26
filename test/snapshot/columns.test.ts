import { describe, expect, it } from 'vitest';
import { missingColumn, parseColumns, unknownColumn } from '../../src/snapshot/columns.ts';

describe('parseColumns', () => {
  it('takes names of ours and columns of the file', () => {
    expect(parseColumns('mass=weight, x = px,id=a=b')).toEqual({
      mass: 'weight',
      x: 'px',
      id: 'a=b',
    });
    expect(parseColumns('m=w')).toEqual({ mass: 'w' });
  });

  it.each([
    ['mass', 'usage.columns', ['found "mass"', 'name=column']],
    ['', 'usage.columns', ['found ""']],
    ['mass=', 'usage.columns', ['found "mass="']],
    ['=w', 'usage.columns', ['found "=w"']],
    ['mass=a,m=b', 'usage.columns', ['"m" is given twice', '"a"', '"b"']],
    ['velocty=v', 'usage.unknownField', ['"velocty"', 'expected one of mass', 'mean "velocity"']],
    ['toString=v', 'usage.unknownField', ['"toString"']],
  ])('refuses %j', (text, code, parts) => {
    let error: unknown;
    try {
      parseColumns(text);
    } catch (thrown) {
      error = thrown;
    }
    expect(error).toMatchObject({ name: 'UsageError', code });
    const { message, remedy } = error as { message: string; remedy: string };
    for (const part of ['--columns', ...parts]) expect(`${message} | ${remedy}`).toContain(part);
  });
});

it('names the columns there are and the nearest', () => {
  expect(unknownColumn('a.bin', 'mass', 'weigth', ['weight', 'x'])).toMatchObject({
    code: 'input.unknownColumn',
    message: 'a.bin: --columns takes mass from "weigth", but the file has only weight, x',
    remedy: 'Did you mean mass=weight?',
  });
  expect(missingColumn('a.bin', 'velocity', ['vel', 'x'])).toMatchObject({
    code: 'input.missingColumn',
    message: 'a.bin: no column for velocity; the file has vel, x',
  });
});
