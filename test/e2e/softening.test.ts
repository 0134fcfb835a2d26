/** `--softening column` from the command line, on files of both formats. */
import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/index.ts';
import { makeModel } from '../../src/models/make.ts';
import { writeArrow } from '../../src/snapshot/arrow/write.ts';
import { plainField, type Columns } from '../octree/samples.ts';
import { settlemark } from './run.ts';

const COUNT = 300;
const sphere = makeModel({ model: 'plummer', count: COUNT, seed: 8 });
// The first hundred are of the one kind, the rest of the other.
const lengths = Float64Array.from({ length: COUNT }, (_, i) => (i < 100 ? 0.5 : 0.01));
const plain = plainField(sphere as Columns, { kernel: 'plummer', length: 1, lengths });

let folder: string;
const at = (name: string): string => join(folder, name);

function writeRaw(name: string, change: (row: number[], i: number) => void): void {
  const { mass, x, y, z, vx, vy, vz } = sphere;
  const rows = Array.from(mass, (m, i) => {
    const row = [m, x[i], y[i], z[i], vx[i], vy[i], vz[i], lengths[i]];
    change(row, i);
    return row;
  });
  writeFileSync(at(name), new Uint8Array(Float64Array.from(rows.flat()).buffer));
}

beforeAll(async () => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-softening-'));
  mkdirSync(at('run'));
  const columns = { softening: lengths };
  await writeArrow(at('each.arrow'), { ...sphere, columns });
  await writeArrow(at('run/each.arrow'), { ...sphere, columns });
  await writeArrow(at('none.arrow'), sphere);
  writeFileSync(at('run/settlemark.json'), JSON.stringify({ softening: 'column' }));
  const reals = ['mass', 'position', 'velocity'].map((name) => ({
    name,
    type: 'float64',
    width: name === 'mass' ? 1 : 3,
  }));
  const layout = { settlemark: 'layout/1', fields: [...reals, { name: 'eps', type: 'float64' }] };
  writeFileSync(at('each.layout.json'), JSON.stringify(layout));
  writeRaw('each.bin', () => undefined);
  writeRaw('negative.bin', (row, i) => (row[7] = i === 41 ? -0.5 : row[7]));
  writeRaw('nan.bin', (row, i) => (row[7] = i === 123 ? NaN : row[7]));
  const components = [
    { name: 'dark', count: 100, softening: 0.5 },
    { name: 'stars', count: 200, softening: 0.01 },
  ];
  const kinds = { settlemark: 'layout/1', components, fields: reals };
  writeFileSync(at('kinds.layout.json'), JSON.stringify(kinds));
  writeRaw('kinds.bin', (row) => row.pop());
});

afterAll(() => rmSync(folder, { recursive: true }));

it.each([
  ['each.arrow', ['--softening', 'column'], 'option'],
  ['run/each.arrow', [], 'run file'],
  [
    'each.bin',
    ['--layout', 'each.layout.json', '--columns', 'softening=eps', '--softening', 'column'],
    'option',
  ],
  ['kinds.bin', ['--layout', 'kinds.layout.json', '--softening', 'column'], 'option'],
])('%s', async (name, options, from) => {
  const argv = ['measure', at(name), ...options.map((o) => (o.endsWith('.json') ? at(o) : o))];
  const { code, out, err } = await settlemark([...argv, '--format', 'json', '--quiet']);
  expect(err).toBe('');
  expect(code).toBe(0);
  const record = JSON.parse(out) as MeasureRecord;
  // Direct sums both: rounding of some hundred terms of one sign.
  expect(record.whole.potential / plain.potential).toBeCloseTo(1, 12);
  expect(record.whole.clausius / plain.clausius).toBeCloseTo(1, 12);
  expect(record.settings.softening).toMatchObject({
    value: { kernel: 'plummer', support: null, ofBodies: { least: 0.01, greatest: 0.5 } },
    from,
  });
  expect(record.remarks.map((remark) => remark.code)).not.toContain('softeningUnused');
});

it('the page and the tables say whose lengths they are', async () => {
  const argv = ['measure', at('each.arrow'), '--softening', 'column'];
  const page = (await settlemark(argv)).out.replace(/\s+/g, ' ');
  expect(page).toContain('plummer softening of each body, 0.01 to 0.5 (option)');
  const { out } = await settlemark([...argv, '--format', 'csv', '--quiet']);
  const [head, row] = out.split('\n').map((line) => line.split(','));
  expect(row[head.indexOf('settings.softening.ofBodies.greatest')]).toBe('0.5');
});

it.each([
  ['each.arrow', []],
  ['each.bin', ['--layout', 'each.layout.json', '--columns', 'softening=eps']],
  ['kinds.bin', ['--layout', 'kinds.layout.json']],
])('lengths that are not used are remarked on: %s', async (name, options) => {
  const argv = ['measure', at(name), ...options.map((o) => (o.endsWith('.json') ? at(o) : o))];
  const remarksOf = async (more: string[]) => {
    const { out } = await settlemark([...argv, ...more, '--format', 'json', '--quiet']);
    return (JSON.parse(out) as MeasureRecord).remarks.map(({ code }) => code);
  };
  expect(await remarksOf([])).toContain('softeningUnused');
  expect(await remarksOf(['--softening', '0'])).not.toContain('softeningUnused');
});

it.each([
  ['none.arrow', [], 'input.missingSoftening', 'none.arrow'],
  ['each.bin', ['--layout', 'each.layout.json'], 'input.missingSoftening', '--columns softening='],
  [
    'negative.bin',
    ['--layout', 'each.layout.json', '--columns', 'softening=eps'],
    'input.negativeSoftening',
    'body 41',
  ],
  [
    'nan.bin',
    ['--layout', 'each.layout.json', '--columns', 'softening=eps'],
    'input.notFinite',
    'body 123',
  ],
])('%s cannot be used', async (name, options, code, place) => {
  const files = options.map((o) => (o.endsWith('.json') ? at(o) : o));
  const result = await settlemark(['measure', at(name), ...files, '--softening', 'column']);
  expect(result).toMatchObject({ code: 3, out: '' });
  expect(result.err).toContain(code);
  expect(result.err.replace(/\s+/g, ' ')).toContain(place);
});

it('a word that is no length', async () => {
  const result = await settlemark(['measure', at('none.arrow'), '--softening', 'columns']);
  expect(result).toMatchObject({ code: 2, out: '' });
  expect(result.err).toContain('usage.value');
});
