import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { InputError } from '../../src/errors.ts';
import { readTimes } from '../../src/snapshot/timesTable.ts';

const folder = mkdtempSync(join(tmpdir(), 'settlemark-times-'));
afterAll(() => rmSync(folder, { recursive: true }));
const at = (name: string) => join(folder, name);
function table(text: string): string {
  writeFileSync(at('times.csv'), text);
  return at('times.csv');
}

describe('a table of times', () => {
  it('knows files by path from its folder, or by name alone', async () => {
    const times = await readTimes(
      table('file,time\na.bin,1\nsub/b.bin,2.5e-3\n./c.bin,-3\n"d, old.bin",4\n'),
    );
    expect(times.rows).toBe(4);
    expect(times.timeOf(at('a.bin'))).toBe(1);
    expect(times.timeOf('/elsewhere/a.bin')).toBe(1);
    expect(times.timeOf(at('sub/b.bin'))).toBe(0.0025);
    // With a folder in its row, only that folder is meant.
    expect(times.timeOf('/elsewhere/b.bin')).toBeNull();
    expect(times.timeOf(at('c.bin'))).toBe(-3);
    expect(times.timeOf(at('d, old.bin'))).toBe(4);
    expect(times.timeOf(at('e.bin'))).toBeNull();
  });

  it('may have columns in any order, others between, spaces, empty lines, other line ends', async () => {
    const times = await readTimes(
      table('\uFEFF Time ,step, FILE\r\n 0.5 ,1, a.bin \r\n\r\n,,\r\n 1 ,2,b.bin\r\n'),
    );
    expect([times.timeOf('a.bin'), times.timeOf('b.bin')]).toEqual([0.5, 1]);
    expect(times.rows).toBe(2);
  });

  it.each<[string, string, code: string, part: RegExp]>([
    ['nothing', '', 'timesEmpty', /holds no times/],
    ['a head alone', 'file,time\n', 'timesEmpty', /holds no times/],
    [
      'rows without a head',
      'a.bin,1\nb.bin,2\n',
      'timesColumns',
      /line 1: found the columns "a\.bin,1"/,
    ],
    ['another head', 'name,t\na.bin,1\n', 'timesColumns', /found the columns "name,t"/],
    ['semicolons', 'file;time\na.bin;1\n', 'timesColumns', /separated by commas/],
    [
      'text for a time',
      'file,time\na.bin,1\n\nb.bin,soon\n',
      'timesRow',
      /line 4: found the time "soon" of b\.bin/,
    ],
    ['no time', 'file,time\na.bin,\n', 'timesRow', /line 2: found no time of a\.bin/],
    ['a row that ends early', 'file,time\na.bin\n', 'timesRow', /line 2: found no time of a\.bin/],
    ['an infinite time', 'file,time\na.bin,Infinity\n', 'timesRow', /line 2.*Infinity/],
    ['NaN', 'file,time\na.bin,NaN\n', 'timesRow', /line 2.*NaN/],
    ['no file', 'file,time\n,1\n', 'timesRow', /line 2: found no name/],
    [
      'a file twice',
      'file,time\na.bin,1\nb.bin,2\n./a.bin,3\n',
      'timesTwice',
      /line 4: \.\/a\.bin stands there already in line 2/,
    ],
    ['a quote left open', 'file,time\n"a.bin,1\n', 'timesRow', /line 2: this is not CSV/],
  ])('%s is refused, with file and line', async (_name, text, code, part) => {
    const path = table(text);
    const error = await readTimes(path).catch((reason: unknown) => reason);
    expect(error).toBeInstanceOf(InputError);
    expect((error as InputError).code).toBe(`input.${code}`);
    expect((error as InputError).message).toContain(path);
    expect((error as InputError).message).toMatch(part);
    expect((error as InputError).remedy).toBeTruthy();
  });

  it('that is not there is an error of its own', async () => {
    await expect(readTimes(at('no.csv'))).rejects.toMatchObject({ code: 'input.notFound' });
  });
});
