/** Many snapshots over workers: order, errors, and the same figures as one by one. */
import { mkdtemp, rm, writeFile } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, expect, it } from 'vitest';
import {
  makeModel,
  measureFile,
  measureFiles,
  startCrew,
  writeSnapshot,
  type FileOutcome,
  type MeasureRecord,
} from '../../dist/index.js';

// Workers start only from built code, so the built library is what is tested.
const crew = startCrew(2);
let folder = '';
let paths: string[] = [];

beforeAll(async () => {
  folder = await mkdtemp(join(tmpdir(), 'settlemark-many-'));
  paths = await Promise.all(
    Array.from({ length: 40 }, async (_, k) => {
      const path = join(folder, `s${k}.bin`);
      // Sizes that are measured directly and by the tree.
      const count = k % 10 === 3 ? 6000 : 50 + k;
      const particles = await makeModel({ model: 'plummer', count, seed: k + 1, masses: 'equal' });
      await writeSnapshot(path, particles, 'raw');
      return path;
    }),
  );
});

afterAll(async () => {
  await crew.close();
  await rm(folder, { recursive: true });
});

async function outcomesOf(files: readonly string[], threads: 1 | 2): Promise<FileOutcome[]> {
  const workers = threads === 2 ? crew : startCrew(1);
  const list: FileOutcome[] = [];
  for await (const outcome of await measureFiles(files, {}, workers)) list.push(outcome);
  return list;
}

/** The record without what may differ: where the time went and how many threads there were. */
function figures(record: MeasureRecord | null): unknown {
  if (record === null) return null;
  const { engine, ...rest } = record;
  return { ...rest, engine: { ...engine, seconds: null, threads: null } };
}

it('keeps the order of the paths and the bits of every figure', async () => {
  const spread = await outcomesOf(paths, 2);
  expect(spread.map(({ file }) => file)).toEqual(paths);
  const alone = await outcomesOf(paths, 1);
  expect(spread.map(({ record }) => figures(record))).toEqual(
    alone.map(({ record }) => figures(record)),
  );
  const one = await measureFile(paths[3], {}, crew);
  expect(figures(spread[3].record)).toEqual(figures(one));
});

it('gives a bad file its error in its place, as if it were read alone', async () => {
  const cut = join(folder, 'cut.bin');
  await writeFile(cut, Buffer.alloc(57));
  const files = [paths[0], cut, join(folder, 'missing.bin'), paths[1]];
  for (const threads of [1, 2] as const) {
    const outcomes = await outcomesOf(files, threads);
    expect(outcomes.map(({ error }) => error?.code ?? null)).toEqual([
      null,
      'input.partialRecord',
      'input.notFound',
      null,
    ]);
    expect(outcomes[1].error?.message).toContain(cut);
    expect(outcomes[1].error?.name).toBe('InputError');
    expect(outcomes[1].error?.remedy).toMatch(/--layout/);
  }
});
