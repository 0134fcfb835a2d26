/** Snapshots in several files: the same as one file with all their bodies. */
import { mkdir, rm } from 'node:fs/promises';
import { join } from 'node:path';
import { afterAll, beforeEach, describe, expect, it } from 'vitest';
import { crewOfOne } from '../../../src/parallel/crew.ts';
import { describeSnapshot, readSnapshot } from '../../../src/snapshot/read.ts';
import type { LayoutInput } from '../../../src/snapshot/raw/layout.ts';
import { checkLayout } from '../../../src/snapshot/raw/layout-check.ts';
import { writeRaw } from '../../../src/snapshot/raw/write.ts';
import { measureMany } from '../../../src/survey/many.ts';
import { prepareSnapshots } from '../../../src/survey/prepare.ts';
import { bodiesOf, particlesOf } from '../../dynamics/samples.ts';
import { bodies, body, f64, i32, newFolder, put, putLayout, record, VECTORS } from './samples.ts';

let folder: string;
const folders: string[] = [];
beforeEach(async () => {
  folder = await newFolder();
  folders.push(folder);
});
afterAll(() => Promise.all(folders.map((name) => rm(name, { recursive: true }))));

type Layout = Omit<LayoutInput, 'settlemark'>;

/** The header of a part says its bodies, those of all, the number of parts, and the time. */
const LAYOUT: Layout = {
  headerBytes: 20,
  header: [
    { name: 'count', type: 'int32', offset: 0 },
    { name: 'totalCount', type: 'int32', offset: 4 },
    { name: 'partCount', type: 'int32', offset: 8 },
    { name: 'time', type: 'float64', offset: 12 },
  ],
  fields: VECTORS,
  parts: 'run_{part}.bin',
};
const range = (begin: number, end: number) => Array.from({ length: end - begin }, (_, k) => begin + k); // prettier-ignore
const rows = (begin: number, end: number) => f64('little', ...range(begin, end).flatMap(body));
const part = (begin: number, end: number, total: number, parts: number, time = 0.5): Buffer =>
  Buffer.concat([i32('little', end - begin, total, parts), f64('little', time), rows(begin, end)]);

/** Eleven parts of 2 bodies each, but for part 3, which is empty. */
async function eleven(): Promise<string[]> {
  await putLayout(folder, LAYOUT, 'layout.json');
  const paths: string[] = [];
  for (let k = 0, begin = 0; k < 11; k++) {
    const end = begin + (k === 3 ? 0 : 2);
    paths.push(await put(folder, `run_${k}.bin`, part(begin, end, 20, 11)));
    begin = end;
  }
  return paths;
}

