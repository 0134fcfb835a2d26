/** What we write is read exactly by others: nodejs-polars 0.24.1, @uwdata/flechette 2.6.0, apache-arrow. */
import { readFile, readdir } from 'node:fs/promises';
import { join } from 'node:path';
import * as fl from '@uwdata/flechette';
import { tableFromIPC } from 'apache-arrow';
import pl from 'nodejs-polars';
import { describe, expect, it } from 'vitest';
import { UsageError } from '../../../src/errors.ts';
import { readArrow } from '../../../src/snapshot/arrow/read.ts';
import { writeArrow } from '../../../src/snapshot/arrow/write.ts';
import { allocateColumn, type Particles } from '../../../src/snapshot/particles.ts';
import { UNIT_SYSTEMS } from '../../../src/snapshot/units.ts';
import { componentsOf, expectInputError, idsOf, numbersOf, temporaryFolder } from './sample.ts';

const folder = await temporaryFolder();
const COUNT = 1000;

function column(form: (i: number) => number, type: 'float64' | 'float32' = 'float64') {
  const values = allocateColumn(COUNT, type);
  for (let i = 0; i < COUNT; i++) values[i] = form(i);
  return values;
}

const particles: Particles = {
  count: COUNT,
  mass: column((i) => 1 / (i + 1)),
  x: column((i) => Math.sin(i)),
  y: column((i) => Math.cos(i), 'float32'),
  z: column((i) => -i * 1e300),
  vx: column((i) => i * 5e-324),
  vy: column(() => -0),
  vz: column((i) => i / 3, 'float32'),
  columns: {
    id: BigUint64Array.from({ length: COUNT }, (_, i) => 2n ** 64n - 1n - BigInt(i)),
    component: Uint16Array.from({ length: COUNT }, (_, i) => i % 3),
    potential: column((i) => -1 / (i + 2)),
    acceleration: { x: column((i) => i), y: column((i) => 2 * i), z: column((i) => 3 * i) },
  },
  componentNames: ['bulge', 'disk', 'Halo Σ'],
  time: 0.1 + 0.2,
  units: UNIT_SYSTEMS['kpc-kms-msun'],
  gravity: UNIT_SYSTEMS['kpc-kms-msun'].gravity,
  softening: 1e-3,
  frame: { kind: 'physical' },
  origin: { file: 'made', format: 'made', mantissaBits: 24, remarks: [] },
};
const ALL = { optional: ['component', 'potential', 'acceleration', 'density'] } as const;
const names = particles.columns.component!;
const componentList = Array.from(names, (index) => particles.componentNames[index]);

describe.each(['file', 'stream'] as const)('writeArrow, %s', (format) => {
  const path = join(folder, `${format}.out`);
  // 1000 rows in batches of 300: three full ones and a rest.
  const write = () => writeArrow(path, particles, { format, rowsPerBatch: 300 });

  it('is read back with every bit and fact', async () => {
    await write();
    const back = await readArrow(path, ALL);
    expect(numbersOf(back)).toEqual(numbersOf(particles));
    expect(back.vy.every((value) => Object.is(value, -0))).toBe(true);
    expect(back.y).toBeInstanceOf(Float32Array);
    expect(idsOf(back)).toEqual(idsOf(particles));
    expect(componentsOf(back)).toEqual(componentList);
    expect(Array.from(back.columns.potential ?? [])).toEqual(
      Array.from(particles.columns.potential ?? []),
    );
    expect(Array.from(back.columns.acceleration?.z ?? [])).toEqual(
      Array.from(particles.columns.acceleration?.z ?? []),
    );
    const { time, units, gravity, softening, frame } = particles;
    expect(back).toMatchObject({ time, units, gravity, softening, frame });
    expect(back.origin.format).toBe(`arrow-${format}`);
  });

  it('is read by polars', async () => {
    await write();
    const bytes = await readFile(path);
    const frame = format === 'file' ? pl.readIPC(bytes) : pl.readIPCStream(bytes);
    expect(frame.height).toBe(COUNT);
    for (const [name, values] of Object.entries(numbersOf(particles)))
      expect(frame.getColumn(name).toArray(), name).toEqual(values);
    expect(frame.getColumn('component').cast(pl.Utf8).toArray()).toEqual(componentList);
  });

  it('is read by flechette', async () => {
    await write();
    const table = fl.tableFromIPC(await readFile(path), { useBigInt: true });
    for (const [name, values] of Object.entries(numbersOf(particles)))
      expect(Array.from(table.getChild(name).toArray()), name).toEqual(values);
    expect(Array.from(table.getChild('id').toArray())).toEqual(idsOf(particles));
    expect([...table.getChild('component')]).toEqual(componentList);
    expect(table.schema.metadata?.get('settlemark.time')).toBe('0.30000000000000004');
    expect(table.children.map((child) => child.data.length)).toEqual(Array(13).fill(4));
  });

  it('is read by apache-arrow', async () => {
    await write();
    const table = tableFromIPC(await readFile(path));
    expect(table.numRows).toBe(COUNT);
    expect(Array.from(table.getChild('z')!.toArray() as Float64Array)).toEqual(
      Array.from(particles.z),
    );
    expect(table.getChild('component')!.get(2)).toBe('Halo Σ');
  });
});

describe('writeArrow', () => {
  it('takes the format from the name unless told', async () => {
    await writeArrow(join(folder, 'a.arrows'), particles);
    await writeArrow(join(folder, 'a.arrow'), particles);
    expect((await readArrow(join(folder, 'a.arrows'))).origin.format).toBe('arrow-stream');
    expect((await readArrow(join(folder, 'a.arrow'))).origin.format).toBe('arrow-file');
  });

  it('keeps own units and comoving coordinates', async () => {
    const path = join(folder, 'own.arrow');
    const facts = {
      time: null,
      gravity: 2,
      softening: 0,
      units: { name: 'own', mass: 'u', length: 'l', velocity: 'v', time: 'l/v', gravity: 2 },
      frame: {
        kind: 'comoving',
        scaleFactor: 0.5,
        hubbleRate: 70,
        boxSize: null,
        velocity: 'dx/dt',
      },
    } as const;
    await writeArrow(path, { ...particles, ...facts });
    expect(await readArrow(path)).toMatchObject(facts);
  });

  it('refuses a wrong batch size and leaves nothing behind', async () => {
    const path = join(folder, 'none.arrow');
    const before = (await readdir(folder)).length;
    await expect(writeArrow(path, particles, { rowsPerBatch: 0 })).rejects.toThrow(UsageError);
    await expectInputError(
      writeArrow(join(folder, 'no', 'none.arrow'), particles),
      'input.cannotWrite',
      /no.none\.arrow/,
    );
    expect(await readdir(folder)).toHaveLength(before);
  });
});
