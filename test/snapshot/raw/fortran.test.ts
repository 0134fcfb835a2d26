import { readFile } from 'node:fs/promises';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { beforeEach, describe, expect, it } from 'vitest';
import type { Particles } from '../../../src/snapshot/particles.ts';
import type { LayoutInput } from '../../../src/snapshot/raw/layout.ts';
import { checkLayout } from '../../../src/snapshot/raw/layout-check.ts';
import { readRaw } from '../../../src/snapshot/raw/read.ts';
import { writeRaw } from '../../../src/snapshot/raw/write.ts';
import {
  bodies,
  body,
  f64,
  i32,
  newFolder,
  put,
  putLayout,
  record,
  SEVEN,
  VECTORS,
} from './samples.ts';

let folder: string;
beforeEach(async () => {
  folder = await newFolder();
});

const N = 7;

function expectBodies(particles: Particles, count = N): void {
  expect(particles.count).toBe(count);
  for (let i = 0; i < count; i++) {
    expect(SEVEN.map((name) => particles[name][i])).toEqual(body(i));
  }
}

const HEADER = {
  headerBytes: 16,
  header: [
    { name: 'time', type: 'float64', offset: 0 },
    { name: 'count', type: 'int32', offset: 8 },
    { name: 'step', type: 'int32', offset: 12 },
  ],
  fields: VECTORS,
} satisfies Partial<LayoutInput>;

// Source: files that GNU Fortran 12.2.0 wrote (fixtures/fortran/make.sh), with its options
// -frecord-marker, -fconvert and -fmax-subrecord-length.
describe('files of a Fortran compiler', () => {
  const fixture = (name: string): string =>
    fileURLToPath(new URL(`../../../fixtures/fortran/${name}.dat`, import.meta.url));

  it.each([
    ['interleaved-little', 'little', 'fortran4', 'interleaved'],
    ['interleaved-big', 'big', 'fortran4', 'interleaved'],
    ['interleaved-words8', 'little', 'fortran8', 'interleaved'],
    ['interleaved-split', 'little', 'fortran4', 'interleaved'],
    ['interleaved-split-big', 'big', 'fortran4', 'interleaved'],
    ['bodies-little', 'little', 'fortran4', 'interleaved'],
    ['bodies-big', 'big', 'fortran4', 'interleaved'],
    ['bodies-words8', 'little', 'fortran8', 'interleaved'],
    ['columns-little', 'little', 'fortran4', 'columns'],
    ['columns-big', 'big', 'fortran4', 'columns'],
    ['columns-words8', 'little', 'fortran8', 'columns'],
    ['columns-split', 'little', 'fortran4', 'columns'],
    ['columns-split-big', 'big', 'fortran4', 'columns'],
  ] as const)(
    'reads %s, with the count from header or records',
    async (name, byteOrder, markers, arrangement) => {
      const layout = { byteOrder, markers, arrangement, ...HEADER };
      const particles = await readRaw(fixture(name), { layout: await putLayout(folder, layout) });
      expectBodies(particles);
      expect(particles.time).toBe(12.5);
      const uncounted = { ...layout, header: [] };
      expectBodies(await readRaw(fixture(name), { layout: await putLayout(folder, uncounted) }));
    },
  );

  it.each([
    ['columns-little', 'little', 'fortran4', undefined],
    ['columns-big', 'big', 'fortran4', undefined],
    ['columns-words8', 'little', 'fortran8', undefined],
    ['columns-split', 'little', 'fortran4', 100],
    ['columns-split-big', 'big', 'fortran4', 100],
  ] as const)('writes %s byte for byte', async (name, byteOrder, markers, subrecordBytes) => {
    const input = { byteOrder, markers, arrangement: 'columns' as const, ...HEADER };
    const particles = await readRaw(fixture(name), { layout: await putLayout(folder, input) });
    // The step of the header is not kept in particles: write it as skipped and put it back.
    const layout = checkLayout(
      { settlemark: 'layout/1', ...input, header: HEADER.header.slice(0, 2) },
      'test',
    );
    const path = join(folder, 'out.dat');
    await writeRaw(path, particles, layout, subrecordBytes === undefined ? {} : { subrecordBytes });
    const written = await readFile(path);
    const step = (markers === 'fortran8' ? 8 : 4) + 12;
    if (byteOrder === 'little') written.writeInt32LE(42, step);
    else written.writeInt32BE(42, step);
    expect(written.equals(await readFile(fixture(name)))).toBe(true);
  });
});