describe('a snapshot in parts', () => {
  it('is all of them, whichever is named, in the order of their numbers', async () => {
    const paths = await eleven();
    for (const path of [paths[0], paths[10], paths[3]]) {
      const particles = await readSnapshot(path);
      expect(bodiesOf(particles)).toEqual(range(0, 20).map(body));
      expect(particles.time).toBe(0.5);
      expect(particles.origin.file).toBe(path);
      expect(particles.origin.remarks.map(({ code }) => code)).toEqual([
        'partsJoined',
        'layout.found',
      ]);
    }
  });

  it('is described as a whole', async () => {
    const paths = await eleven();
    const described = await describeSnapshot(paths[3]);
    expect(described).toMatchObject({ count: 20, time: 0.5, bytes: 11 * 20 + 20 * 56 });
    expect(described.structure).toContain('parts run_{part}.bin');
    expect(described.remarks[0].code).toBe('partsJoined');
  });

  it('may be Fortran records, and begin with part 1', async () => {
    await putLayout(
      folder,
      {
        ...LAYOUT,
        byteOrder: 'big',
        markers: 'fortran4',
        arrangement: 'columns',
        headerBytes: 4,
        header: [{ name: 'count', type: 'int32', offset: 0 }],
        parts: 'run.{part}',
      },
      'layout.json',
    );
    const column = (whose: number[], from: number, to: number) =>
      record('big', f64('big', ...whose.flatMap((i) => body(i).slice(from, to))));
    const file = (whose: number[]) =>
      Buffer.concat([
        record('big', i32('big', whose.length)),
        column(whose, 0, 1),
        column(whose, 1, 4),
        column(whose, 4, 7),
      ]);
    await put(folder, 'run.002', file([3, 4, 5]));
    const first = await put(folder, 'run.001', file([0, 1, 2]));
    expect(bodiesOf(await readSnapshot(first))).toEqual(range(0, 6).map(body));
  });

  it('has in each part the components and masses that its own header says', async () => {
    await putLayout(
      folder,
      {
        headerBytes: 16,
        header: [
          { name: 'nGas', type: 'int32', offset: 0 },
          { name: 'nDark', type: 'int32', offset: 4 },
          { name: 'darkMass', type: 'float64', offset: 8 },
        ],
        components: [
          { name: 'gas', count: { header: 'nGas' } },
          { name: 'dark', count: { header: 'nDark' }, mass: { header: 'darkMass' } },
        ],
        fields: [
          { name: 'mass', type: 'float64', components: ['gas'] },
          { name: 'position', type: 'float64', width: 3 },
          { name: 'velocity', type: 'float64', width: 3 },
        ],
        parts: 'run_{part}.bin',
      },
      'layout.json',
    );
    const gas = (i: number) => f64('little', ...body(i));
    const dark = (i: number) => f64('little', ...body(i).slice(1));
    const head = (nGas: number, nDark: number, mass: number) =>
      Buffer.concat([i32('little', nGas, nDark), f64('little', mass)]);
    const path = await put(
      folder,
      'run_0.bin',
      Buffer.concat([head(1, 2, 8), gas(0), dark(1), dark(2)]),
    );
    await put(folder, 'run_1.bin', Buffer.concat([head(2, 1, 9), gas(3), gas(4), dark(5)]));
    const particles = await readSnapshot(path, { optional: ['component'] });
    const mass = (i: number) => body(i)[0];
    expect([...particles.mass]).toEqual([mass(0), 8, 8, mass(3), mass(4), 9]);
    expect([...(particles.columns.component ?? [])]).toEqual([0, 1, 1, 0, 0, 1]);
    expect(particles.componentNames).toEqual(['gas', 'dark']);
    const only = await readSnapshot(path, { only: 'gas' });
    expect(bodiesOf(only)).toEqual([0, 3, 4].map(body));
    expect((await describeSnapshot(path)).components).toEqual([
      { name: 'gas', count: 3, mass: null },
      { name: 'dark', count: 3, mass: null },
    ]);
  });

  it('has one list of components, though parts meet their codes in other orders', async () => {
    const fields: LayoutInput['fields'] = [...VECTORS, { name: 'component', type: 'float64' }];
    await putLayout(folder, { fields, parts: 'run_{part}.bin' }, 'layout.json');
    const row = (i: number, code: number) => f64('little', ...body(i), code);
    const path = await put(folder, 'run_0.bin', Buffer.concat([row(0, 10), row(1, 4)]));
    await put(folder, 'run_1.bin', Buffer.concat([row(2, 4), row(3, 2)]));
    const { columns, componentNames } = await readSnapshot(path, { optional: ['component'] });
    expect(componentNames).toEqual(['2', '4', '10']);
    expect([...(columns.component ?? [])]).toEqual([2, 1, 1, 0]);
  });
});

