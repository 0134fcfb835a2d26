/** Files with several kinds of bodies, put together by hand. */
import { beforeEach, describe, expect, it } from 'vitest';
import { describeSnapshot, readSnapshot } from '../../../src/snapshot/read.ts';
import type { LayoutInput } from '../../../src/snapshot/raw/layout.ts';
import { checkLayout } from '../../../src/snapshot/raw/layout-check.ts';
import type { Particles } from '../../../src/snapshot/particles.ts';
import { readRaw } from '../../../src/snapshot/raw/read.ts';
import { writeRaw } from '../../../src/snapshot/raw/write.ts';
import { body, f32, f64, i32, newFolder, put, putLayout, record, SEVEN } from './samples.ts';
import { readFile } from 'node:fs/promises';
import { join } from 'node:path';

let folder: string;
beforeEach(async () => {
  folder = await newFolder();
});

type Fields = LayoutInput['fields'];
type Parts = Omit<LayoutInput, 'settlemark'>;

const read = async (bytes: Buffer, layout: Parts, optional = ['component']): Promise<Particles> =>
  readRaw(await put(folder, 'a.bin', bytes), {
    layout: await putLayout(folder, layout),
    optional: optional as ['component'],
  });

/** Bodies 0 … 1 are gas, none is dust, 2 … 4 are dark, 5 is a star. */
const GAS = [0, 1];
const DARK = [2, 3, 4];
const STAR = [5];
const ALL = [...GAS, ...DARK, ...STAR];
const COUNTS = [2, 0, 3, 1];
const COMPONENTS: NonNullable<LayoutInput['components']> = [
  { name: 'gas', count: { header: 'nGas' } },
  { name: 'dust', count: { header: 'nDust' }, mass: 7 },
  { name: 'dark', count: { header: 'nDark' }, mass: { header: 'darkMass', scale: 0.5 } },
  { name: 'star', count: 1 },
];
const HEADER: Parts = {
  headerBytes: 24,
  header: [
    { name: 'nGas', type: 'int32', offset: 0 },
    { name: 'nDust', type: 'int32', offset: 4 },
    { name: 'nDark', type: 'int32', offset: 8 },
    { name: 'count', type: 'int32', offset: 12 },
    { name: 'darkMass', type: 'float64', offset: 16 },
  ],
  components: COMPONENTS,
  fields: [
    { name: 'position', type: 'float64', width: 3 },
    { name: 'velocity', type: 'float64', width: 3 },
    { name: 'mass', type: 'float64', components: ['gas', 'star'] },
    { name: 'density', type: 'float32', components: ['gas'] },
  ],
};
const header = (): Buffer => Buffer.concat([i32('little', 2, 0, 3, 6), f64('little', 1.5)]);

const x = (i: number): number[] => body(i).slice(1, 4);
const v = (i: number): number[] => body(i).slice(4);
const column = (of: (i: number) => number[], whose: readonly number[]): Buffer =>
  f64('little', ...whose.flatMap(of));

function expectAll(particles: Particles): void {
  expect(particles.count).toBe(6);
  for (const name of SEVEN.slice(1)) {
    expect([...particles[name]]).toEqual(ALL.map((i) => body(i)[SEVEN.indexOf(name)]));
  }
  const mass = (i: number): number => (DARK.includes(i) ? 0.75 : body(i)[0]);
  expect([...particles.mass]).toEqual(ALL.map(mass));
  expect([...(particles.columns.component ?? [])]).toEqual([0, 0, 2, 2, 2, 3]);
  expect(particles.componentNames).toEqual(['gas', 'dust', 'dark', 'star']);
}

const gasRecord = (i: number): Buffer =>
  Buffer.concat([f64('little', ...x(i), ...v(i), body(i)[0]), f32('little', 100 + i)]);
const darkRecord = (i: number): Buffer => f64('little', ...x(i), ...v(i));
const starRecord = (i: number): Buffer => f64('little', ...x(i), ...v(i), body(i)[0]);

