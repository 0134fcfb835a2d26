import fc from 'fast-check';
import { readdir, readFile } from 'node:fs/promises';
import { join } from 'node:path';
import { beforeAll, describe, expect, it } from 'vitest';
import { allocateColumn, type IdColumn, type Particles } from '../../../src/snapshot/particles.ts';
import type { Layout, LayoutInput } from '../../../src/snapshot/raw/layout.ts';
import { checkLayout } from '../../../src/snapshot/raw/layout-check.ts';
import { readRaw } from '../../../src/snapshot/raw/read.ts';
import { integerRange, type NumberType } from '../../../src/snapshot/raw/types.ts';
import { writeRaw } from '../../../src/snapshot/raw/write.ts';
import { UNIT_SYSTEMS } from '../../../src/snapshot/units.ts';
import { bodies, body, newFolder, putLayout, SEVEN } from './samples.ts';

let folder: string;
beforeAll(async () => {
  folder = await newFolder();
});

/** Whole numbers of up to 7 bits: every type holds them exactly, so a round trip has no tolerance. */
const SMALL = fc.integer({ min: 0, max: 127 });

function makeParticles(values: readonly number[][], ids?: IdColumn): Particles {
  const column = (k: number): Float64Array =>
    (allocateColumn(values.length) as Float64Array).map((_, i) => values[i][k]);
  const [mass, x, y, z, vx, vy, vz] = SEVEN.map((_, k) => column(k));
  return {
    count: values.length,
    ...{ mass, x, y, z, vx, vy, vz },
    columns: ids === undefined ? {} : { id: ids },
    componentNames: [],
    time: 3,
    units: UNIT_SYSTEMS.natural,
    gravity: 1,
    softening: null,
    frame: { kind: 'physical' },
    origin: { file: 'made', format: 'made', mantissaBits: 53, remarks: [] },
  };
}

const realType = fc.constantFrom<NumberType>(
  ...(['float64', 'float32', 'int8', 'int16', 'int32', 'int64', 'uint8', 'uint16'] as const),
  ...(['uint32', 'uint64'] as const),
);
const integerType = fc.constantFrom<NumberType>(
  ...(['int8', 'int16', 'int32', 'int64', 'uint8', 'uint16', 'uint32', 'uint64'] as const),
);
type Field = LayoutInput['fields'][number];
const skip = fc.option(fc.integer({ min: 1, max: 9 }), { nil: 0 });

/** Fields of random types, order and gaps; positions and velocities as vectors or one by one. */
const fields = fc
  .record({
    vectors: fc.tuple(fc.boolean(), fc.boolean()),
    types: fc.array(realType, { minLength: 7, maxLength: 7 }),
    idType: fc.option(integerType),
    gaps: fc.array(skip, { minLength: 9, maxLength: 9 }),
    order: fc.array(fc.nat(1000), { minLength: 8, maxLength: 8 }),
  })
  .map(({ vectors, types, idType, gaps, order }) => {
    const list: Field[] = [{ name: 'mass', type: types[0] }];
    [['position', 'x', 'y', 'z'] as const, ['velocity', 'vx', 'vy', 'vz'] as const].forEach(
      ([vector, ...scalars], index) => {
        if (vectors[index]) list.push({ name: vector, type: types[1 + 3 * index], width: 3 });
        else {
          scalars.forEach((name, k) => list.push({ name, type: types[1 + 3 * index + k] }));
        }
      },
    );
    if (idType !== null) list.push({ name: 'id', type: idType });
    const shuffled = list
      .map((field, i) => ({ field, key: order[i] }))
      .sort((a, b) => a.key - b.key)
      .map(({ field }) => field);
    return shuffled.flatMap((field, i) => (gaps[i] > 0 ? [{ skip: gaps[i] }, field] : [field]));
  });

