import { readFile, stat } from 'node:fs/promises';
import { join } from 'node:path';
import { describe, expect, it } from 'vitest';
import { describeArrowStream } from '../../../src/snapshot/arrow/describe.ts';
import { describeArrow, readArrow } from '../../../src/snapshot/arrow/read.ts';
import { writeArrow } from '../../../src/snapshot/arrow/write.ts';
import { allocateColumn } from '../../../src/snapshot/particles.ts';
import { UNIT_SYSTEMS } from '../../../src/snapshot/units.ts';
import { COUNT, expectInputError, FIXTURES, inPieces, temporaryFolder } from './sample.ts';

const folder = await temporaryFolder();

describe('describeArrow', () => {
  it('tells columns, types and ranges (closed forms of fixtures/arrow/make.js)', async () => {
    const path = join(FIXTURES, 'flechette-vectors.arrow');
    const found = await describeArrow(path);
    expect(found).toMatchObject({
      file: path,
      format: 'arrow-file',
      bytes: (await stat(path)).size,
      count: COUNT,
      time: null,
      byteOrder: 'little',
      structure: 'Arrow IPC file, 3 batches, uncompressed',
      remarks: [],
    });
    const column = (name: string) => found.columns.find((entry) => entry.name === name);
    expect(found.columns).toHaveLength(5);
    expect(column('mass')).toMatchObject({
      field: 'mass',
      type: 'Float64',
      width: 1,
      smallest: 1 / 64,
      largest: 37 / 64,
    });
    expect(column('position')).toMatchObject({ field: 'position', width: 3, smallest: -9 });
    expect(column('position')).toMatchObject({ largest: 81 });
    expect(column('component')).toMatchObject({ smallest: null, type: 'Dictionary<Int8, Utf8>' });
  });

  it.each([
    ['polars-lz4.arrow', 'Arrow IPC file, 1 batch, LZ4'],
    ['polars-zstd.arrows', 'Arrow IPC stream, 1 batch, Zstandard'],
  ])('%s', async (name, structure) => {
    const found = await describeArrow(join(FIXTURES, name));
    expect(found).toMatchObject({ structure, count: COUNT });
    expect(found.columns[3]).toMatchObject({ name: 'z', smallest: 0, largest: 81 });
  });

  it('tells the same of a pipe', async () => {
    const path = join(FIXTURES, 'polars-zstd.arrows');
    const piped = await describeArrowStream(inPieces(await readFile(path), 100), '-');
    expect(piped).toEqual({ ...(await describeArrow(path)), file: '-', bytes: null });
  });

  it('looks at both ends of a large batch, and no further', async () => {
    const count = 20_000;
    const values = allocateColumn(count);
    values[100] = -1;
    values[count - 100] = 2;
    values[count / 2] = 1000; // farther than 4096 rows from both ends
    values[count - 1] = NaN;
    const sample = await readArrow(join(FIXTURES, 'polars-lz4.arrow'));
    const [mass, x, y, z, vx, vy, vz] = Array<typeof values>(7).fill(values);
    const path = join(folder, 'large.arrow');
    await writeArrow(path, {
      ...sample,
      ...{ count, mass, x, y, z, vx, vy, vz, columns: {} },
      ...{ time: 2.5, gravity: 1, softening: 0.01, units: UNIT_SYSTEMS.henon },
    });
    const found = await describeArrow(path);
    expect(found).toMatchObject({ count, time: 2.5, gravity: 1, softening: 0.01, units: 'henon' });
    expect(found.columns[1]).toMatchObject({ name: 'x', smallest: -1, largest: 2 });
    expect(found.remarks).toHaveLength(7);
    expect(found.remarks[0]).toMatchObject({ code: 'notFinite' });
    expect(found.remarks[0].text).toMatch(/"mass" has 1 value/);
  });

  it('tells what is missing instead of refusing it, and refuses a wrong --columns', async () => {
    const path = join(FIXTURES, 'polars-lz4.arrow');
    const found = await describeArrow(path, { columns: { vy: 'x', vz: 'y' } });
    expect(found.remarks).toEqual([
      expect.objectContaining({ code: 'missingColumns', text: 'No column for x, y.' }),
    ]);
    await expectInputError(
      describeArrow(path, { columns: { mass: 'mas' } }),
      'input.unknownColumn',
      /"mas"/,
      /mass/,
    );
  });
});
