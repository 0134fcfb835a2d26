/** Large files, loaded by the workers of a crew together: what one thread gives, and its errors. */
import { appendFileSync, truncateSync } from 'node:fs';
import { mkdtemp, open, rm, truncate, writeFile } from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import * as fl from '@uwdata/flechette';
import { compressFrameSync } from 'lz4-napi';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import {
  makeModel,
  readSnapshot,
  startCrew,
  writeSnapshot,
  type Crew,
  type Particles,
  type ReadOptions,
} from '../../dist/index.js';
import { writeArrow } from '../../dist/snapshot/arrow/write.js';

// Workers start only from built code, so the built library is what is tested.
const crews: Crew[] = [1, 2, 3].map((threads) => startCrew(threads));
/** Enough for files above 8 MiB, which are loaded together. */
const COUNT = 200_000;
const NAMES = ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'] as const;
let folder = '';
let made: Particles;

beforeAll(async () => {
  folder = await mkdtemp(join(tmpdir(), 'settlemark-together-'));
  made = await makeModel({ model: 'plummer', count: COUNT, seed: 7 });
});
afterAll(async () => {
  await Promise.all(crews.map((crew) => crew.close()));
  await rm(folder, { recursive: true });
});

async function put(name: string, bytes: Uint8Array): Promise<string> {
  const path = join(folder, name);
  await writeFile(path, bytes);
  return path;
}

async function putLayout(name: string, layout: object): Promise<ReadOptions> {
  const text = JSON.stringify({ settlemark: 'layout/1', ...layout });
  return { layout: await put(`${name}.json`, Buffer.from(text)) };
}

/** Bytes of all columns, and everything else as it is. */
function contentOf({ columns, ...particles }: Particles): unknown {
  const bytes = (value: unknown): unknown =>
    ArrayBuffer.isView(value)
      ? [
          value.constructor.name,
          Buffer.from(value.buffer, value.byteOffset, value.byteLength).toString('latin1'),
        ]
      : value;
  const all = { ...particles, ...columns };
  return Object.fromEntries(Object.entries(all).map(([name, value]) => [name, bytes(value)]));
}

async function expectSame(path: string, options: ReadOptions = {}): Promise<Particles> {
  const alone = await readSnapshot(path, options);
  const content = contentOf(alone);
  for (const crew of crews) {
    const isSame = isEqual(contentOf(await readSnapshot(path, options, crew)), content);
    expect([crew.threads, isSame]).toEqual([crew.threads, true]);
  }
  return alone;
}

// Not toEqual on the columns: what it would print of a difference is megabytes.
const isEqual = (a: unknown, b: unknown): boolean => JSON.stringify(a) === JSON.stringify(b);