const layouts = fc
  .record({
    byteOrder: fc.constantFrom('little' as const, 'big' as const),
    markers: fc.constantFrom('none' as const, 'fortran4' as const, 'fortran8' as const),
    arrangement: fc.constantFrom('interleaved' as const, 'columns' as const),
    fields,
    header: fc.constantFrom(
      { headerBytes: 0, header: [] },
      { headerBytes: 5, header: [] },
      {
        headerBytes: 19,
        header: [
          { name: 'count', type: 'int16' as const, offset: 3 },
          { name: 'time', type: 'float64' as const, offset: 7 },
          { name: 'gravity', type: 'uint8' as const, offset: 1 },
        ],
      },
    ),
  })
  .map(({ header, ...rest }) =>
    checkLayout({ settlemark: 'layout/1', ...header, ...rest }, 'random'),
  );

function idsOf(layout: Layout, count: number): IdColumn | undefined {
  const field = layout.fields.find((entry) => 'name' in entry && entry.name === 'id');
  if (field === undefined || !('name' in field)) return undefined;
  const [lowest, highest] = integerRange(field.type) ?? [0n, 0n];
  // The ends of the range are the values that a detour over doubles or signs would damage.
  const ids = BigInt64Array.from({ length: count }, (_, i) =>
    BigInt.asIntN(64, i % 2 === 0 ? highest - BigInt(i % 100) : lowest + BigInt(i % 100)),
  );
  return field.type === 'uint64' ? new BigUint64Array(ids.buffer) : ids;
}

describe('what is written is read back', () => {
  it('over random layouts, exactly', async () => {
    await fc.assert(
      fc.asyncProperty(
        layouts,
        fc.array(fc.array(SMALL, { minLength: 7, maxLength: 7 }), { minLength: 1, maxLength: 12 }),
        fc.integer({ min: 1, max: 200 }),
        async (layout, values, subrecordBytes) => {
          const path = join(folder, 'random.bin');
          const ids = idsOf(layout, values.length);
          await writeRaw(path, makeParticles(values, ids), layout, { subrecordBytes });
          const { settlemark, ...rest } = layout;
          expect(settlemark).toBe('layout/1');
          const particles = await readRaw(path, { layout: await putLayout(folder, rest) });
          expect(particles.count).toBe(values.length);
          SEVEN.forEach((name, k) => {
            expect([...particles[name]]).toEqual(values.map((row) => row[k]));
          });
          expect([...(particles.columns.id ?? [])].map(BigInt)).toEqual(
            [...(ids ?? [])].map(BigInt),
          );
          const hasHeader = layout.header.length > 0;
          expect(particles.time).toBe(hasHeader ? 3 : null);
          expect(particles.gravity).toBe(hasHeader ? 1 : null);
        },
      ),
      { numRuns: 150 },
    );
  });

  it('in the default layout, for any double, bit for bit', async () => {
    const row = fc.array(fc.double(), { minLength: 7, maxLength: 7 });
    await fc.assert(
      fc.asyncProperty(fc.array(row, { minLength: 1, maxLength: 20 }), async (values) => {
        const path = join(folder, 'plain.data');
        await writeRaw(path, makeParticles(values));
        // Expected bytes from Node's Buffer, not from the reader.
        const expected = Buffer.alloc(56 * values.length);
        values.flat().forEach((value, k) => expected.writeDoubleLE(value, 8 * k));
        expect((await readFile(path)).equals(expected)).toBe(true);
      }),
      { numRuns: 100 },
    );
  });

  it('with optional columns, components and a scale', async () => {
    const layout = checkLayout(
      {
        settlemark: 'layout/1',
        fields: [
          { name: 'mass', type: 'float64', scale: 0.5 },
          { name: 'position', type: 'float32', width: 3, scale: 4 },
          { name: 'velocity', type: 'int32', width: 3, scale: 0.0625 },
          { name: 'component', type: 'int8' },
          { name: 'potential', type: 'float32' },
          { name: 'ax', type: 'float64' },
          { name: 'ay', type: 'float64' },
          { name: 'az', type: 'float64' },
        ],
      },
      'test',
    );
    const made = makeParticles([body(0), body(4), body(8)]);
    const ramp = Float64Array.of(1, 2, 3);
    const component = Uint16Array.of(1, 0, 1);
    const columns = { component, potential: ramp, acceleration: { x: ramp, y: ramp, z: ramp } };
    const path = join(folder, 'optional.bin');
    await writeRaw(path, { ...made, columns, componentNames: ['-4', '9'] }, layout);
    const particles = await readRaw(path, {
      layout: await putLayout(folder, layout),
      optional: ['component', 'potential', 'acceleration'],
    });
    SEVEN.forEach((name, k) => {
      expect([...particles[name]]).toEqual([body(0)[k], body(4)[k], body(8)[k]]);
    });
    expect([...(particles.columns.component ?? [])]).toEqual([1, 0, 1]);
    expect(particles.componentNames).toEqual(['-4', '9']);
    expect([...(particles.columns.potential ?? [])]).toEqual([1, 2, 3]);
    expect([...(particles.columns.acceleration?.y ?? [])]).toEqual([1, 2, 3]);
  });

  it('over more than one chunk', async () => {
    const n = 80_000;
    const made = makeParticles(Array.from({ length: n }, (_, i) => body(i)));
    const path = join(folder, 'large.data');
    await writeRaw(path, made);
    expect((await readFile(path)).equals(bodies('little', n))).toBe(true);
  });
});

