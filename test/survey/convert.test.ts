/** Conversion: any layout to any layout, with nothing lost that was not given up. */
import { link, readdir, readFile, stat, symlink, writeFile } from 'node:fs/promises';
import { join } from 'node:path';
import { tableFromIPC } from 'apache-arrow';
import fc from 'fast-check';
import { beforeEach, describe, expect, it } from 'vitest';
import { Comparison } from '../../src/snapshot/comparison.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import type { LayoutInput } from '../../src/snapshot/raw/layout.ts';
import { quotient } from '../../src/snapshot/raw/encode.ts';
import { readSnapshot } from '../../src/snapshot/read.ts';
import { convertSnapshot } from '../../src/survey/convert.ts';
import { EXPECTED, EXPECTED_COMPONENT, EXPECTED_ID, FIXTURES } from '../snapshot/arrow/sample.ts';
import {
  body,
  f32,
  f64,
  i32,
  newFolder,
  put,
  putLayout,
  record,
  SEVEN,
  sevenFields,
  u64,
} from '../snapshot/raw/samples.ts';

let folder: string;
const at = (name: string): string => join(folder, name);
beforeEach(async () => {
  folder = await newFolder();
});

const bodies = (count: number) => Array.from({ length: count }, (_, i) => body(i));
const table = async (name: string) => tableFromIPC(await readFile(at(name)));

async function columnsIn(name: string): Promise<Record<string, unknown[]>> {
  const read = await table(name);
  return Object.fromEntries(
    read.schema.fields.map((field) => [field.name, [...(read.getChild(field.name) ?? [])]]),
  );
}

describe('raw to Arrow', () => {
  it('takes a big-endian Fortran file of columns, a scale, components and a header', async () => {
    const order = 'big';
    const rows = bodies(5);
    const layout = await putLayout(folder, {
      byteOrder: order,
      markers: 'fortran4',
      headerBytes: 24,
      header: [
        { name: 'time', type: 'float64', offset: 0 },
        { name: 'nGas', type: 'int32', offset: 8 },
        { name: 'nDark', type: 'int32', offset: 12 },
        { name: 'darkMass', type: 'float64', offset: 16 },
      ],
      arrangement: 'columns',
      components: [
        { name: 'gas', count: { header: 'nGas' } },
        { name: 'dark', count: { header: 'nDark' }, mass: { header: 'darkMass' } },
      ],
      fields: [
        { name: 'position', type: 'float64', width: 3, scale: 4 },
        { name: 'velocity', type: 'float32', width: 3 },
        { name: 'mass', type: 'float64', components: ['gas'] },
        { name: 'id', type: 'uint64' },
      ],
      units: 'henon',
    });
    const from = await put(
      folder,
      'swarm.dat',
      Buffer.concat([
        record(order, f64(order, 2.5), i32(order, 2, 3), f64(order, 0.0625)),
        record(order, f64(order, ...rows.flatMap(([, x, y, z]) => [x / 4, y / 4, z / 4]))),
        record(order, f32(order, ...rows.flatMap((row) => row.slice(4)))),
        record(order, f64(order, 0.5, 0.75)),
        record(order, u64(order, ...rows.map((_, i) => 2n ** 63n + BigInt(i)))),
      ]),
    );
    const done = await convertSnapshot(from, at('swarm.arrow'), { read: { layout } });
    expect(done).toMatchObject({ count: 5, format: 'arrow', dropped: [], rounded: [] });
    // Read by the reference implementation of the format, not by ours.
    expect(await columnsIn('swarm.arrow')).toEqual({
      mass: [0.5, 0.75, 0.0625, 0.0625, 0.0625],
      ...Object.fromEntries(SEVEN.slice(1).map((name, k) => [name, rows.map((row) => row[k + 1])])),
      id: rows.map((_, i) => 2n ** 63n + BigInt(i)),
      component: ['gas', 'gas', 'dark', 'dark', 'dark'],
    });
    const { metadata, fields } = (await table('swarm.arrow')).schema;
    expect([...metadata].sort()).toEqual([
      ['settlemark.time', '2.5'],
      ['settlemark.units', 'henon'],
    ]);
    expect(fields.filter(({ name }) => /^[xv]/.test(name)).map(String)).toEqual([
      ...['x: Float64', 'vx: Float32', 'vy: Float32', 'vz: Float32'],
    ]);
  });

  it('writes a stream under .arrows, and takes one precision for all if told so', async () => {
    const from = await put(folder, 'a.bin', f64('little', ...bodies(3).flat()));
    await convertSnapshot(from, at('a.arrows'));
    expect((await readFile(at('a.arrows'))).subarray(0, 4).toString('hex')).toBe('ffffffff');
    const third = f64(
      'little',
      ...bodies(3)
        .flat()
        .map((value) => value / 3),
    );
    const odd = await put(folder, 'b.bin', third);
    const { rounded } = await convertSnapshot(odd, at('b.arrow'), { precision: 'float32' });
    expect(rounded.map(({ column }) => column)).toEqual([...SEVEN]);
    // IEEE 754: rounding to 24 binary digits changes a value by 2^-24 of it at most.
    for (const { largest } of rounded) expect(largest).toBeLessThanOrEqual(2 ** -24);
    expect((await columnsIn('b.arrow'))['x']).toEqual(bodies(3).map(([, x]) => Math.fround(x / 3)));
  });
});

