import { mkdir, mkdtemp, writeFile } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { beforeEach, describe, expect, it } from 'vitest';
import { expandPaths, inNaturalOrder } from '../../src/snapshot/series.ts';

let folder: string;
beforeEach(async () => {
  folder = await mkdtemp(join(tmpdir(), 'series-'));
});

async function touch(...names: string[]): Promise<void> {
  for (const name of names) await writeFile(join(folder, name), 'x');
}

describe('expandPaths', () => {
  it('takes the snapshots of a folder in the natural order of names', async () => {
    await touch('run_10.bin', 'run_9.bin', 'run_9b.bin', 'run_100.arrow', 'RUN_1.bin', '007');
    await touch('.run_1.bin', 'layout.json', 'times.CSV', 'out.ndjson', 'notes.md', 'log.txt');
    await mkdir(join(folder, 'sub'));
    await writeFile(join(folder, 'sub', 'run_1.bin'), 'x');
    expect(await expandPaths([folder])).toEqual(
      ['007', 'RUN_1.bin', 'run_9.bin', 'run_9b.bin', 'run_10.bin', 'run_100.arrow'].map((name) =>
        join(folder, name),
      ),
    );
  });

  it('keeps a file of any name that is named itself, once, and standard input', async () => {
    await touch('b10.txt', 'b9.txt');
    const [ten, nine] = [join(folder, 'b10.txt'), join(folder, 'b9.txt')];
    expect(await expandPaths([ten, nine, ten])).toEqual([nine, ten]);
    expect(await expandPaths(['-'])).toEqual(['-']);
    expect(await expandPaths([])).toEqual([]);
  });

  it('tells a path that is not there and a folder without snapshots', async () => {
    await expect(expandPaths([join(folder, 'no')])).rejects.toMatchObject({
      code: 'input.notFound',
      message: expect.stringContaining(join(folder, 'no')) as string,
    });
    await touch('layout.json');
    await expect(expandPaths([folder])).rejects.toMatchObject({
      name: 'UnanswerableError',
      code: 'unanswerable.emptySeries',
      message: expect.stringMatching(/holds no snapshots.*\.json/) as string,
      remedy: expect.any(String) as string,
    });
  });
});

it('gives one order for names that a collation takes for equal', () => {
  // "a01" and "a1" are the same number; whichever comes first, the order must be the same.
  expect(inNaturalOrder(['a1', 'a01'])).toEqual(inNaturalOrder(['a01', 'a1']));
});