describe('what cannot be written', () => {
  const made = makeParticles([body(0), body(1)]);
  const seven = SEVEN.map((name) => ({ name, type: 'float64' }));
  const cases: [string, Particles, object, string, string[]][] = [
    [
      'a column that is not there',
      made,
      { fields: [{ name: 'id', type: 'int8' }] },
      'input.missingColumn',
      ['"id"'],
    ],
    [
      'a name of an object member',
      made,
      { fields: [{ name: 'constructor', type: 'int8' }] },
      'input.missingColumn',
      ['"constructor"'],
    ],
    [
      'a fraction as an integer',
      made,
      { fields: [{ name: 'mass', type: 'int8' }] },
      'input.doesNotFit',
      ['mass of body 0 is 0.25', 'int8'],
    ],
    [
      'a number outside its type',
      makeParticles([[1, 2, 3, 300, 5, 6, 7]]),
      { fields: [{ name: 'position', type: 'uint8', width: 3 }] },
      'input.doesNotFit',
      ['position of body 0 is 300', 'uint8'],
    ],
    [
      'a double beyond float32',
      makeParticles([[1e39, 2, 3, 4, 5, 6, 7]]),
      { fields: [{ name: 'mass', type: 'float32' }] },
      'input.doesNotFit',
      ['1e+39', 'float32'],
    ],
    [
      'a header item that nobody states',
      made,
      {
        headerBytes: 8,
        header: [{ name: 'softening', type: 'float64', offset: 0 }],
        fields: seven,
      },
      'input.missingColumn',
      ['"softening"'],
    ],
    [
      'a time in an integer that cannot hold it',
      { ...made, time: 2.5 },
      { headerBytes: 8, header: [{ name: 'time', type: 'int32', offset: 0 }], fields: seven },
      'input.doesNotFit',
      ['time is 2.5', 'int32'],
    ],
    [
      'other units',
      made,
      { fields: seven, units: 'si' },
      'input.doesNotFit',
      ['units si', 'natural'],
    ],
    [
      'another G',
      made,
      { fields: seven, constants: { gravity: 2 } },
      'input.doesNotFit',
      ['constants.gravity 2', '1'],
    ],
    [
      'a constant mass that is not',
      made,
      { fields: seven.slice(1), constants: { mass: 0.25 } },
      'input.doesNotFit',
      ['constants.mass 0.25', '0.375'],
    ],
  ];
  it.each(cases)('refuses %s and leaves no file', async (_, particles, layout, code, parts) => {
    const own = await newFolder();
    const path = join(own, 'out.bin');
    const checked = checkLayout({ settlemark: 'layout/1', ...layout }, 'test');
    const error: unknown = await writeRaw(path, particles, checked).catch(
      (thrown: unknown) => thrown,
    );
    expect(error).toMatchObject({ name: 'InputError', code, remedy: expect.any(String) as string });
    for (const part of [path, ...parts]) expect((error as Error).message).toContain(part);
    expect(await readdir(own)).toEqual([]);
  });

  it('says that the disk is full', async () => {
    // /dev/full refuses every write with ENOSPC (Linux manual page full(4)).
    await expect(writeRaw('/dev/full', made)).rejects.toMatchObject({ code: 'input.cannotWrite' });
  });
});