describe('Arrow to raw', () => {
  it.each(['polars-zstd.arrow', 'polars-uncompressed.arrows', 'polars-lz4.arrow'])(
    '%s by a layout of its own, which is put beside',
    async (name) => {
      const drop = ['component'];
      const from = join(FIXTURES, name);
      const fails = convertSnapshot(from, at('out.bin'));
      // Disc and halo alternate, and codes have no names: the layout cannot hold them.
      await expect(fails).rejects.toMatchObject({ code: 'input.wouldBeLost' });
      expect(await readdir(folder)).toEqual([]);
      const done = await convertSnapshot(from, at('out.bin'), { drop });
      expect(done).toMatchObject({ dropped: ['component'], layout: at('out.layout.json') });
      const { headerBytes = 0, fields } = JSON.parse(
        await readFile(at('out.layout.json'), 'utf8'),
      ) as LayoutInput;
      expect(fields.map((field) => 'name' in field && field.name)).toEqual([
        ...['mass', 'position', 'velocity', 'id'],
      ]);
      const bytes = await readFile(at('out.bin'));
      expect(bytes.length).toBe(headerBytes + EXPECTED_ID.length * 64);
      EXPECTED_ID.forEach((id, i) => {
        const offset = headerBytes + 64 * i;
        const values = [0, 1, 2, 3, 4, 5, 6].map((k) => bytes.readDoubleLE(offset + 8 * k));
        expect(values).toEqual(Object.values(EXPECTED).map((column) => column[i]));
        expect(bytes.readBigInt64LE(offset + 56)).toBe(id);
      });
      // And what is found by itself gives the same bodies.
      const again = await readSnapshot(at('out.bin'));
      expect([...again.x]).toEqual(EXPECTED.x);
    },
  );

  it('keeps components as blocks if their bodies lie together', async () => {
    const layout = await putLayout(folder, {
      components: [
        { name: 'shell', count: 1 },
        { name: 'core', count: 2 },
      ],
      fields: sevenFields('float64'),
    });
    const bytes = f64('little', ...bodies(3).flat());
    const from = await put(folder, 'a.bin', bytes);
    await convertSnapshot(from, at('b.arrow'), { read: { layout } });
    await convertSnapshot(at('b.arrow'), at('c.bin'));
    const back = await readSnapshot(at('c.bin'), { optional: ['component'] });
    const names = Array.from(back.columns.component ?? [], (k) => back.componentNames[k]);
    expect(names).toEqual(['shell', 'core', 'core']);
    // And by the first layout the first bytes come again.
    await convertSnapshot(at('c.bin'), at('d.bin'), { toLayout: layout });
    expect(await readFile(at('d.bin'))).toEqual(bytes);
  });

  it('keeps codes of components that lie mixed, if they are whole numbers', async () => {
    const layout = await putLayout(folder, {
      fields: [...sevenFields('float64'), { name: 'component', type: 'int32' }],
    });
    const bytes = Buffer.concat(
      [7, -2, 7].flatMap((code, i) => [f64('little', ...body(i)), i32('little', code)]),
    );
    const from = await put(folder, 'a.bin', bytes);
    await convertSnapshot(from, at('b.arrow'), { read: { layout } });
    expect((await columnsIn('b.arrow'))['component']).toEqual(['7', '-2', '7']);
    await convertSnapshot(at('b.arrow'), at('c.bin'));
    await convertSnapshot(at('c.bin'), at('d.bin'), { toLayout: layout });
    expect(await readFile(at('d.bin'))).toEqual(bytes);
  });
});