const COLUMNS = [
  column(x, ALL),
  column(v, ALL),
  column((i) => body(i).slice(0, 1), [...GAS, ...STAR]),
  f32('little', 100, 101),
];
const BY_COMPONENT = [
  [column(x, GAS), column(v, GAS), column((i) => body(i).slice(0, 1), GAS), COLUMNS[3]],
  [column(x, DARK), column(v, DARK)],
  [column(x, STAR), column(v, STAR), column((i) => body(i).slice(0, 1), STAR)],
];
const INTERLEAVED = [GAS.map(gasRecord), DARK.map(darkRecord), STAR.map(starRecord)];

describe('the bytes of components', () => {
  it.each([
    ['interleaved', INTERLEAVED.flat()],
    ['columns', COLUMNS],
    ['columnsByComponent', BY_COMPONENT.flat()],
  ] as const)('are read as %s', async (arrangement, parts) => {
    expectAll(await read(Buffer.concat([header(), ...parts]), { ...HEADER, arrangement }));
  });

  // Source: GNU Fortran manual, "File format of unformatted sequential files"; a component without
  // bodies has left an empty record, or none.
  const empty = record('little');
  it.each([
    ['interleaved', INTERLEAVED.map((bodies) => record('little', ...bodies))],
    ['interleaved', INTERLEAVED.flat().map((bytes) => record('little', bytes))],
    ['columns', COLUMNS.map((bytes) => record('little', bytes))],
    ['columnsByComponent', BY_COMPONENT.flat().map((bytes) => record('little', bytes))],
  ] as const)('are read as %s in Fortran records', async (arrangement, records) => {
    const layout: Parts = { ...HEADER, arrangement, markers: 'fortran4' };
    const bytes = [record('little', header()), ...records];
    expectAll(await read(Buffer.concat(bytes), layout));
    if (arrangement === 'columns') return;
    const gasRecords = arrangement === 'columnsByComponent' ? 4 : records.length === 3 ? 1 : 2;
    const empties = arrangement === 'columnsByComponent' ? [empty, empty] : [empty];
    bytes.splice(1 + gasRecords, 0, ...empties);
    expectAll(await read(Buffer.concat(bytes), layout));
  });

  it('have fields of other order and type in each component, and gaps of some', async () => {
    const fields: Fields = [
      { name: 'velocity', type: 'float32', width: 3, components: ['dark'] },
      { name: 'm', type: 'float32' },
      { name: 'position', type: 'float64', width: 3, components: ['dark'] },
      { skip: 3, components: ['star'] },
      ...(['x', 'y', 'z'] as const).map((name) => ({
        name,
        type: 'float32' as const,
        components: ['star'],
      })),
      { name: 'velocity', type: 'float64', width: 3, scale: 2, components: ['star'] },
    ];
    const components = [
      { name: 'star', count: 2 },
      { name: 'dark', count: 1 },
    ];
    const star = (i: number): Buffer =>
      Buffer.concat([
        f32('little', body(i)[0]),
        Buffer.alloc(3, 0xee),
        f32('little', ...x(i)),
        f64('little', ...v(i).map((value) => value / 2)),
      ]);
    const dark = (i: number): Buffer =>
      Buffer.concat([f32('little', ...v(i), body(i)[0]), f64('little', ...x(i))]);
    const bytes = Buffer.concat([star(0), star(1), dark(2)]);
    const particles = await read(bytes, { components, fields });
    for (const i of [0, 1, 2]) expect(SEVEN.map((name) => particles[name][i])).toEqual(body(i));
    expect(particles.mass).toBeInstanceOf(Float32Array);
    expect(particles.x).toBeInstanceOf(Float64Array);
    expect(particles.origin.mantissaBits).toBe(24);
  });

  it('may state a mass that float32 does not hold, beside a field that is float32', async () => {
    const components = [
      { name: 'star', count: 1, softening: 0.25 },
      { name: 'dark', count: 1, mass: 0.1, softening: 0.1 },
    ];
    const fields: Fields = [
      { name: 'mass', type: 'float32', components: ['star'] },
      { name: 'position', type: 'float32', width: 3 },
      { name: 'velocity', type: 'float32', width: 3 },
    ];
    const bytes = f32('little', ...body(0), ...body(1).slice(1));
    const particles = await read(bytes, { components, fields }, ['softening']);
    expect([...particles.mass]).toEqual([body(0)[0], 0.1]);
    expect([...(particles.columns.softening ?? [])]).toEqual([0.25, 0.1]);
    expect(particles.componentNames).toEqual([]);
    expect((await read(bytes, { components, fields }, [])).columns).toEqual({});
  });

  it('leave a column on disk that only some hold, and say so if it was wanted', async () => {
    const bytes = Buffer.concat([header(), ...INTERLEAVED.flat()]);
    const particles = await read(bytes, HEADER, ['density']);
    expect(particles.columns).toEqual({});
    expect(particles.origin.remarks).toMatchObject([
      { code: 'layout.partialField', text: expect.stringContaining('only gas have it') as string },
    ]);
    expect((await read(bytes, HEADER, [])).origin.remarks).toEqual([]);
  });

  it('come in any number of pieces', async () => {
    const n = 120_000;
    const values = Float64Array.from({ length: 7 * n }, (_, k) => k + 1);
    const components = [
      { name: 'a', count: n / 3 },
      { name: 'b', count: (2 * n) / 3 },
    ];
    const fields: Fields = SEVEN.map((name) => ({ name, type: 'float64' as const }));
    const particles = await read(Buffer.from(values.buffer), {
      arrangement: 'columns',
      components,
      fields,
    });
    SEVEN.forEach((name, k) => {
      for (const i of [0, n / 3 - 1, n / 3, n - 1]) expect(particles[name][i]).toBe(k * n + i + 1);
    });
    expect(particles.columns.component?.[n / 3 - 1]).toBe(0);
    expect(particles.columns.component?.[n / 3]).toBe(1);
  });
});

