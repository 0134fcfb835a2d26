import { writeFile } from 'node:fs/promises';
import { join } from 'node:path';
import { beforeEach, describe, expect, it } from 'vitest';
import { writeArrow } from '../../src/snapshot/arrow/write.ts';
import { readRaw } from '../../src/snapshot/raw/read.ts';
import { describeSnapshot, readSnapshot } from '../../src/snapshot/read.ts';
import { bodies, f32, f64, i32, newFolder, put, putLayout, VECTORS } from './raw/samples.ts';

let folder: string;
beforeEach(async () => {
  folder = await newFolder();
});

describe('readSnapshot', () => {
  it('reads raw and Arrow alike, by what is in the file', async () => {
    const raw = await put(folder, 'a.bin', bodies('little', 6));
    const made = await readRaw(raw, {});
    await writeArrow(join(folder, 'b.bin'), made);
    const arrow = await readSnapshot(join(folder, 'b.bin'));
    expect(arrow.origin.format).toBe('arrow-file');
    expect([...arrow.vy]).toEqual([...made.vy]);
    expect((await readSnapshot(raw)).origin.format).toBe('raw');
    expect((await describeSnapshot(join(folder, 'b.bin'))).format).toBe('arrow-file');
    expect((await describeSnapshot(raw)).count).toBe(6);
  });

  it('reads raw what has a layout named, even if it begins like an Arrow stream', async () => {
    const bytes = Buffer.concat([i32('little', -1, 8), bodies('little', 2)]);
    const path = await put(folder, 'a.bin', bytes);
    const layout = await putLayout(folder, { headerBytes: 8, fields: VECTORS });
    expect((await readSnapshot(path, { layout })).count).toBe(2);
  });

  it('screens the values', async () => {
    const path = await put(folder, 'a.bin', f64('little', -1, 1, 2, 3, 4, 5, 6));
    await expect(readSnapshot(path)).rejects.toMatchObject({ code: 'input.negativeMass' });
  });

  it('takes no layout with standard input', async () => {
    await expect(readSnapshot('-', { layout: 'l.json' })).rejects.toMatchObject({
      name: 'UsageError',
      code: 'usage.standardInput',
      message: expect.stringContaining('l.json') as string,
    });
  });

  it('tells a file that is not there', async () => {
    await expect(readSnapshot(join(folder, 'no.bin'))).rejects.toMatchObject({
      code: 'input.notFound',
    });
  });
});

describe('describeSnapshot of a raw file', () => {
  it('tells columns, where they lie, their ranges and what the file states', async () => {
    const rows = [0, 1, 2].map((i) =>
      Buffer.concat([
        f64('big', 0.5, i, -i, 2 * i, 1, NaN, i),
        f32('big', 0.25 * i),
        i32('big', 7 - i),
      ]),
    );
    const path = await put(folder, 'a.bin', Buffer.concat([f64('big', 4.5), ...rows]));
    const layout = await putLayout(folder, {
      byteOrder: 'big',
      headerBytes: 8,
      header: [{ name: 'time', type: 'float64', offset: 0 }],
      fields: [...VECTORS, { name: 'heat', type: 'float32' }, { name: 'id', type: 'int32' }],
      constants: { gravity: 2, softening: 0.125 },
      units: 'natural',
    });
    const description = await describeSnapshot(path, { layout });
    expect(description).toMatchObject({
      file: path,
      format: 'raw',
      bytes: 8 + 3 * 64,
      count: 3,
      time: 4.5,
      units: 'natural',
      gravity: 2,
      softening: 0.125,
      byteOrder: 'big',
    });
    expect(description.structure).toContain('big-endian, interleaved, header of 8 bytes');
    const common = { stride: 64 };
    expect(description.columns).toEqual([
      {
        ...common,
        name: 'mass',
        field: 'mass',
        type: 'float64',
        width: 1,
        offset: 8,
        smallest: 0.5,
        largest: 0.5,
      },
      {
        ...common,
        name: 'position',
        field: 'position',
        type: 'float64',
        width: 3,
        offset: 16,
        smallest: -2,
        largest: 4,
      },
      {
        ...common,
        name: 'velocity',
        field: 'velocity',
        type: 'float64',
        width: 3,
        offset: 40,
        smallest: 0,
        largest: 2,
      },
      {
        ...common,
        name: 'heat',
        field: null,
        type: 'float32',
        width: 1,
        offset: 64,
        smallest: 0,
        largest: 0.5,
      },
      {
        ...common,
        name: 'id',
        field: 'id',
        type: 'int32',
        width: 1,
        offset: 68,
        smallest: 5,
        largest: 7,
      },
    ]);
    expect(description.remarks).toMatchObject([
      { code: 'input.notFinite', text: expect.stringContaining('vy of body 0') as string },
    ]);
  });

  it('looks at the first and last bodies only, and numbers them as in the file', async () => {
    const n = 100_000;
    const values = new Float64Array(7 * n).map((_, k) => Math.sin(k) + 2);
    values[7 * 50_000] = NaN; // in the middle: not looked at
    values[7 * (n - 2)] = -3;
    const path = await put(folder, 'a.data', Buffer.from(values.buffer));
    let bytes = 0;
    const description = await describeSnapshot(path, { onProgress: (_, all) => (bytes = all) });
    expect(bytes).toBe(2 * 4096 * 56);
    expect(description.columns[0].smallest).toBe(-3);
    expect(description.remarks).toMatchObject([
      {
        code: 'input.negativeMass',
        text: expect.stringContaining(`mass of body ${n - 2} is -3`) as string,
      },
    ]);
  });

  it('remarks on another byte order and on columns that are missing', async () => {
    const values = new Float64Array(7 * 500).map((_, k) => Math.sin(k) + 1.5);
    const swapped = await put(folder, 'a.data', Buffer.from(values.buffer).swap64());
    expect((await describeSnapshot(swapped)).remarks).toMatchObject([
      { code: 'input.misread', text: expect.stringContaining('byte order') as string },
    ]);
    const layout = await putLayout(folder, { fields: [{ skip: 8 }, ...VECTORS.slice(1)] });
    expect((await describeSnapshot(swapped, { layout })).remarks).toMatchObject([
      { code: 'input.missingColumn', text: expect.stringContaining('mass') as string },
    ]);
  });

  it('refuses a length that does not fit, as reading does', async () => {
    const path = join(folder, 'a.data');
    await writeFile(path, Buffer.alloc(100));
    await expect(describeSnapshot(path)).rejects.toMatchObject({ code: 'input.partialRecord' });
  });
});
