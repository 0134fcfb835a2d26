/** Which columns are taken, and what is said when they cannot be. Tables are written by flechette. */
import { chmod, mkdir, readFile, utimes, writeFile } from 'node:fs/promises';
import { join } from 'node:path';
import * as fl from '@uwdata/flechette';
import { Schema as FlatbufferSchema } from 'apache-arrow/fb/schema';
import pl from 'nodejs-polars';
import { describe, expect, it, vi } from 'vitest';
import { InterruptedError } from '../../../src/errors.ts';
import { describeArrow } from '../../../src/snapshot/arrow/describe.ts';
import { readArrow, readArrowStream } from '../../../src/snapshot/arrow/read.ts';
import { writeArrow } from '../../../src/snapshot/arrow/write.ts';
import { readFacts, writeFacts } from '../../../src/snapshot/arrow/facts.ts';
import { unitSystemOf } from '../../../src/snapshot/ownUnits.ts';
import { expectInputError, inPieces, temporaryFolder } from './sample.ts';

const folder = await temporaryFolder();
type Columns = Record<string, ArrayLike<unknown>>;
type Types = Record<string, fl.DataType>;
const PLAIN: Columns = Object.fromEntries(
  ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'].map((name, k) => [name, Float64Array.of(k, k + 0.5)]),
);

let written = 0;
async function save(columns: Columns, types: Types = {}): Promise<string> {
  const table = fl.tableFromArrays(columns as Record<string, unknown[]>, { types });
  const path = join(folder, `${++written}.arrow`);
  await writeFile(path, fl.tableToIPC(table, { format: 'file' })!);
  return path;
}
function without(...names: string[]): Columns {
  return Object.fromEntries(Object.entries(PLAIN).filter(([name]) => !names.includes(name)));
}

describe('columns', () => {
  it('m stands for mass', async () => {
    const { mass } = await readArrow(await save({ ...without('mass'), m: Float64Array.of(3, 4) }));
    expect(Array.from(mass)).toEqual([3, 4]);
  });

  it('other names are given by --columns, as one vector or three columns', async () => {
    const path = await save(
      { ...PLAIN, w: Float64Array.of(8, 9), pos: [[1, 2, 3], [4, 5, 6]], u: Float64Array.of(5, 5) }, // prettier-ignore
      { pos: fl.fixedSizeList(fl.float64(), 3) },
    );
    const particles = await readArrow(path, { columns: { mass: 'w', position: 'pos', vy: 'u' } });
    expect(Array.from(particles.mass)).toEqual([8, 9]);
    expect(Array.from(particles.y)).toEqual([2, 5]);
    expect(Array.from(particles.vy)).toEqual([5, 5]);
    expect(Array.from(particles.vz)).toEqual([6, 6.5]);
  });

  it('integers serve as reals; 64 bits are rounded to the nearest', async () => {
    const path = await save(
      {
        ...PLAIN,
        mass: [1n, 2n ** 60n + 1n],
        x: [-1n, -(2n ** 53n) - 3n],
        y: [7, 255],
        z: [-8, 8],
      },
      { mass: fl.uint64(), x: fl.int64(), y: fl.uint8(), z: fl.int16() },
    );
    const { mass, x, y, z, origin } = await readArrow(path);
    expect(mass).toBeInstanceOf(Float64Array);
    // Number(bigint) rounds to nearest, ties to even (ECMA-262, Number(value)).
    expect(Array.from(mass)).toEqual([1, Number(2n ** 60n + 1n)]);
    expect(Array.from(x)).toEqual([-1, Number(-(2n ** 53n) - 3n)]);
    expect(Array.from(y)).toEqual([7, 255]);
    expect(Array.from(z)).toEqual([-8, 8]);
    expect(origin.mantissaBits).toBe(53);
  });

  it('optional columns come as they are; one that is not there is no error', async () => {
    const path = await save(
      { ...PLAIN, group: [1, 2], acceleration: [[1, 2, 3], [4, 5, 6]], softening: [0.5, 0.25] }, // prettier-ignore
      {
        group: fl.uint32(),
        acceleration: fl.fixedSizeList(fl.float32(), 3),
        softening: fl.float64(),
      },
    );
    const { columns } = await readArrow(path, {
      optional: ['group', 'acceleration', 'softening', 'density', 'component'],
    });
    expect(Object.keys(columns).sort()).toEqual(['acceleration', 'group', 'softening']);
    expect(columns.group).toEqual(Uint32Array.of(1, 2));
    expect(columns.acceleration?.z).toBeInstanceOf(Float32Array);
    expect(Array.from(columns.acceleration?.z ?? [])).toEqual([3, 6]);
  });

  it('columns of any other type may stand between', async () => {
    const path = await save(
      { name: ['a', 'b'], tags: [[1], [2, 3]], ...PLAIN, alive: [true, false], s: [{ q: 1 }, { q: 2 }] }, // prettier-ignore
      {
        name: fl.utf8(),
        tags: fl.list(fl.int32()),
        alive: fl.bool(),
        s: fl.struct({ q: fl.float64() }),
      },
    );
    expect(Array.from((await readArrow(path)).vz)).toEqual([6, 6.5]);
  });
});

