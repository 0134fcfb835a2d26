/** Many snapshots over workers: order, errors, and the same figures as one by one. */
import { mkdtemp, readFile, rm, writeFile } from 'node:fs/promises';
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

it('says the same of a bad file whoever reads it', async () => {
  const put = async (name: string, bytes: Uint8Array | string) => {
    const path = join(folder, name);
    await writeFile(path, bytes);
    return path;
  };
  const nan = Buffer.alloc(112, 1);
  nan.writeDoubleLE(NaN, 64);
  const whole = await readFile(join(import.meta.dirname, '../../fixtures/arrow/polars-lz4.arrow'));
  const bad = [
    await put('empty.bin', ''),
    await put('nan.bin', nan),
    await put('cut.arrow', whole.subarray(0, 900)),
    await put('broken.arrow', Buffer.from(whole).fill(7, 300, 700)),
    await put('none.arrows', 'no stream'),
    await put('zeros.bin', Buffer.alloc(56 * 1000)),
  ];
  const errorsOf = async (threads: 1 | 2) =>
    (await outcomesOf([paths[0], ...bad], threads)).map(({ error }) =>
      error === null ? null : [error.name, error.code, error.message, error.remedy],
    );
  const alone = await errorsOf(1);
  expect(alone.filter((error) => error !== null)).toHaveLength(bad.length);
  expect(await errorsOf(2)).toEqual(alone);
});

it('ends well when nobody wants the rest', async () => {
  const many = Array.from({ length: 5 }, () => paths).flat();
  for await (const { file } of await measureFiles(many, {}, crew)) {
    expect(file).toBe(paths[0]);
    break;
  }
  const again = await outcomesOf(paths.slice(0, 3), 2);
  expect(again.map(({ error }) => error)).toEqual([null, null, null]);
});