describe('of a snapshot in parts is refused', () => {
  const code = async (path: string, layout?: string) =>
    readSnapshot(path, layout === undefined ? {} : { layout }).then(
      () => 'no error',
      (error: unknown) => error as { code: string; message: string; remedy: string },
    );

  it('a missing part in the middle, by its number', async () => {
    const paths = await eleven();
    await rm(paths[4]);
    expect(await code(paths[0])).toMatchObject({
      code: 'input.missingPart',
      message: expect.stringMatching(/part 4 is not in .*next .* part 5/) as string,
    });
  });

  it('a missing part at the beginning and at the end', async () => {
    const paths = await eleven();
    await rm(paths[10]);
    expect(await code(paths[0])).toMatchObject({
      code: 'input.missingPart',
      message: expect.stringContaining('in 11 parts; found 10') as string,
    });
    await rm(paths[0]);
    await rm(paths[1]);
    expect(await code(paths[2])).toMatchObject({
      code: 'input.missingPart',
      message: expect.stringContaining('part 0') as string,
    });
  });

  it('a count of all that they do not add up to', async () => {
    await putLayout(folder, LAYOUT, 'layout.json');
    const path = await put(folder, 'run_0.bin', part(0, 2, 5, 2));
    await put(folder, 'run_1.bin', part(2, 4, 5, 2));
    expect(await code(path)).toMatchObject({
      code: 'input.badCount',
      message: expect.stringMatching(/all parts have 5 bodies; found 4/) as string,
    });
  });

  it('a part of another time', async () => {
    await putLayout(folder, LAYOUT, 'layout.json');
    const path = await put(folder, 'run_0.bin', part(0, 2, 4, 2));
    const other = await put(folder, 'run_1.bin', part(2, 4, 4, 2, 0.75));
    expect(await code(path)).toMatchObject({
      code: 'input.partsDiffer',
      message: expect.stringContaining(`${other} has the time 0.75`) as string,
    });
  });

  it('two files with one number', async () => {
    const paths = await eleven();
    await put(folder, 'run_07.bin', part(0, 2, 20, 11));
    expect(await code(paths[0])).toMatchObject({
      code: 'input.partName',
      message: expect.stringContaining('number 7') as string,
    });
  });

  it('a name that does not fit', async () => {
    await putLayout(folder, LAYOUT, 'layout.json');
    const path = await put(folder, 'run.bin', part(0, 2, 2, 1));
    expect(await code(path)).toMatchObject({
      code: 'input.partName',
      message: expect.stringContaining('run_{part}.bin') as string,
    });
  });

  it('a part that is cut off, by its own name', async () => {
    const paths = await eleven();
    await put(folder, 'run_5.bin', part(0, 2, 20, 11).subarray(0, 100));
    expect(await code(paths[0])).toMatchObject({
      code: 'input.truncated',
      message: expect.stringContaining('run_5.bin') as string,
    });
  });

  it('one that has no bodies in any part, and one that is not there', async () => {
    await putLayout(folder, LAYOUT, 'layout.json');
    const path = await put(folder, 'run_0.bin', part(0, 0, 0, 2));
    await put(folder, 'run_1.bin', part(0, 0, 0, 2));
    expect(await code(path)).toMatchObject({ code: 'input.noParticles' });
    expect(await code(join(folder, 'run_9.bin'))).toMatchObject({ code: 'input.notFound' });
  });

  it('writing', async () => {
    const layout = checkLayout({ settlemark: 'layout/1', ...LAYOUT }, 'l.json');
    const particles = particlesOf([[1, 0, 0, 0, 0, 0, 0]]);
    await expect(writeRaw(join(folder, 'run_0.bin'), particles, layout)).rejects.toMatchObject({
      code: 'input.layoutUnsupported',
    });
  });
});

describe('a series of snapshots in parts', () => {
  const layout: Layout = { fields: VECTORS, parts: 'run_*.{part}' };
  const names = ['run_010.0', 'run_010.1', 'run_9.0', 'run_9.1', 'run_9.2'];
  const putAll = async (into: string): Promise<string[]> =>
    Promise.all(names.map((name, k) => put(into, name, bodies('little', k + 2))));

  it('has one entry for each, and one outcome', async () => {
    await putLayout(folder, layout, 'layout.json');
    const paths = await putAll(folder);
    const prepared = await prepareSnapshots(paths, {});
    expect(prepared.map(({ file, parts }) => [file, parts?.length])).toEqual([
      [paths[0], 2],
      [paths[2], 3],
    ]);
    // Parts 2 and 4 of the list stand for nothing of their own.
    for (const snapshots of [paths, prepared]) {
      const counts: number[] = [];
      for await (const { record: made } of measureMany(snapshots, {}, crewOfOne())) {
        counts.push(made?.whole.particles ?? 0);
      }
      expect(counts).toEqual([5, 15]);
    }
  });

  it('is known by the layout that is named, too, and a gap is told once', async () => {
    const path = await putLayout(folder, layout);
    const inside = join(folder, 'inside');
    await mkdir(inside);
    const paths = await putAll(inside);
    await rm(paths[3]);
    const left = paths.filter((_, k) => k !== 3);
    const codes: (string | undefined)[] = [];
    const options = { read: { layout: path } };
    for await (const { error } of measureMany(left, options, crewOfOne())) codes.push(error?.code);
    expect(codes).toEqual([undefined, 'input.missingPart']);
  });
});
