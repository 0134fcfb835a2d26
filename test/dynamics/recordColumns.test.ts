/** Tables of records, read back by readers that know nothing of Settlemark. */
import { tableFromIPC as readByFlechette } from '@uwdata/flechette';
import { tableFromIPC } from 'apache-arrow';
import { parse } from 'csv-parse/sync';
import * as fc from 'fast-check';
import polars from 'nodejs-polars';
import { describe, expect, it } from 'vitest';
import { recordsToArrow } from '../../src/dynamics/recordArrow.ts';
import { recordColumns } from '../../src/dynamics/recordColumns.ts';
import { csvField, recordsToCsv } from '../../src/dynamics/recordCsv.ts';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { QUANTITIES } from '../../src/dynamics/registry.ts';
import { madeRecord } from '../cli/made.ts';
import { measureModel } from './samples.ts';

const NAMES = [
  'extra.bin',
  'a "quoted", name.bin',
  'two\nlines\r\n.bin',
  ' spaces ',
  'ünï—☉.bin',
  '=1+1',
];

/** Lists of shells, profiles and pairs; but the axis of the shells is a vector. */
const NUMBERED = /^(shells|profiles|hardestPairs)\.(?!axis$)/;

/** Records that differ in all that a table must bear: fractions, nulls, units, text. */
async function various(): Promise<MeasureRecord[]> {
  const [sphere, soft, one, extra] = await Promise.all([
    measureModel('plummer', 200, 3, { fractions: [0.3] }),
    measureModel('plummer', 50, 3, { softening: 0.1, units: 'pc-kms-msun' }),
    measureModel('plummer', 1, 3),
    measureModel('plummer', 400, 3, { with: ['all'] }),
  ]);
  const own = madeRecord({
    settings: {
      units: {
        value: 'own',
        from: 'option',
        system: { mass: '1e10 Msun', length: 'kpc', velocity: 'km/s', time: 'Gyr', gravity: 43007 },
      },
    },
  });
  const records = [sphere, soft, one, extra, own, madeRecord({ time: null, coreRadius: null })];
  return records.map((record, k) => ({ ...record, file: NAMES[k] }));
}

/** What a record says, by the names that the docs promise; written apart from the code. */
function expected(record: MeasureRecord): Map<string, unknown> {
  const cells = new Map<string, unknown>();
  const visit = (path: string, value: unknown): void => {
    if (path === 'remarks') {
      cells.set(path, (value as { code: string }[]).map(({ code }) => code).join(' '));
    } else if (Array.isArray(value) && ['settings.fractions', 'settings.with'].includes(path)) {
      cells.set(path, value.join(' '));
    } else if (Array.isArray(value) && NUMBERED.test(path)) {
      value.forEach((item, k) => cells.set(`${path}[${k}]`, item));
    } else if (Array.isArray(value)) {
      value.forEach((item, k) => cells.set(`${path}.${'xyz'[k]}`, item));
    } else if (/^(lagrangian|boundLagrangian)$/.test(path)) {
      const { fractions, radii, errors } = value as MeasureRecord['lagrangian'];
      fractions.forEach((fraction, k) => {
        cells.set(`${path}[${fraction}]`, radii[k]);
        cells.set(`${path}.errors[${fraction}]`, errors[k]);
      });
    } else if (typeof value === 'object' && value !== null) {
      for (const [key, part] of Object.entries(value)) {
        visit(key === 'value' ? path : [path, key].filter(Boolean).join('.'), part);
      }
    } else cells.set(path, value);
  };
  visit('', record);
  return cells;
}