describe('the same particles for any number of threads', () => {
  it('raw, in columns of components', async () => {
    const columns = NAMES.map((name) => made[name].subarray(0, name === 'mass' ? 90_000 : COUNT));
    const bytes = columns.map(({ buffer, byteOffset, byteLength }) =>
      Buffer.from(buffer, byteOffset, byteLength),
    );
    const path = await put('components.bin', Buffer.concat(bytes));
    const options = await putLayout('components', {
      arrangement: 'columns',
      components: [
        { name: 'gas', count: 90_000 },
        { name: 'dark', count: COUNT - 90_000, mass: 0.25 },
      ],
      fields: NAMES.map((name) => ({
        name,
        type: 'float64',
        ...(name === 'mass' && { components: ['gas'] }),
      })),
    });
    const alone = await expectSame(path, { ...options, optional: ['component'] });
    expect(Array.from(alone.vz)).toEqual(Array.from(made.vz));
    expect([alone.mass[89_999], alone.mass[90_000]]).toEqual([made.mass[89_999], 0.25]);
  });

  it('raw, interleaved', async () => {
    const path = join(folder, 'inter.bin');
    await writeSnapshot(path, made, 'raw');
    const alone = await expectSame(path);
    for (const name of NAMES) {
      expect(Buffer.from(alone[name].buffer).equals(Buffer.from(made[name].buffer))).toBe(true);
    }
  });

  it('raw, in columns of float32 in the other byte order, with identifiers after a header', async () => {
    const columns = NAMES.map((name) => Buffer.from(Float32Array.from(made[name]).buffer).swap32());
    const ids = Buffer.alloc(8 * COUNT);
    for (let i = 0; i < COUNT; i++) ids.writeBigInt64BE(2n ** 60n - BigInt(i), 8 * i);
    const path = await put('columns.bin', Buffer.concat([Buffer.alloc(12), ...columns, ids]));
    const options = await putLayout('columns', {
      headerBytes: 12,
      byteOrder: 'big',
      arrangement: 'columns',
      fields: [...NAMES.map((name) => ({ name, type: 'float32' })), { name: 'id', type: 'int64' }],
    });
    const { columns: found, x } = await expectSame(path, options);
    expect(found.id?.[COUNT - 1]).toBe(2n ** 60n - BigInt(COUNT - 1));
    expect(x[COUNT - 1]).toBe(Math.fround(made.x[COUNT - 1]));
  });

  it('raw, with components, whose codes are met in order', async () => {
    const record = new Float64Array(8 * COUNT);
    for (let i = 0; i < COUNT; i++) {
      NAMES.forEach((name, lane) => (record[8 * i + lane] = made[name][i]));
      record[8 * i + 7] = (i * 7919) % 5;
    }
    const path = await put('components.bin', Buffer.from(record.buffer));
    const options = await putLayout('components', {
      fields: [...NAMES, 'component'].map((name) => ({ name, type: 'float64' })),
    });
    const { componentNames } = await expectSame(path, { ...options, optional: ['component'] });
    expect(componentNames).toEqual(['0', '1', '2', '3', '4']);
  });

  it.each([2_000, 50_000, COUNT])('Arrow in batches of %i', async (rowsPerBatch) => {
    for (const format of ['file', 'stream'] as const) {
      const path = join(folder, `plain-${rowsPerBatch}.arrow`);
      await writeArrow(path, made, { rowsPerBatch, format });
      const alone = await expectSame(path);
      expect(alone.vz[COUNT - 1]).toBe(made.vz[COUNT - 1]);
    }
  });

  it('Arrow with vectors and components in LZ4', async () => {
    const rows = Array.from({ length: COUNT }, (_, i) => i);
    const vector = (names: readonly (typeof NAMES)[number][]) =>
      rows.map((i) => names.map((name) => made[name][i]));
    const table = fl.tableFromArrays(
      {
        mass: Float64Array.from(made.mass),
        position: vector(['x', 'y', 'z']),
        velocity: vector(['vx', 'vy', 'vz']),
        component: rows.map((i) => (i % 3 === 0 ? 'disk' : 'halo')),
      },
      {
        types: {
          mass: fl.float64(),
          position: fl.fixedSizeList(fl.float64(), 3),
          velocity: fl.fixedSizeList(fl.float32(), 3),
          component: fl.dictionary(fl.utf8(), fl.int8()),
        },
        maxBatchRows: 60_000,
      },
    );
    fl.setCompressionCodec(fl.CompressionType.LZ4_FRAME, {
      encode: (bytes) => compressFrameSync(Buffer.from(bytes)),
      decode: (bytes) => bytes, // not used here
    });
    for (const codec of [null, fl.CompressionType.LZ4_FRAME] as const) {
      const bytes = fl.tableToIPC(table, { format: 'file', codec });
      const path = await put(`vectors-${codec}.arrow`, bytes!);
      const { z, columns } = await expectSame(path, { optional: ['component'] });
      expect(z[COUNT - 1]).toBe(made.z[COUNT - 1]);
      expect(columns.component?.[3]).toBe(columns.component?.[0]);
    }
  });
});