describe('counts that do not fit', () => {
  const whole = Buffer.concat([header(), ...INTERLEAVED.flat()]);
  const withCount = (offset: number, value: number): Buffer => {
    const bytes = Buffer.from(whole);
    bytes.writeInt32LE(value, offset);
    return bytes;
  };
  const cases: [string, Buffer, Parts, string, string[]][] = [
    [
      'a count that is more than the file holds',
      withCount(12, 7).fill(i32('little', 4), 8, 12),
      HEADER,
      'input.truncated',
      ['344 bytes', 'expected', '2 gas of 60 bytes', '4 dark of 48 bytes', '1 star of 56 bytes'],
    ],
    [
      'a file that is too long',
      Buffer.concat([whole, Buffer.alloc(5)]),
      HEADER,
      'input.sizeMismatch',
      ['expected', '3 dark of 48 bytes'],
    ],
    [
      'counts that do not add up to the count of all',
      withCount(12, 7),
      HEADER,
      'input.badCount',
      ['add up to 6 bodies', '2 gas, 0 dust, 3 dark, 1 star', 'expected 7'],
    ],
    ['a negative count', withCount(0, -2), HEADER, 'input.badCount', ['count of gas, nGas', '-2']],
    [
      'a mass that is not finite',
      Buffer.from(whole).fill(f64('little', NaN), 16, 24),
      HEADER,
      'input.headerValue',
      ['mass of dark is NaN', 'at least 0'],
    ],
    [
      'no bodies at all',
      i32('little', 0),
      {
        headerBytes: 4,
        header: [{ name: 'n', type: 'int32', offset: 0 }],
        components: [{ name: 'dark', count: { header: 'n' }, mass: 1 }],
        fields: HEADER.fields.slice(0, 2),
      },
      'input.noParticles',
      ['all its components have 0 bodies'],
    ],
    [
      'a component that has no mass',
      whole,
      { ...HEADER, components: COMPONENTS.map(({ name, count }) => ({ name, count })) },
      'input.missingColumn',
      ['no column for mass of the component dust'],
    ],
    [
      'a component that has no velocity',
      whole.subarray(0, whole.length - 24),
      {
        ...HEADER,
        fields: HEADER.fields.map((field) =>
          'name' in field && field.name === 'velocity'
            ? { ...field, components: ['gas', 'dark', 'dust'] }
            : field,
        ),
      },
      'input.missingColumn',
      ['no column for velocity of the component star'],
    ],
  ];
  it.each(cases)('refuses %s', async (_, bytes, layout, code, parts) => {
    const error: unknown = await read(bytes, layout).catch((thrown: unknown) => thrown);
    expect(error).toMatchObject({ name: 'InputError', code, remedy: expect.any(String) as string });
    for (const part of [join(folder, 'a.bin'), ...parts])
      expect((error as Error).message).toContain(part);
  });

  it('offers what would fit', async () => {
    const swapped = Buffer.concat([Buffer.from(header()).swap32(), ...INTERLEAVED.flat()]);
    await expect(read(swapped, HEADER)).rejects.toMatchObject({
      message: expect.stringContaining('byteOrder "big"') as string,
    });
    const shifted = Buffer.concat([header(), Buffer.alloc(6), ...INTERLEAVED.flat()]);
    await expect(read(shifted, HEADER)).rejects.toMatchObject({
      message: expect.stringContaining('headerBytes 30') as string,
    });
  });

  it.each([
    ['a cut record', (bytes: Buffer) => bytes.subarray(0, bytes.length - 8), 'input.markers'],
    [
      'a record of another length',
      (bytes: Buffer) => {
        const other = record('little', ...DARK.map(darkRecord), Buffer.alloc(8));
        const dark = record('little', ...DARK.map(darkRecord));
        const at = bytes.indexOf(dark);
        return Buffer.concat([bytes.subarray(0, at), other, bytes.subarray(at + dark.length)]);
      },
      'input.sizeMismatch',
    ],
  ] as const)('refuses %s', async (_, damage, code) => {
    const records = [header(), ...INTERLEAVED.map((bodies) => Buffer.concat(bodies))];
    const bytes = Buffer.concat(records.map((bytes) => record('little', bytes)));
    const layout: Parts = { ...HEADER, markers: 'fortran4' };
    await expect(read(damage(bytes), layout)).rejects.toMatchObject({ code });
  });

  it('names the body whose length word is wrong by its number in the file', async () => {
    const records = [header(), ...INTERLEAVED.flat()].map((bytes) => record('little', bytes));
    const bytes = Buffer.concat(records);
    // The fourth body: the second dark one; its first length word.
    const at = records.slice(0, 4).reduce((sum, { length }) => sum + length, 0);
    bytes.writeInt32LE(47, at);
    await expect(read(bytes, { ...HEADER, markers: 'fortran4' })).rejects.toMatchObject({
      code: 'input.markers',
      message: expect.stringContaining('body 3 say 47 and 48') as string,
    });
  });
});