it('keeps comoving coordinates, their box, and a softening of each body', async () => {
  const layout = await putLayout(folder, {
    headerBytes: 8,
    header: [{ name: 'z', type: 'float64', offset: 0 }],
    comoving: {
      redshift: { header: 'z' },
      hubbleRate: 70,
      boxSize: 100,
      velocity: 'sqrt(a) dx/dt',
    },
    fields: [...sevenFields('float64'), { name: 'softening', type: 'float32' }],
  });
  const rows = bodies(4).map((row, i) => Buffer.concat([f64('little', ...row), f32('little', i)]));
  const from = await put(folder, 'a.dat', Buffer.concat([f64('little', 3), ...rows]));
  await convertSnapshot(from, at('b.arrow'), { read: { layout } });
  const { metadata } = (await table('b.arrow')).schema;
  // a = 1/(1 + z), by definition.
  expect(metadata.get('settlemark.scaleFactor')).toBe('0.25');
  await convertSnapshot(at('b.arrow'), at('c.bin'));
  const frame = { kind: 'comoving', scaleFactor: 0.25, hubbleRate: 70, boxSize: 100 };
  const back = await readSnapshot(at('c.bin'), { optional: ['softening'] });
  expect(back.frame).toEqual({ ...frame, velocity: 'sqrt(a) dx/dt' });
  expect([...(back.columns.softening ?? [])]).toEqual([0, 1, 2, 3]);
  await convertSnapshot(at('c.bin'), at('d.dat'), { toLayout: layout });
  expect(await readFile(at('d.dat'))).toEqual(await readFile(from));
});

