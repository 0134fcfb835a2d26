/** `--forces file` from the command line, on files of both formats. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/index.ts';
import { makeModel } from '../../src/models/make.ts';
import { writeArrow } from '../../src/snapshot/arrow/write.ts';
import { withColumns, writtenForces } from '../dynamics/fileColumns.ts';
import { bodiesOf, plainBalance } from '../dynamics/samples.ts';
import { settlemark } from './run.ts';

const SOFTENING = { kernel: 'plummer', length: 0.1 } as const;
const sphere = makeModel({ model: 'plummer', count: 300, seed: 8 });
const written = writtenForces(sphere, SOFTENING);
const plain = plainBalance(bodiesOf(sphere), SOFTENING);

let folder: string;
const at = (name: string): string => join(folder, name);

beforeAll(async () => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-forces-'));
  await writeArrow(at('both.arrow'), withColumns(sphere, written));
  await writeArrow(at('none.arrow'), sphere);
  const { x, y, z } = written.acceleration;
  const rows = bodiesOf(sphere).flatMap((b, i) => [...b, -written.potential[i], x[i], y[i], z[i]]);
  writeFileSync(at('both.bin'), new Uint8Array(Float64Array.from(rows).buffer));
  const names = ['mass', 'position', 'velocity', 'potential', 'acceleration'];
  const fields = names.map((name) => ({
    name: name === 'potential' ? 'binding' : name,
    type: 'float64',
    width: ['mass', 'potential'].includes(name) ? 1 : 3,
  }));
  writeFileSync(at('layout.json'), JSON.stringify({ settlemark: 'layout/1', fields }));
});

afterAll(() => rmSync(folder, { recursive: true }));

it.each([
  ['both.arrow', [], []],
  ['both.bin', ['--columns', 'potential=binding'], ['layout.found', 'potentialSign']],
] as [string, string[], string[]][])('%s', async (name, columns, codes) => {
  const argv = ['measure', at(name), ...columns, '--softening', '0.1', '--forces', 'file'];
  const { code, out } = await settlemark([...argv, '--format', 'json', '--quiet']);
  expect(code).toBe(0);
  const record = JSON.parse(out) as MeasureRecord;
  expect(record.engine.origin).toBe('file');
  // The same loops wrote the columns: rounding.
  expect(record.whole.potential / plain.potential).toBeCloseTo(1, 11);
  expect(record.whole.clausius / plain.clausius).toBeCloseTo(1, 11);
  expect(record.remarks.map((remark) => remark.code)).toEqual(
    expect.arrayContaining([...codes, 'softenedRatio']),
  );
  expect((await settlemark(argv)).out).toContain('U and W from the file');
});

it('a file without the columns, and a choice that there is not', async () => {
  const missing = await settlemark(['measure', at('none.arrow'), '--forces', 'file']);
  expect(missing).toMatchObject({ code: 3, out: '' });
  expect(missing.err).toContain('input.missingForces');
  const wrong = await settlemark(['measure', at('none.arrow'), '--forces', 'simulation']);
  expect(wrong).toMatchObject({ code: 2, out: '' });
  expect(wrong.err).toContain('own, file');
});