describe('components of plain texts', () => {
  const names = [
    'halo',
    'halo',
    'stars, old',
    'halo',
    '',
    'stars, old',
    'a name longer than twelve bytes — ☉',
  ];
  const many = (times: number): string[] => Array.from({ length: times }, () => names).flat();
  const rows = (count: number): Columns =>
    Object.fromEntries(
      Object.keys(PLAIN).map((name, k) => [
        name,
        Float64Array.from({ length: count }, (_, i) => i + k),
      ]),
    );
  const componentsIn = async (path: string): Promise<string[]> => {
    const { columns, componentNames } = await readArrow(path, { optional: ['component'] });
    expect([...new Set(componentNames)]).toEqual([...new Set(names)]);
    return Array.from(columns.component ?? [], (index) => componentNames[index]);
  };

  it.each([
    ['utf8', fl.utf8()],
    ['largeUtf8', fl.largeUtf8()],
  ])('are read as %s', async (_, type) => {
    const path = await save({ ...rows(7), component: names }, { component: type });
    expect(await componentsIn(path)).toEqual(names);
    expect((await readArrow(path)).columns).toEqual({});
    expect(await describeArrow(path)).toMatchObject({ count: 7, remarks: [] });
  });

  it.each(['uncompressed', 'lz4', 'zstd'] as const)(
    'are read from what polars writes, %s, in batches',
    async (compression) => {
      const path = join(folder, `polars-${compression}.arrow`);
      const table = pl.DataFrame({
        ...Object.fromEntries(
          Object.entries(rows(7000)).map(([name, list]) => [name, Array.from(list)]),
        ),
        component: many(1000),
      });
      table.writeIPC(path, { compression });
      expect(await componentsIn(path)).toEqual(many(1000));
    },
  );

  it('are read from a stream', async () => {
    const table = fl.tableFromArrays(
      { ...rows(7), component: names } as Record<string, unknown[]>,
      {
        types: { component: fl.utf8() },
      },
    );
    const bytes = fl.tableToIPC(table, { format: 'stream' })!;
    const particles = await readArrowStream(inPieces(bytes, 100), 'pipe', {
      optional: ['component'],
    });
    expect(
      Array.from(particles.columns.component ?? [], (index) => particles.componentNames[index]),
    ).toEqual(names);
  });

  it('are refused with missing values, and if there are as many as bodies', async () => {
    const missing = await save({ ...rows(2), component: ['a', null] }, { component: fl.utf8() });
    await expectInputError(
      readArrow(missing, { optional: ['component'] }),
      'input.nulls',
      /"component".*1 missing/,
    );
    const all = Array.from({ length: 65537 }, (_, i) => `body ${i}`);
    const path = await save({ ...rows(65537), component: all }, { component: fl.utf8() });
    await expectInputError(
      readArrow(path, { optional: ['component'] }),
      'input.tooManyComponents',
      /65537 names or more; expected at most 65536/,
    );
  });

  it('are refused if a text lies outside its buffer', async () => {
    const path = await save({ ...rows(7), component: names }, { component: fl.utf8() });
    const bytes = await readFile(path);
    // The offsets of the texts: 0 4 8 18 22 22 32.
    const offsets = Buffer.from(Int32Array.of(0, 4, 8, 18, 22, 22, 32).buffer);
    const at = bytes.indexOf(offsets);
    expect(at).toBeGreaterThan(0);
    bytes.writeInt32LE(10 ** 6, at + 8);
    await writeFile(path, bytes);
    await expectInputError(
      readArrow(path, { optional: ['component'] }),
      'input.arrowDamaged',
      /text 1 lies outside its buffer/,
    );
  });
});