describe('any layout to any layout', () => {
  const type = fc.constantFrom('float32' as const, 'float64' as const);
  const layouts = fc.record({
    byteOrder: fc.constantFrom('little' as const, 'big' as const),
    markers: fc.constantFrom('none' as const, 'fortran4' as const, 'fortran8' as const),
    arrangement: fc.constantFrom('interleaved' as const, 'columns' as const),
    types: fc.tuple(type, type, type),
    gap: fc.integer({ min: 1, max: 9 }),
    places: fc.shuffledSubarray([0, 1, 2, 3], { minLength: 4 }),
  });
  // Single precision holds them all, with signed zeros and numbers below the normal ones.
  const value = fc.oneof(
    fc.float({ noNaN: true, noDefaultInfinity: true }),
    fc.constantFrom(-0, 0, 2 ** -149, -(2 ** -140)),
  );
  const rows = fc.array(fc.tuple(value, value, value, value, value, value), {
    minLength: 2,
    maxLength: 20,
  });

  it('gives the first bytes again, by way of another layout and of Arrow', async () => {
    let run = 0;
    await fc.assert(
      fc.asyncProperty(rows, layouts, layouts, async (values, one, other) => {
        fc.pre(new Set(values.map((row) => row.slice(0, 3).join())).size > 1);
        const name = (text: string) => at(`${run}-${text}`);
        run++;
        const [first, second] = [one, other].map(({ types, gap, places, ...rest }) => {
          const [mass, position, velocity] = types;
          const fields: LayoutInput['fields'] = [
            { name: 'mass', type: mass },
            { name: 'position', type: position, width: 3 },
            { name: 'velocity', type: velocity, width: 3 },
            { skip: gap },
          ];
          return { ...rest, fields: places.map((place) => fields[place]) };
        });
        const a = await putLayout(folder, first, `${run}-a.json`);
        const b = await putLayout(folder, second, `${run}-b.json`);
        const made = await put(
          folder,
          `${run}-made.bin`,
          f64('little', ...values.flatMap((row, i) => [(i + 1) / 8, ...row])),
        );
        await convertSnapshot(made, name('a.bin'), { toLayout: a });
        await convertSnapshot(name('a.bin'), name('b.bin'), { read: { layout: a }, toLayout: b });
        await convertSnapshot(name('b.bin'), name('c.arrow'), { read: { layout: b } });
        await convertSnapshot(name('c.arrow'), name('d.bin'), { toLayout: a });
        expect(await readFile(name('d.bin'))).toEqual(await readFile(name('a.bin')));
      }),
      { seed: 20261201, numRuns: 12 },
    );
  });

  it('finds a number that a scale turns into the value again wherever there is one', () => {
    fc.assert(
      fc.property(
        fc.double({ min: 1e-20, max: 1e20, noNaN: true }),
        fc.double({ min: 1e-6, max: 1e12, noNaN: true }),
        (stored, scale) => {
          const value = stored * scale;
          expect(quotient(value, scale) * scale).toBe(value);
        },
      ),
      { seed: 7, numRuns: 2000 },
    );
  });
});

