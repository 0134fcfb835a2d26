/**
 * Files of writers that are not ours are read exactly. Sources: nodejs-polars 0.24.1 and
 * @uwdata/flechette 2.6.0, two implementations of the Apache Arrow columnar format; and apache-arrow 21.2.0.
 */
import { readFile, writeFile } from 'node:fs/promises';
import { join } from 'node:path';
import { tableFromArrays, tableToIPC } from 'apache-arrow';
import pl from 'nodejs-polars';
import { describe, expect, it } from 'vitest';
import { halfToNumber } from '../../../src/snapshot/arrow/convert.ts';
import { readArrow, readArrowStream } from '../../../src/snapshot/arrow/read.ts';
import {
  componentsOf,
  COUNT,
  EXPECTED,
  EXPECTED_COMPONENT,
  EXPECTED_ID,
  FIXTURES,
  fixtureNames,
  inPieces,
  idsOf,
  numbersOf,
  seededChoice,
  temporaryFolder,
} from './sample.ts';

const names = await fixtureNames();
const folder = await temporaryFolder();

describe('fixtures of other writers', () => {
  it('are there in both formats, plain, LZ4 and Zstandard', () => {
    expect(names).toHaveLength(10);
  });

  it.each(names)('%s gives every number, id and component', async (name) => {
    const path = join(FIXTURES, name);
    const particles = await readArrow(path, { optional: ['component'] });
    expect(particles.count).toBe(COUNT);
    expect(numbersOf(particles)).toEqual(EXPECTED);
    expect(particles.columns.id).toBeInstanceOf(BigInt64Array);
    expect(idsOf(particles)).toEqual(EXPECTED_ID);
    expect(componentsOf(particles)).toEqual(EXPECTED_COMPONENT);
    expect(particles.mass.buffer).toBeInstanceOf(SharedArrayBuffer);
    expect(particles.origin).toMatchObject({
      file: path,
      format: name.endsWith('.arrows') ? 'arrow-stream' : 'arrow-file',
    });
    expect(particles).toMatchObject({ time: null, units: null, gravity: null, softening: null });
  });

  it('keep the precision of the file, and say which', async () => {
    const bits = async (name: string) => {
      const { mass, x, vx, origin } = await readArrow(join(FIXTURES, name));
      const bytes = [mass, x, vx].map((column) => column.BYTES_PER_ELEMENT);
      return { bytes, mantissaBits: origin.mantissaBits };
    };
    expect(await bits('polars-lz4.arrow')).toEqual({ bytes: [8, 8, 8], mantissaBits: 53 });
    expect(await bits('flechette-vectors.arrow')).toEqual({ bytes: [8, 8, 4], mantissaBits: 24 });
    expect(await bits('flechette-half.arrow')).toEqual({ bytes: [4, 8, 4], mantissaBits: 11 });
  });

  it('leave optional columns on disk that are not asked for', async () => {
    const { columns, componentNames } = await readArrow(join(FIXTURES, 'polars-zstd.arrow'));
    expect(Object.keys(columns)).toEqual(['id']);
    expect(componentNames).toEqual([]);
  });

  it.each(names.filter((name) => name.endsWith('.arrows')))(
    '%s reads the same from a pipe, in pieces of any size',
    async (name) => {
      const bytes = await readFile(join(FIXTURES, name));
      for (const size of [1, 7, 4096]) {
        const options = { optional: ['component'] as const };
        const particles = await readArrowStream(inPieces(bytes, size), '-', options);
        expect(numbersOf(particles)).toEqual(EXPECTED);
        expect(idsOf(particles)).toEqual(EXPECTED_ID);
        expect(componentsOf(particles)).toEqual(EXPECTED_COMPONENT);
        expect(particles.mass.buffer).toBeInstanceOf(SharedArrayBuffer);
        expect(particles.origin.format).toBe('arrow-stream');
      }
    },
  );
});

describe('large files of polars', () => {
  // Long enough for several blocks of 4 MiB at most in an LZ4 frame, with their checksums, and for
  // several reads of 4 MiB a column.
  const count = 700_000;
  const choose = seededChoice(20);
  const noise = Float64Array.from({ length: count }, () => choose(2 ** 32) / 2 ** 32);
  const smooth = Float64Array.from({ length: count }, (_, i) => Math.floor(i / 1000));
  const single = Float32Array.from(noise);
  const frame = pl.DataFrame({
    mass: smooth,
    ...{ x: noise, y: smooth, z: noise },
    ...{ vx: single, vy: noise, vz: smooth },
    group: Int32Array.from(smooth),
  });

  it.each(['uncompressed', 'lz4', 'zstd'] as const)('%s, file and stream', async (compression) => {
    const file = join(folder, `${compression}.arrow`);
    const stream = join(folder, `${compression}.arrows`);
    frame.writeIPC(file, { compression });
    frame.writeIPCStream(stream, { compression });
    for (const path of [file, stream]) {
      const particles = await readArrow(path, { optional: ['group'] });
      const { mass, x, y, z, vx, vy, vz } = particles;
      const pairs = [
        [mass, smooth],
        [x, noise],
        [y, smooth],
        [z, noise],
        [vx, single],
        [vy, noise],
        [vz, smooth],
        [particles.columns.group as Int32Array, Int32Array.from(smooth)],
      ] as const;
      for (const [found, expected] of pairs) {
        expect(found.constructor).toBe(expected.constructor);
        expect(Buffer.compare(bytesOf(found), bytesOf(expected))).toBe(0);
      }
    }
  });
});

function bytesOf(values: ArrayBufferView<ArrayBufferLike>): Uint8Array {
  return new Uint8Array(values.buffer, values.byteOffset, values.byteLength);
}

// Source: IEEE 754-2019 binary16; examples from its definition: 1 + 2^-10 is the next above 1,
// 65504 the largest, 2^-14 the smallest normal, 2^-24 the smallest of all.
describe('halfToNumber', () => {
  it.each([
    [0x3c00, 1],
    [0x3c01, 1 + 2 ** -10],
    [0xc000, -2],
    [0x7bff, 65504],
    [0x0400, 2 ** -14],
    [0x0001, 2 ** -24],
    [0x0000, 0],
    [0x8000, -0],
    [0x7c00, Infinity],
    [0xfc00, -Infinity],
    [0x7e00, NaN],
  ])('%i', (bits, value) => {
    expect(halfToNumber(bits)).toBe(value);
  });
});

it.each(['file', 'stream'] as const)(
  'reads what apache-arrow writes as a %s, whose files have the schema in the footer alone',
  async (format) => {
    const table = tableFromArrays(
      Object.fromEntries(
        Object.entries(EXPECTED).map(([name, values]) => [name, Float64Array.from(values)]),
      ),
    );
    const bytes = tableToIPC(table, format);
    const path = join(folder, `apache-${format}.arrow`);
    await writeFile(path, bytes);
    expect(numbersOf(await readArrow(path))).toEqual(EXPECTED);
    // Without its batch's first bytes such a file is damaged, not empty.
    if (format === 'file') {
      await writeFile(
        path,
        bytes.map((byte, at) => (at >= 8 && at < 64 ? 0 : byte)),
      );
      await expect(readArrow(path)).rejects.toMatchObject({ name: 'InputError' });
    }
  },
);