describe('records as CSV', () => {
  it('have every figure of the record, digit by digit, under the names that are promised', async () => {
    const records = await various();
    const rows: Record<string, string>[] = parse(await recordsToCsv(records), { columns: true });
    expect(rows).toHaveLength(records.length);
    const names = new Set(records.flatMap((record) => [...expected(record).keys()]));
    expect(new Set(Object.keys(rows[0]))).toEqual(names);
    records.forEach((record, k) => {
      const cells = expected(record);
      for (const [name, text] of Object.entries(rows[k])) {
        const value = cells.get(name) as string | number | boolean | null | undefined;
        if (typeof value === 'number') {
          expect([record.file, name, text && Number(text)]).toEqual([record.file, name, value]);
        } else expect([record.file, name, text]).toEqual([record.file, name, `${value ?? ''}`]);
      }
    });
  });

  it('are one head for one record, and a head alone for none', async () => {
    const [head, ...rest] = (await recordsToCsv([madeRecord()])).split('\n');
    expect(rest).toHaveLength(2);
    expect(rest[1]).toBe('');
    expect(head.startsWith('record,file,time,')).toBe(true);
    expect(head).toContain(',lagrangian[0.1],lagrangian[0.5],lagrangian.errors[0.1],');
    expect((await recordsToCsv([])).trim().split('\n')).toHaveLength(1);
  });

  it('say the same to another parser whatever the text', () => {
    const cell = fc.oneof(
      fc.string({ unit: 'binary' }),
      fc.string({ unit: fc.constantFrom('"', ',', '\n', '\r', ' ', 'a') }),
    );
    const rows = fc.array(fc.array(cell, { minLength: 3, maxLength: 3 }), { minLength: 1 });
    fc.assert(
      fc.property(rows, (table) => {
        const text = table.map((row) => row.map(csvField).join(',')).join('\n') + '\n';
        expect(parse(text, { record_delimiter: '\n' })).toEqual(table);
      }),
      { seed: 7 },
    );
  });

  it('tell an empty text from a null', () => {
    expect([csvField(null), csvField('')]).toEqual(['', '""']);
  });
});

describe('records as Arrow', () => {
  it('are columns without rows for no record', async () => {
    const table = tableFromIPC(await recordsToArrow([]));
    expect([table.numRows, table.getChild('whole.mass')?.length]).toEqual([0, 0]);
  });

  const plain = (value: unknown) => (typeof value === 'bigint' ? Number(value) : value);

  it.each(['file', 'stream'] as const)('as a %s say the same to three readers', async (format) => {
    const records = await various();
    const bytes = await recordsToArrow(records, format);
    const byArrow = tableFromIPC(bytes);
    const byFlechette = readByFlechette(bytes);
    const body = Buffer.from(bytes);
    const byPolars = format === 'file' ? polars.readIPC(body) : polars.readIPCStream(body);
    const names = byArrow.schema.fields.map(({ name }) => name);
    expect(names).toHaveLength((await recordColumns(records)).length);
    expect(byPolars.columns).toEqual(names);
    for (const name of names) {
      const wanted = records.map((record) => expected(record).get(name) ?? null);
      const column = byArrow.getChild(name);
      const found = {
        arrow: records.map((_, k) => plain(column?.get(k))),
        flechette: [...byFlechette.getChild(name)].map(plain),
        polars: byPolars.getColumn(name).toArray().map(plain),
      };
      expect([name, found]).toEqual([name, { arrow: wanted, flechette: wanted, polars: wanted }]);
    }
  });

  it('name unit, dimension, error and meaning of each column', async () => {
    const record = await measureModel('plummer', 50, 3, { units: 'pc-kms-msun' });
    const fields = readByFlechette(await recordsToArrow([record])).schema.fields;
    const metadata = (name: string) =>
      Object.fromEntries(fields.find((field) => field.name === name)?.metadata ?? []) as unknown;
    expect(metadata('whole.potential')).toMatchObject({
      unit: 'Msun (km/s)²',
      dimension: 'mass length² time⁻²',
      error: 'whole.potentialError',
    });
    expect(metadata('lagrangian[0.5]')).toMatchObject({
      unit: 'pc',
      dimension: 'length',
      error: 'lagrangian.errors[0.5]',
    });
    expect(metadata('settings.gravity')).toMatchObject({ dimension: 'mass⁻¹ length³ time⁻²' });
    expect(metadata('engine.seconds.total')).toMatchObject({ unit: 's' });
    expect(metadata('whole.virialRatio')).not.toHaveProperty('unit');
    for (const { metadata: own } of fields) expect(own?.get('text')).toMatch(/\w/);
  });

  it('name no unit where the records have different ones', async () => {
    const columns = await recordColumns(await various());
    const radius = columns.find(({ name }) => name === 'halfMassRadius');
    expect(radius).toMatchObject({ unit: '', dimension: { mass: 0, length: 1, time: 0 } });
  });
});

it('a column for each quantity of the registry, and errors that are columns themselves', async () => {
  const columns = await recordColumns([madeRecord()]);
  const names = columns.map(({ name }) => name);
  expect(new Set(names).size).toBe(names.length);
  for (const { key, kind, extra = null } of QUANTITIES as readonly {
    key: string;
    kind: string;
    extra?: string | null;
  }[]) {
    if (extra !== null || key.endsWith('.fractions')) continue;
    const member = { vector: '.x', list: '[0.5]' }[kind] ?? '';
    expect(names).toContain(key.replace(/\.radii$/, '') + member);
  }
  for (const { error } of columns) if (error !== null) expect(names).toContain(error);
});