describe('the same errors', () => {
  async function expectSameError(
    path: string,
    options: ReadOptions,
    code: string,
  ): Promise<string> {
    const errorOf = async (crew?: Crew) => {
      const error: unknown = await readSnapshot(path, options, crew).catch((e: unknown) => e);
      expect(error).toMatchObject({ name: 'InputError', code });
      const { message, remedy } = error as { message: string; remedy: string };
      return { message, remedy };
    };
    const alone = await errorOf();
    for (const crew of [...crews, ...crews]) expect(await errorOf(crew)).toEqual(alone);
    return alone.message;
  }

  it('of the first of several damaged records, and of a file cut off', async () => {
    const stride = 64;
    const bytes = Buffer.alloc(stride * COUNT);
    for (let i = 0; i < COUNT; i++) {
      bytes.writeInt32LE(56, stride * i);
      bytes.writeInt32LE(56, stride * i + 60);
      NAMES.forEach((name, lane) => bytes.writeDoubleLE(made[name][i], stride * i + 4 + 8 * lane));
    }
    const options = await putLayout('records', {
      markers: 'fortran4',
      fields: NAMES.map((name) => ({ name, type: 'float64' })),
    });
    await expectSame(await put('records.dat', bytes), options);
    for (const i of [180_000, 70_001, 140_000]) bytes.writeInt32LE(57, stride * i);
    const path = await put('records.dat', bytes);
    const message = await expectSameError(path, options, 'input.markers');
    expect(message).toContain('body 70001 say 57');
    await truncate(path, stride * COUNT - 10);
    await expectSameError(path, options, 'input.sizeMismatch');
  });

  it('of a damaged buffer, and of a value that is not finite', async () => {
    const path = join(folder, 'damaged.arrow');
    await writeArrow(path, made, { rowsPerBatch: 50_000 });
    const file = await open(path, 'r+');
    const nan = Buffer.alloc(8);
    nan.writeDoubleLE(NaN);
    await file.write(nan, 0, 8, 4_000_000);
    await file.close();
    await expectSameError(path, {}, 'input.notFinite');
    await truncate(path, 9_000_000);
    await expectSameError(path, {}, 'input.arrowCut');
  });

  it('of a file that grows or shrinks while it is read', async () => {
    for (const crew of crews) {
      for (const change of [
        (path: string) => appendFileSync(path, 'x'),
        (path: string) => truncateSync(path, 999),
      ]) {
        const path = join(folder, 'changing.bin');
        await writeSnapshot(path, made, 'raw');
        let changed = false;
        const onProgress = (): void => {
          if (!changed) change(path);
          changed = true;
        };
        const reading = readSnapshot(path, { onProgress }, crew).then(() => 'read');
        await expect(reading).rejects.toMatchObject({ code: 'input.changed' });
      }
    }
  });
});

it('tells progress up to the last byte, and stops when it is told to', async () => {
  const raw = join(folder, 'progress.bin');
  await writeSnapshot(raw, made, 'raw');
  const arrow = join(folder, 'progress.arrow');
  await writeArrow(arrow, made);
  for (const path of [raw, arrow]) {
    for (const crew of crews) {
      const told: [number, number][] = [];
      const onProgress = (done: number, total: number): void => void told.push([done, total]);
      await readSnapshot(path, { onProgress }, crew);
      expect(told.at(-1)).toEqual([56 * COUNT, 56 * COUNT]);
      const control = new AbortController();
      const stopped = readSnapshot(
        path,
        { signal: control.signal, onProgress: () => control.abort() },
        crew,
      );
      await expect(stopped).rejects.toMatchObject({ code: 'interrupted' });
    }
  }
});

it('parts of a snapshot are loaded by all workers to what one thread gives, in their order', async () => {
  const each = 90_000;
  const vector = (name: string) => ({ name, type: 'float64', width: 3 });
  const fields = [{ name: 'mass', type: 'float64' }, vector('position'), vector('velocity')];
  const read = await putLayout('parts', { fields, parts: 'part_{part}.bin' });
  const paths: string[] = [];
  for (const k of [0, 1]) {
    const values = Float64Array.from({ length: 7 * each }, (_, i) => ((i * 7 + k) % 1013) / 8);
    paths.push(await put(`part_${k}.bin`, new Uint8Array(values.buffer)));
  }
  let told = 0;
  const onProgress = (done: number, all: number) => (told = done / all);
  const [alone, ...together] = await Promise.all(
    crews.map((crew) => readSnapshot(paths[1], { ...read, onProgress }, crew)),
  );
  expect(alone.count).toBe(2 * each);
  // The first mass of the second file follows the last of the first.
  expect(alone.mass[each]).toBe(1 / 8);
  for (const particles of together) expect(contentOf(particles)).toEqual(contentOf(alone));
  expect(told).toBe(1);
  // What is wrong with the second file is told as of that file.
  await truncate(paths[1], 56 * each - 1);
  for (const crew of crews) {
    await expect(readSnapshot(paths[0], read, crew)).rejects.toMatchObject({
      code: 'input.partialRecord',
      message: expect.stringContaining('part_1.bin') as string,
    });
  }
});