describe('what would be lost is named, and refused unless it is given up', () => {
  const fields = (): LayoutInput['fields'] => [
    ...sevenFields('float64'),
    { name: 'warmth', type: 'float32' },
  ];
  const layout = () =>
    putLayout(folder, {
      headerBytes: 16,
      header: [
        { name: 'time', type: 'float64', offset: 0 },
        { name: 'step', type: 'int32', offset: 8 },
      ],
      fields: fields(),
    });
  const source = () =>
    put(
      folder,
      'a.raw',
      Buffer.concat([
        ...[f64('little', 1.5), i32('little', 12, 0)],
        ...bodies(3).flatMap((row) => [f64('little', ...row), f32('little', 1)]),
      ]),
    );

  it('fields and items of the header that no column of ours takes', async () => {
    const options = { read: { layout: await layout() } };
    const from = await source();
    await writeFile(at('b.arrow'), 'old');
    const fails = convertSnapshot(from, at('b.arrow'), options);
    await expect(fails).rejects.toMatchObject({
      code: 'input.wouldBeLost',
      message: expect.stringMatching(/field "warmth".*header "step"/) as string,
      remedy: expect.stringContaining('--drop warmth,step') as string,
    });
    expect(await readFile(at('b.arrow'), 'utf8')).toBe('old');
    const drop = ['warmth', 'step'];
    const half = convertSnapshot(from, at('b.arrow'), { ...options, drop: ['step'] });
    await expect(half).rejects.toMatchObject({ code: 'input.wouldBeLost' });
    const done = await convertSnapshot(from, at('b.arrow'), { ...options, drop });
    expect(done.dropped).toEqual(drop);
    expect((await table('b.arrow')).schema.metadata.get('settlemark.time')).toBe('1.5');
  });

  it('columns and facts that the layout to write does not hold', async () => {
    const toLayout = await putLayout(folder, { fields: sevenFields('float64') }, 'seven.json');
    const from = join(FIXTURES, 'polars-lz4.arrow');
    const fails = convertSnapshot(from, at('b.bin'), { toLayout });
    await expect(fails).rejects.toMatchObject({
      code: 'input.wouldBeLost',
      remedy: expect.stringContaining('--drop id,component') as string,
    });
    const drop = ['id', 'component'];
    const done = await convertSnapshot(from, at('b.bin'), { toLayout, drop });
    expect([...done.dropped].sort()).toEqual([...drop].sort());
    expect((await stat(at('b.bin'))).size).toBe(37 * 56);
    expect(EXPECTED_COMPONENT).toHaveLength(37);
  });

  it('a time that the layout to write does not hold', async () => {
    const toLayout = await putLayout(folder, { fields: sevenFields('float64') }, 'seven.json');
    const read = { layout: await layout() };
    const drop = ['warmth', 'step'];
    const fails = convertSnapshot(await source(), at('b.bin'), { read, toLayout, drop });
    await expect(fails).rejects.toMatchObject({
      code: 'input.wouldBeLost',
      message: expect.stringContaining('the time 1.5') as string,
    });
    const all = { read, toLayout, drop: [...drop, 'time'] };
    await convertSnapshot(at('a.raw'), at('b.bin'), all);
    expect(await readFile(at('b.bin'))).toEqual(f64('little', ...bodies(3).flat()));
  });

  it.each([
    ['warmt', 'Did you mean "warmth"?'],
    ['tame', 'Did you mean "time"?'],
    ['velocity', 'Leave it out of --drop.'],
    ['id', 'Leave it out of --drop.'],
  ])('--drop %s, which is not there', async (name, remedy) => {
    const options = { read: { layout: await layout() }, drop: [name] };
    const fails = convertSnapshot(await source(), at('b.arrow'), options);
    await expect(fails).rejects.toMatchObject({ code: 'usage.unknownField', remedy });
  });

  it('binary digits, unless rounding is allowed; identifiers never', async () => {
    const toLayout = await putLayout(folder, { fields: sevenFields('float32') }, 'single.json');
    const values = bodies(3).flat();
    values[8] = 0.1; // x of body 1
    const from = await put(folder, 'a.bin', f64('little', ...values));
    const fails = convertSnapshot(from, at('b.bin'), { toLayout });
    await expect(fails).rejects.toMatchObject({
      code: 'input.wouldBeRounded',
      message: expect.stringContaining('1 body: body 1 has 0.1') as string,
    });
    expect((await readdir(folder)).sort()).toEqual(['a.bin', 'single.json']);
    const { rounded } = await convertSnapshot(from, at('b.bin'), { toLayout, round: true });
    expect(rounded).toMatchObject([{ column: 'x', bodies: 1, first: { body: 1, from: '0.1' } }]);
    const ids = await putLayout(
      folder,
      { fields: [...sevenFields('float64'), { name: 'id', type: 'float32' }] },
      'ids.json',
    );
    // 2^53 + 1 … needs 54 digits.
    const options = { toLayout: ids, round: true, drop: ['component'] };
    const polars = join(FIXTURES, 'polars-lz4.arrow');
    await expect(convertSnapshot(polars, at('c.bin'), options)).rejects.toMatchObject({
      code: 'input.wouldBeRounded',
      remedy: expect.not.stringContaining('--round') as string,
    });
  });
});

