import { open } from 'node:fs/promises';
import { join } from 'node:path';
import { beforeEach, expect, it, vi } from 'vitest';
import { describeRaw } from '../../../src/snapshot/raw/describe.ts';
import { readRaw } from '../../../src/snapshot/raw/read.ts';
import { body, f64, i32, newFolder, putLayout, VECTORS } from './samples.ts';

// The file of 3 GiB is sparse: it takes some kilobytes on disk.
let folder: string;
beforeEach(async () => {
  folder = await newFolder();
});

async function sparse(name: string, size: number, pieces: [at: number, bytes: Buffer][]) {
  const path = join(folder, name);
  const handle = await open(path, 'w');
  try {
    await handle.truncate(size);
    for (const [at, bytes] of pieces) await handle.write(bytes, 0, bytes.length, at);
  } finally {
    await handle.close();
  }
  return path;
}

// Source: GNU Fortran manual, option -fmax-subrecord-length: at most and by default 2147483639.
it('describes a record of 3 GiB in two subrecords', async () => {
  const count = 60_000_000;
  const first = 2147483639;
  const second = 56 * count - first;
  const last = f64('big', ...body(3));
  const path = await sparse('swarm.dat', 56 * count + 16, [
    [0, i32('big', -first)],
    [4, f64('big', ...body(0))],
    [4 + first, i32('big', first)],
    [8 + first, i32('big', second)],
    [12 + first + second - 56, last],
    [12 + first + second, i32('big', -second)],
  ]);
  const layout = await putLayout(folder, {
    byteOrder: 'big',
    markers: 'fortran4',
    fields: VECTORS,
  });
  const description = await describeRaw(path, { layout });
  expect(description.count).toBe(count);
  const [mass, position, velocity] = description.columns;
  expect([mass.smallest, mass.largest]).toEqual([0, body(3)[0]]);
  expect([position.smallest, position.largest]).toEqual([body(3)[2], body(3)[3]]);
  expect([velocity.smallest, velocity.largest]).toEqual([body(3)[6], body(0)[6]]);
});

it('says that memory does not suffice', async () => {
  const path = await sparse('swarm.data', 56 * 1000, []);
  // What engines throw when they cannot allocate (ECMA-262, CreateSharedByteDataBlock).
  vi.stubGlobal(
    'SharedArrayBuffer',
    class {
      constructor() {
        throw new RangeError('Array buffer allocation failed');
      }
    },
  );
  try {
    await expect(readRaw(path, {})).rejects.toMatchObject({
      code: 'input.tooLarge',
      message: expect.stringContaining('1000 bodies') as string,
      remedy: expect.any(String) as string,
    });
  } finally {
    vi.unstubAllGlobals();
  }
});