describe('layouts that contradict themselves', () => {
  const star = { name: 'star', count: 3 };
  const dark = { name: 'dark', count: { header: 'n' } };
  const n = { headerBytes: 4, header: [{ name: 'n', type: 'int32', offset: 0 }] };
  const [position, velocity] = HEADER.fields;
  const base = { settlemark: 'layout/1', ...n, components: [star, dark] };
  const mass = { name: 'mass', type: 'float32' };
  const cases: [string, object, string[]][] = [
    ['no components', { components: [] }, ['components: found []', 'at least one']],
    ['a key of a component', { components: [{ ...star, mas: 1 }] }, ['"mas"', 'mean "mass"']],
    ['a key of a count', { components: [{ name: 'a', count: { headr: 'n' } }] }, ['"headr"']],
    [
      'a scaled count',
      { components: [{ name: 'a', count: { header: 'n', scale: 2 } }] },
      ['components[0].count', '"scale"', 'only header'],
    ],
    ['half a body', { components: [{ name: 'a', count: 1.5 }] }, ['count', '1.5', 'whole number']],
    ['no count', { components: [{ name: 'a' }] }, ['components[0].count', 'found nothing']],
    ['a name twice', { components: [star, star] }, ['components[1].name', '"star"', 'twice']],
    [
      'a count that the header lacks',
      { components: [{ name: 'a', count: { header: 'm' } }] },
      ['components[0].count.header', '"m"', 'header: n'],
    ],
    [
      'a mass that the header lacks',
      { components: [{ ...star, mass: { header: 'nn' } }] },
      ['components[0].mass.header', 'mean "n"'],
    ],
    [
      'a negative mass',
      { components: [{ ...star, mass: -1 }] },
      ['components[0].mass', 'found -1', 'at least 0'],
    ],
    [
      'a scale of 0',
      { components: [{ ...star, mass: { header: 'n', scale: 0 } }] },
      ['components[0].mass.scale', 'found 0'],
    ],
    [
      'a field that none holds',
      { fields: [{ ...mass, components: [] }] },
      ['fields[0].components: found []', 'at least one'],
    ],
    [
      'a field of an unknown component',
      { fields: [{ ...mass, components: ['stra'] }] },
      ['fields[0].components', '"stra"', 'star, dark', 'mean "star"'],
    ],
    [
      'a component named twice',
      { fields: [{ ...mass, components: ['star', 'star'] }] },
      ['fields[0].components', 'twice'],
    ],
    [
      'holders without a list of components',
      { components: undefined, fields: [{ ...mass, components: ['star'] }] },
      ['fields[0].components', 'no key "components"'],
    ],
    [
      'a quantity twice in one component',
      { fields: [mass, { ...mass, components: ['dark'] }] },
      ['fields[1].name', 'fields[0]'],
    ],
    [
      'a vector and its parts in one component',
      { fields: [{ ...position, components: ['star'] }, { name: 'x', type: 'int8' }, velocity] },
      ['"position" and "x"'],
    ],
    [
      'two masses',
      { components: [{ ...star, mass: 1 }], fields: [mass] },
      ['components[0].mass', 'fields[0]', 'fields[0].components'],
    ],
    [
      'a mass for all and one of its own',
      { components: [{ ...star, mass: 1 }], constants: { mass: 2 }, fields: [position] },
      ['components[0].mass', 'constants.mass'],
    ],
    [
      'ids of two types',
      {
        fields: [
          { name: 'id', type: 'int32', components: ['star'] },
          { name: 'id', type: 'int64', components: ['dark'] },
        ],
      },
      ['fields[1].type', 'int64', 'int32 in fields[0]'],
    ],
    [
      'codes of components as well',
      { fields: [{ name: 'component', type: 'int8' }] },
      ['fields[0].name', '"component"'],
    ],
  ];
  it.each(cases)('refuses %s', (_, changes, parts) => {
    let error: unknown;
    try {
      checkLayout({ ...base, fields: [position, velocity], ...changes }, 'l.json');
    } catch (thrown) {
      error = thrown;
    }
    expect(error).toMatchObject({ name: 'InputError', code: 'input.layoutInvalid' });
    const { message, remedy } = error as { message: string; remedy: string };
    for (const part of ['l.json', ...parts]) expect(`${message} ${remedy}`).toContain(part);
  });
});

