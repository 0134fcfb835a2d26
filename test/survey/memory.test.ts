/** The memory a measurement will take is asked for before anything is read. */
import { mkdtemp, open, rm } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, expect, it } from 'vitest';
import { memoryNeeded, requireMemory, requireMemoryToMake } from '../../src/survey/memory.ts';
import { describeSnapshot } from '../../src/snapshot/read.ts';

const COUNT = 6_000_000;
const alone = (file: string) => ({ file, parts: null });
let folder = '';
let large = '';

beforeAll(async () => {
  folder = await mkdtemp(join(tmpdir(), 'settlemark-memory-'));
  large = join(folder, 'large.bin');
  // A file with a hole takes no room on disk: 336 MB by its length.
  const handle = await open(large, 'w');
  await handle.truncate(COUNT * 56);
  await handle.close();
});

afterAll(() => rm(folder, { recursive: true }));

it('refuses what will not fit, and says how much it takes and what is free', async () => {
  await expect(requireMemory(alone(large), {}, false, 0, 1e9)).rejects.toMatchObject({
    code: 'input.tooLarge',
    message: expect.stringMatching(
      /large\.bin holds 6000000 bodies, .* 1\.\d+ GB .* 1\.00 GB are free/,
    ) as string,
    remedy: expect.stringContaining('memory') as string,
  });
});

it('lets through what fits, and leaves small and missing files to the reader', async () => {
  await expect(requireMemory(alone(large), {}, false, 0, 2e9)).resolves.toBeUndefined();
  await expect(
    requireMemory(alone(join(folder, 'missing.bin')), {}, false, 0, 1),
  ).resolves.toBeUndefined();
  await expect(requireMemory(alone('-'), {}, false, 0, 1)).resolves.toBeUndefined();
});

it('asks for the columns in their precision, and more with softening', async () => {
  const description = await describeSnapshot(large);
  const plain = memoryNeeded(description, false);
  expect(memoryNeeded(description, true) - plain).toBe(16 * COUNT);
  expect(memoryNeeded(description, false, 96) - plain).toBe(96 * COUNT);
  // 56 bytes of columns a body, and never less than the tree's own copy on top of them.
  expect(plain).toBeGreaterThan(COUNT * (56 + 36));
  const single = description.columns.map((column) => ({ ...column, type: 'float32' }));
  expect(plain - memoryNeeded({ ...description, columns: single }, false)).toBe(28 * COUNT);
});

it('refuses to make what will not fit', () => {
  expect(() => {
    requireMemoryToMake(1e8, 66, 6e9);
  }).toThrow(
    expect.objectContaining({
      code: 'usage.modelOption',
      message: expect.stringMatching(
        /--count.* 100000000 bodies, .* 6\.76 GB .* 6\.00 GB are free/,
      ) as string,
    }),
  );
  requireMemoryToMake(1e8, 66, 7e9);
  requireMemoryToMake(1e6, 66, 1);
});