describe('targets that are refused', () => {
  it.each(['itself', 'a hard link', 'a symbolic link'])('%s', async (kind) => {
    const bytes = f64('little', ...bodies(3).flat());
    const from = await put(folder, 'a.bin', bytes);
    const to = kind === 'itself' ? from : at('other.bin');
    if (kind === 'a hard link') await link(from, to);
    if (kind === 'a symbolic link') await symlink(from, to);
    const fails = convertSnapshot(from, to, { precision: 'float32' });
    await expect(fails).rejects.toMatchObject({ code: 'usage.convertTarget' });
    expect(await readFile(from)).toEqual(bytes);
  });

  it.each(['-', '/dev/null'])('%s', async (to) => {
    const from = await put(folder, 'a.bin', f64('little', ...bodies(3).flat()));
    const fails = convertSnapshot(from, to, { format: 'raw' });
    await expect(fails).rejects.toMatchObject({ code: 'usage.convertTarget' });
  });

  it('a part of the snapshot; all parts together are taken', async () => {
    const layout = await putLayout(folder, {
      parts: 'p{part}.bin',
      fields: sevenFields('float64'),
    });
    const [one, two] = [bodies(5).slice(0, 2), bodies(5).slice(2)];
    const from = await put(folder, 'p0.bin', f64('little', ...one.flat()));
    await put(folder, 'p1.bin', f64('little', ...two.flat()));
    const fails = convertSnapshot(from, at('p1.bin'), { read: { layout }, format: 'raw' });
    await expect(fails).rejects.toMatchObject({ code: 'usage.convertTarget' });
    await convertSnapshot(from, at('all.arrow'), { read: { layout } });
    expect((await columnsIn('all.arrow'))['x']).toEqual(bodies(5).map(([, x]) => x));
    const back = convertSnapshot(at('all.arrow'), at('q0.bin'), { toLayout: layout });
    await expect(back).rejects.toMatchObject({ code: 'input.layoutUnsupported' });
  });

  it('one whose own layout is there and another', async () => {
    const from = await put(folder, 'a.bin', f64('little', ...bodies(3).flat()));
    await putLayout(folder, { fields: sevenFields('float32') }, 'b.layout.json');
    const read = { layout: await putLayout(folder, { fields: sevenFields('float64') }, 'a.json') };
    const fails = convertSnapshot(from, at('b.bin'), { read });
    await expect(fails).rejects.toMatchObject({ code: 'usage.layoutExists' });
    expect((await readdir(folder)).includes('b.bin')).toBe(false);
  });

  it.each([
    ['usage.format', 'b.out', {}],
    ['usage.convertOption', 'b.arrow', { format: 'arrow', toLayout: 'x.json' }],
    ['usage.convertOption', 'b.bin', { precision: 'float32', toLayout: 'x.json' }],
    ['input.layoutNotFound', 'b.bin', { toLayout: 'x.json' }],
    ['input.cannotWrite', 'no/such/b.bin', {}],
  ] as const)('%s: %s %j', async (code, to, options) => {
    const from = await put(folder, 'a.bin', f64('little', ...bodies(3).flat()));
    await expect(convertSnapshot(from, at(to), options)).rejects.toMatchObject({ code });
  });
});

describe('the comparison', () => {
  const made = async (): Promise<Particles> => {
    const read = { optional: ['component'] as const };
    return readSnapshot(join(FIXTURES, 'polars-lz4.arrow'), read);
  };
  const changed = (particles: Particles, change: (copy: Particles) => void): Particles => {
    const copy = structuredClone({ ...particles, x: Float64Array.from(particles.x) });
    change(copy);
    return copy;
  };
  const against = (whole: Particles, part: Particles) => {
    const comparison = new Comparison(whole);
    comparison.add(part, 0);
    return comparison.result();
  };

  it('finds nothing in the same, and each thing that differs', async () => {
    const whole = await made();
    expect(against(whole, whole)).toEqual({ missing: [], different: [] });
    const x = changed(whole, (copy) => void (copy.x[5] *= 1 + 2 ** -52));
    expect(against(whole, x).different).toMatchObject([{ column: 'x', first: { body: 5 } }]);
    const zero = changed(whole, (copy) => void (copy.x[0] = -0));
    expect(against(whole, zero).different).toMatchObject([{ column: 'x', bodies: 1 }]);
    const named = { ...whole, componentNames: whole.componentNames.toReversed() };
    expect(against(whole, named).different).toMatchObject([{ column: 'component', bodies: 37 }]);
    const facts = { ...whole, time: 3, columns: {} };
    expect(against(facts, whole).missing).toEqual(['time']);
    expect(against(whole, facts).missing.toSorted()).toEqual(['component', 'id']);
    const short = new Comparison(whole);
    short.add({ ...whole, count: 30, x: whole.x.subarray(0, 30) }, 0);
    expect(() => short.result()).toThrow('37 bodies were written, 30 read');
  });
});