it('describes components, and what of them can be seen', async () => {
  const path = await put(folder, 'a.bin', Buffer.concat([header(), ...INTERLEAVED.flat()]));
  const description = await describeSnapshot(path, { layout: await putLayout(folder, HEADER) });
  expect(description.components).toEqual([
    { name: 'gas', count: 2, mass: null },
    { name: 'dust', count: 0, mass: 7 },
    { name: 'dark', count: 3, mass: 0.75 },
    { name: 'star', count: 1, mass: null },
  ]);
  expect(description.structure).toContain('mass float64 of gas and star, density float32 of gas');
  const [, , mass, density] = description.columns;
  expect(mass).toMatchObject({ field: 'mass', smallest: body(0)[0], largest: body(5)[0] });
  expect(density).toMatchObject({ field: 'density', offset: 24 + 56, smallest: 100, largest: 101 });
  expect(description.remarks).toEqual([]);
});

it('looks at the masses that a layout states when it describes', async () => {
  const path = await put(folder, 'a.bin', Buffer.concat(DARK.map(darkRecord)));
  const layout: Parts = {
    components: [{ name: 'dark', count: 3, mass: 0 }],
    fields: HEADER.fields.slice(0, 2),
  };
  const description = await describeSnapshot(path, { layout: await putLayout(folder, layout) });
  expect(description.remarks).toMatchObject([{ code: 'input.zeroMass' }]);
});