describe('columns that cannot be', () => {
  it('missing', async () => {
    await expectInputError(
      readArrow(await save({ ...without('mass'), mas: Float64Array.of(1, 2) })),
      'input.missingColumn',
      /mass.*x, y, z/,
      /--columns mass=mas/,
    );
    await expectInputError(
      readArrow(await save(without('vy'))),
      'input.missingColumn',
      /no column for vy/,
    );
    await expectInputError(
      readArrow(await save(without('x', 'y', 'z'))),
      'input.missingColumn',
      /no column for position/,
      /x, y, z/,
    );
  });

  it('misspelt in --columns', async () => {
    await expectInputError(
      readArrow(await save({ ...PLAIN, weight: [1, 2] }), { columns: { mass: 'wieght' } }),
      'input.unknownColumn',
      /mass from "wieght".*mass, x, y.*weight/,
      /weight/,
    );
  });

  it('of a wrong type', async () => {
    await expectInputError(
      readArrow(await save({ ...PLAIN, mass: ['a', 'b'] }, { mass: fl.utf8() })),
      'input.columnType',
      /"mass".*Utf8.*expected integers or floating-point/,
      /Cast/,
    );
    await expectInputError(
      readArrow(await save({ ...without('x'), position: [[1, 2], [3, 4]] }, { position: fl.fixedSizeList(fl.float64(), 2) })), // prettier-ignore
      'input.columnType',
      /"position".*FixedSizeList\[2\].*expected a FixedSizeList of 3/,
    );
    await expectInputError(
      readArrow(await save({ ...PLAIN, component: [1, 2] }, { component: fl.int32() }), {
        optional: ['component'],
      }),
      'input.columnType',
      /"component".*Int32.*expected texts, or a dictionary/,
      /categorical/,
    );
  });

  it('with missing values', async () => {
    await expectInputError(
      readArrow(await save({ ...PLAIN, vx: [1, null] }, { vx: fl.float64() })),
      'input.nulls',
      /"vx".*1 missing values in record batch 0.*expected none/,
      /Fill them/,
    );
    const velocity = { velocity: fl.fixedSizeList(fl.float64(), 3) };
    await expectInputError(
      readArrow(await save({ ...without('vx'), velocity: [[1, null, 2], null] }, velocity)),
      'input.nulls',
      /"velocity"/,
    );
  });

  it('missing values in a column that is not used do no harm', async () => {
    const path = await save({ ...PLAIN, remark: [1, null] }, { remark: fl.float64() });
    expect((await readArrow(path)).count).toBe(2);
  });

  it('twice of one name', async () => {
    const column = fl.columnFromArray([1, 2], fl.float64());
    const plain = fl.tableFromArrays(PLAIN as Record<string, unknown[]>);
    const columns: [string, fl.Column<unknown>][] = [
      ['mass', column],
      ...plain.schema.fields.map(({ name }) => [name, plain.getChild(name)] as never),
    ];
    const path = join(folder, 'twice.arrow');
    await writeFile(path, fl.tableToIPC(fl.tableFromColumns(columns), { format: 'file' })!);
    await expectInputError(readArrow(path), 'input.duplicateColumn', /several.*"mass"/, /Rename/);
  });
});

describe('files that cannot be', () => {
  const missing = join(folder, 'not-there.arrow');
  it('missing, a folder, empty, not Arrow, without bodies', async () => {
    await expectInputError(readArrow(missing), 'input.notFound', /not-there\.arrow/);
    await mkdir(join(folder, 'run.arrow'));
    await expectInputError(readArrow(join(folder, 'run.arrow')), 'input.isDirectory', /run\.arrow/);
    await writeFile(join(folder, 'empty.arrow'), '');
    await expectInputError(readArrow(join(folder, 'empty.arrow')), 'input.empty', /0 bytes/);
    await writeFile(join(folder, 'text.arrow'), 'mass,x,y\n1,2,3\n');
    await expectInputError(
      readArrow(join(folder, 'text.arrow')),
      'input.notArrow',
      /6d 61 73 73.*expected "ARROW1"/,
      /--layout/,
    );
    const none = Object.fromEntries(Object.keys(PLAIN).map((name) => [name, new Float64Array(0)]));
    const reals = Object.fromEntries(Object.keys(PLAIN).map((name) => [name, fl.float64()]));
    await expectInputError(readArrow(await save(none, reals)), 'input.noParticles', /0 rows/);
    await expectInputError(
      readArrowStream(inPieces(new Uint8Array(0), 1), '-'),
      'input.empty',
      /-/,
    );
  });

  it.skipIf(process.getuid?.() === 0)('not readable', async () => {
    const path = await save(PLAIN);
    await chmod(path, 0);
    await expectInputError(readArrow(path), 'input.noPermission', /permission/);
  });

  it('changed while it is read', async () => {
    const path = await save(PLAIN);
    const onProgress = () => {
      later ??= touch(path);
    };
    let later: Promise<void> | undefined;
    await expectInputError(
      readArrow(path, { onProgress }).then(() => later),
      'input.changed',
      /changed while it was read/,
      /finished/,
    );
  });

  it('big-endian', async () => {
    const particles = await readArrow(await save(PLAIN));
    // Entry 0 of the table Schema, of 16 bits: 1 means big-endian (Schema.fbs of the format).
    const spy = vi.spyOn(FlatbufferSchema, 'addEndianness').mockImplementation((builder) => {
      builder.addFieldInt16(0, 1, 0);
    });
    for (const name of ['big.arrow', 'big.arrows']) {
      await writeArrow(join(folder, name), particles);
      await expectInputError(
        readArrow(join(folder, name)),
        'input.byteOrder',
        /big-endian; expected little-endian/,
        /Convert/,
      );
    }
    spy.mockRestore();
  });
});