// Source: GNU Fortran manual, "File format of unformatted sequential files"; bytes by hand.
describe('records put together by hand', () => {
  const read = async (bytes: Buffer, layout: Partial<LayoutInput>): Promise<Particles> =>
    readRaw(await put(folder, 'a.dat', bytes), {
      layout: await putLayout(folder, { markers: 'fortran4', fields: VECTORS, ...layout }),
    });

  it('reads subrecords that cut numbers in two', async () => {
    const data = bodies('little', 2);
    const bytes = Buffer.concat([
      ...[i32('little', -3), data.subarray(0, 3), i32('little', 3)],
      ...[i32('little', -50), data.subarray(3, 53), i32('little', -50)],
      ...[i32('little', 59), data.subarray(53), i32('little', -59)],
    ]);
    expectBodies(await read(bytes, {}), 2);
  });

  it('reads a single body, which is one record either way', async () => {
    expectBodies(await read(record('big', bodies('big', 1)), { byteOrder: 'big' }), 1);
  });

  const damaged: [string, Buffer, Partial<LayoutInput>, string, string[]][] = [
    [
      'words that differ',
      Buffer.concat([i32('little', 112), bodies('little', 2), i32('little', 113)]),
      {},
      'input.markers',
      ['byte 0 says 112', 'byte 116, says 113', 'expected 112'],
    ],
    [
      'a last word that says "continued" without a subrecord before',
      Buffer.concat([i32('little', 112), bodies('little', 2), i32('little', -112)]),
      {},
      'input.markers',
      ['says -112; expected 112'],
    ],
    [
      'a file cut off',
      record('little', bodies('little', 2)).subarray(0, 100),
      {},
      'input.markers',
      ['byte 0 says 112 bytes', 'only 92 lie'],
    ],
    [
      'a file that ends after a subrecord that promises more',
      Buffer.concat([i32('little', -112), bodies('little', 2), i32('little', 112)]),
      {},
      'input.markers',
      ['expected a Fortran length word at byte 120', 'ends at byte 120'],
    ],
    [
      'headerBytes that end inside a record',
      Buffer.concat([record('little', f64('little', 1)), record('little', bodies('little', 2))]),
      { headerBytes: 6 },
      'input.markers',
      ['holds 8 bytes; expected 6', 'for instance 8'],
    ],
    [
      'no bodies after the header',
      record('little', f64('little', 1)),
      { headerBytes: 8 },
      'input.noParticles',
      ['ends with its header'],
    ],
    [
      'an empty record of bodies',
      Buffer.concat([record('little', f64('little', 1)), record('little')]),
      { headerBytes: 8 },
      'input.noParticles',
      ['the record of the bodies is empty'],
    ],
    [
      'a record that is no whole number of bodies',
      record('little', bodies('little', 2), Buffer.alloc(3)),
      {},
      'input.sizeMismatch',
      ['record of 115 bytes', 'multiple of 56'],
    ],
    [
      'a record more than the layout knows',
      Buffer.concat([record('little', bodies('little', 2)), record('little', f64('little', 1))]),
      {},
      'input.sizeMismatch',
      ['136 bytes', 'its end at byte 120'],
    ],
    [
      'blocks of different counts',
      Buffer.concat([
        record('little', f64('little', 1, 1)),
        record('little', f64('little', 1, 1, 1)),
      ]),
      { arrangement: 'columns' },
      'input.sizeMismatch',
      ['record of 24 bytes for position', 'expected 48: 2 bodies of 24 bytes'],
    ],
    [
      'a body whose words are wrong',
      Buffer.concat([
        record('little', f64('little', ...body(0))),
        Buffer.concat([i32('little', 56), f64('little', ...body(1)), i32('little', 55)]),
      ]),
      {},
      'input.markers',
      ['around body 1 say 56 and 55', 'expected 56'],
    ],
  ];
  it.each(damaged)('refuses %s', async (_, bytes, layout, code, parts) => {
    const error: unknown = await read(bytes, layout).catch((thrown: unknown) => thrown);
    expect(error).toMatchObject({ name: 'InputError', code, remedy: expect.any(String) as string });
    const { message, remedy } = error as { message: string; remedy: string };
    for (const part of ['a.dat', ...parts]) expect(`${message} | ${remedy}`).toContain(part);
  });

  it('says when a file has no markers, or the other ones', async () => {
    const plain = read(bodies('little', 2), {});
    await expect(plain).rejects.toMatchObject({
      code: 'input.sizeMismatch',
      message: expect.stringContaining('markers "none"') as string,
    });
    const big = read(record('big', bodies('big', 2)), {});
    await expect(big).rejects.toMatchObject({
      message: expect.stringContaining('byteOrder "big"') as string,
    });
  });
});