describe('writing', () => {
  it.each([
    ['interleaved', INTERLEAVED.flat()],
    ['columns', COLUMNS],
    ['columnsByComponent', BY_COMPONENT.flat()],
  ] as const)('gives the same bytes as %s', async (arrangement, parts) => {
    const bytes = Buffer.concat([header(), ...parts]);
    const input: Parts = { ...HEADER, arrangement };
    const particles = await read(bytes, input);
    const density = Float32Array.of(100, 101, 0, 0, 0, 0);
    const columns = { ...particles.columns, density };
    const path = join(folder, 'out.bin');
    const layout = checkLayout({ settlemark: 'layout/1', ...input }, 'test');
    await writeRaw(path, { ...particles, columns }, layout);
    expect((await readFile(path)).equals(bytes)).toBe(true);
  });

  const refused: [string, object, (particles: Particles) => Particles, string, string][] = [
    [
      'particles without components',
      {},
      (particles) => ({ ...particles, columns: {} }),
      'input.missingColumn',
      'gas, dust, dark, star',
    ],
    [
      'bodies in another order',
      {},
      (particles) => {
        const component = Uint16Array.of(0, 2, 0, 2, 2, 3);
        return { ...particles, columns: { ...particles.columns, component } };
      },
      'input.doesNotFit',
      'gas before dark, the particles have gas after it, at body 2',
    ],
    [
      'a component that the layout lacks',
      {},
      (particles) => ({ ...particles, componentNames: ['gas', 'dust', 'bulge', 'star'] }),
      'input.doesNotFit',
      'bulge at body 2',
    ],
    [
      'another count',
      { components: COMPONENTS.map((one) => (one.name === 'star' ? { ...one, count: 2 } : one)) },
      (particles) => particles,
      'input.doesNotFit',
      '2 bodies of star, the particles have 1',
    ],
    [
      'masses that differ where the layout states one',
      {},
      (particles) => ({ ...particles, mass: Float64Array.of(1, 1, 2, 3, 2, 1) }),
      'input.doesNotFit',
      'mass 2 for all bodies of dark, the particles have 3 at body 3',
    ],
    [
      'a softening that the particles lack',
      { components: COMPONENTS.map((one) => ({ ...one, softening: 1 })) },
      (particles) => particles,
      'input.missingColumn',
      'softening of gas',
    ],
  ];
  it.each(refused)('refuses %s', async (_, changes, change, code, part) => {
    const particles = await read(Buffer.concat([header(), ...INTERLEAVED.flat()]), HEADER);
    const density = new Float32Array(6);
    const whole = { ...particles, columns: { ...particles.columns, density } };
    const layout = checkLayout({ settlemark: 'layout/1', ...HEADER, ...changes }, 'test');
    await expect(writeRaw(join(folder, 'out.bin'), change(whole), layout)).rejects.toMatchObject({
      code,
      message: expect.stringContaining(part) as string,
    });
  });
});

it('screens the values of components', async () => {
  const bytes = Buffer.concat([header(), ...INTERLEAVED.flat()]);
  bytes.writeDoubleLE(Infinity, 24 + 2 * 60 + 8);
  const path = await put(folder, 'a.bin', bytes);
  const layout = await putLayout(folder, HEADER);
  await expect(readSnapshot(path, { layout })).rejects.toMatchObject({
    code: 'input.notFinite',
    message: expect.stringContaining('y of body 2') as string,
  });
  expect(COUNTS.reduce((sum, count) => sum + count)).toBe(6);
});