async function touch(path: string): Promise<void> {
  await utimes(path, 1, 1);
}

describe('facts in the metadata of the schema', () => {
  it('are refused when they are wrong, with key and text', () => {
    const code = (key: string, value: string) => {
      try {
        readFacts(new Map([[`settlemark.${key}`, value]]), 'a.arrow');
      } catch (error) {
        return `${(error as { code: string }).code}: ${(error as Error).message}`;
      }
      return 'none';
    };
    expect(code('time', 'soon')).toMatch(/^input\.metadata: a\.arrow.*time = "soon".*finite/);
    expect(code('time', '')).toMatch(/^input\.metadata/);
    expect(code('gravity', '0')).toMatch(/^input\.metadata.*above 0/);
    expect(code('softening', '-1')).toMatch(/^input\.metadata.*not below 0/);
    expect(code('scaleFactor', '0.5')).toMatch(/^input\.metadata.*hubbleRate/);
    expect(code('units', 'kpc')).toMatch(/^input\.units.*"kpc".*kpc-kms-msun/);
    expect(code('units', '{"mass":"u"}')).toMatch(/^input\.units/);
    expect(code('units', 'toString')).toMatch(/^input\.units/);
    const misspelt = '{"length":"kcp","mass":1,"velocity":1}';
    expect(code('units', misspelt)).toMatch(/^input\.units: a\.arrow.*length: found "kcp"/);
    expect(code('time', '1e3')).toBe('none');
  });

  it('may be sizes of own units, and come back as they were read', () => {
    const sizes = { length: 'au', mass: 2e30, time: '3 yr' };
    const read = (text: string) => readFacts(new Map([['settlemark.units', text]]), 'a');
    const first = read(JSON.stringify(sizes));
    expect(first.units).toEqual(unitSystemOf(sizes));
    const written = writeFacts(first).get('settlemark.units') ?? '';
    expect(read(written).units).toEqual(first.units);
  });

  it('are written with all digits', () => {
    const facts = readFacts(new Map([['settlemark.time', '0.1']]), 'a');
    expect(writeFacts({ ...facts, time: 1 / 3, gravity: 5e-324 })).toEqual(
      new Map([
        ['settlemark.time', '0.3333333333333333'],
        ['settlemark.gravity', '5e-324'],
      ]),
    );
  });
});

describe('progress and interruption', () => {
  it('reports all bytes of the loaded columns in the end', async () => {
    const calls: [number, number][] = [];
    await readArrow(await save({ ...PLAIN, other: Float64Array.of(1, 2) }), {
      onProgress: (done, total) => calls.push([done, total]),
    });
    // 7 columns of 2 float64
    expect(calls.at(-1)).toEqual([112, 112]);
  });

  it('ends when the signal says so, in a file and on a silent pipe', async () => {
    const path = await save(PLAIN);
    const particles = await readArrow(path);
    await writeArrow(join(folder, 'many.arrow'), particles, { rowsPerBatch: 1 });
    const control = new AbortController();
    const reading = readArrow(join(folder, 'many.arrow'), {
      signal: control.signal,
      onProgress: () => {
        control.abort();
      },
    });
    await expect(reading).rejects.toThrow(InterruptedError);

    const silent = new AbortController();
    const waiting = readArrowStream(
      { [Symbol.asyncIterator]: () => ({ next: () => new Promise(() => undefined) }) },
      '-',
      { signal: silent.signal },
    );
    silent.abort();
    await expect(waiting).rejects.toThrow(InterruptedError);
  });
});
