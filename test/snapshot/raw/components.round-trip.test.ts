/** Random layouts with components: what is written is read back. */
import fc from 'fast-check';
import { join } from 'node:path';
import { beforeAll, expect, it } from 'vitest';
import { allocateColumn, type Particles } from '../../../src/snapshot/particles.ts';
import type { LayoutInput } from '../../../src/snapshot/raw/layout.ts';
import { checkLayout } from '../../../src/snapshot/raw/layout-check.ts';
import { readRaw } from '../../../src/snapshot/raw/read.ts';
import type { NumberType } from '../../../src/snapshot/raw/types.ts';
import { writeRaw } from '../../../src/snapshot/raw/write.ts';
import { newFolder, putLayout, SEVEN } from './samples.ts';

let folder: string;
beforeAll(async () => {
  folder = await newFolder();
});

/** Whole numbers of up to 7 bits: every type holds them exactly, so a round trip has no tolerance. */
const SMALL = fc.integer({ min: 0, max: 127 });
const NAMES = ['gas', 'dark', 'star', 'dust'] as const;
type Field = LayoutInput['fields'][number];

const type = fc.constantFrom<NumberType>(
  ...(['float64', 'float32', 'int8', 'int16', 'int32', 'int64', 'uint8', 'uint16'] as const),
  ...(['uint32', 'uint64'] as const),
);

/** How one component states its count and its mass. */
const component = fc.record({
  rows: fc.array(fc.array(SMALL, { minLength: 7, maxLength: 7 }), { maxLength: 5 }),
  isCounted: fc.boolean(),
  mass: fc.constantFrom('field' as const, 'number' as const, 'header' as const),
});

/** How a quantity lies in fields: of which type in which component, in one field or in two. */
const split = fc.record({
  types: fc.tuple(type, type),
  isSecond: fc.array(fc.boolean(), { minLength: 4, maxLength: 4 }),
  asVector: fc.boolean(),
});

const samples = fc
  .record({
    byteOrder: fc.constantFrom('little' as const, 'big' as const),
    markers: fc.constantFrom('none' as const, 'fortran4' as const, 'fortran8' as const),
    arrangement: fc.constantFrom(...(['interleaved', 'columns', 'columnsByComponent'] as const)),
    components: fc
      .array(component, { minLength: 1, maxLength: 4 })
      .filter((list) => list.some(({ rows }) => rows.length > 0)),
    splits: fc.tuple(split, split, split),
    gap: fc.record({ bytes: fc.integer({ min: 0, max: 9 }), of: fc.nat(3) }),
    densityOf: fc.option(fc.nat(3)),
    order: fc.array(fc.nat(1000), { minLength: 20, maxLength: 20 }),
  })
  .map(({ components, splits, gap, densityOf, order, ...rest }) => {
    const names = NAMES.slice(0, components.length);
    const held = (indices: readonly number[]) =>
      indices.length === names.length ? {} : { components: indices.map((i) => names[i]) };
    const fields: Field[] = [];
    (['mass', 'position', 'velocity'] as const).forEach((name, k) => {
      const { types, isSecond, asVector } = splits[k];
      for (const second of [false, true]) {
        const holders = names.flatMap((_, i) =>
          isSecond[i] === second && (k > 0 || components[i].mass === 'field') ? [i] : [],
        );
        if (holders.length === 0) continue;
        const own = { type: types[second ? 1 : 0], ...held(holders) };
        const scalars = SEVEN.slice(3 * k - 2, 3 * k + 1);
        if (k === 0) fields.push({ name, ...own });
        else if (asVector) fields.push({ name, width: 3, ...own });
        else fields.push(...scalars.map((scalar) => ({ name: scalar, ...own })));
      }
    });
    if (gap.bytes > 0) fields.push({ skip: gap.bytes, ...held([gap.of % names.length]) });
    if (densityOf !== null) {
      fields.push({ name: 'density', type: 'int16', ...held([densityOf % names.length]) });
    }
    const shuffled = fields
      .map((field, i) => ({ field, key: order[i] }))
      .sort((a, b) => a.key - b.key)
      .map(({ field }) => field);
    const header = names.flatMap((name, i) => [
      { name: `n.${name}`, type: 'int16' as const, offset: 10 * i },
      { name: `m.${name}`, type: 'float64' as const, offset: 10 * i + 2 },
    ]);
    const used = header.filter((_, k) => {
      const { isCounted, mass } = components[k >> 1];
      return k % 2 === 0 ? isCounted : mass === 'header';
    });
    const layout: LayoutInput = {
      settlemark: 'layout/1',
      ...rest,
      headerBytes: 10 * names.length,
      header: used,
      components: components.map(({ rows, isCounted, mass }, i) => ({
        name: names[i],
        count: isCounted ? { header: `n.${names[i]}` } : rows.length,
        ...(mass !== 'field' && {
          mass: mass === 'header' ? { header: `m.${names[i]}`, scale: 0.5 } : i + 1,
        }),
      })),
      fields: shuffled,
    };
    const rows = components.flatMap(({ rows: own, mass }, i) =>
      own.map((row) => [mass === 'field' ? row[0] : i + 1, ...row.slice(1)]),
    );
    const component = components.flatMap(({ rows: own }, i) => own.map(() => i));
    return { layout, rows, component, names };
  });

function particlesOf(
  rows: readonly number[][],
  component: readonly number[],
  componentNames: readonly string[],
): Particles {
  const count = rows.length;
  const column = (k: number): Float64Array =>
    (allocateColumn(count) as Float64Array).map((_, i) => rows[i][k]);
  const [mass, x, y, z, vx, vy, vz] = SEVEN.map((_, k) => column(k));
  return {
    count,
    ...{ mass, x, y, z, vx, vy, vz },
    columns: {
      component: Uint16Array.from(component),
      density: Float64Array.from(component, (_, i) => i),
    },
    componentNames,
    time: null,
    units: null,
    gravity: null,
    softening: null,
    frame: { kind: 'physical' },
    origin: { file: 'made', format: 'made', mantissaBits: 53, remarks: [] },
  };
}

it('over random components, arrangements, holders and headers, exactly', async () => {
  let empty = 0;
  let apart = 0;
  await fc.assert(
    fc.asyncProperty(samples, async ({ layout, rows, component, names }) => {
      const checked = checkLayout(layout, 'random');
      const path = join(folder, 'random.bin');
      await writeRaw(path, particlesOf(rows, component, names), checked);
      const particles = await readRaw(path, {
        layout: await putLayout(folder, layout),
        optional: ['component'],
      });
      expect(particles.count).toBe(rows.length);
      SEVEN.forEach((name, k) => {
        expect([...particles[name]]).toEqual(rows.map((row) => row[k]));
      });
      expect([...(particles.columns.component ?? [])]).toEqual(component);
      expect(particles.componentNames).toEqual(names);
      if (new Set(component).size < names.length) empty++;
      if (layout.fields.some(({ components }) => components?.join() === 'gas,star')) apart++;
    }),
    { numRuns: 200, seed: 5 },
  );
  // The hard cases did come up.
  expect(empty).toBeGreaterThan(10);
  expect(apart).toBeGreaterThan(3);
});
