/** Records that were written in any format are read back as they were, and what is none is told with its place. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { recordsToArrow } from '../../src/dynamics/recordArrow.ts';
import { recordsToCsv } from '../../src/dynamics/recordCsv.ts';
import { makeModel } from '../../src/models/make.ts';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import { blocksOfLines, linesOf } from '../../src/snapshot/lines.ts';
import { isRecords, readRecords } from '../../src/survey/records.ts';
import { measure, measureModel } from '../dynamics/samples.ts';
import { madeRecord } from '../cli/made.ts';

let folder: string;
const at = (name: string): string => join(folder, name);
let records: MeasureRecord[];

const sphere = makeModel({ model: 'plummer', count: 50, seed: 4 });
const withLengths = { ...sphere, columns: { softening: sphere.mass.map((_, i) => 0.1 * i) } };

beforeAll(async () => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-records-'));
  records = [
    await measureModel('plummer', 200, 3, { fractions: [0.3] }),
    await measureModel('plummer', 400, 3, { with: ['all'], softening: 0.1 }),
    await measureModel('plummer', 1, 3),
    await measure(withLengths, { softening: 'column' }),
    madeRecord({ time: null, coreRadius: null }),
  ];
});
afterAll(() => rmSync(folder, { recursive: true }));

/** What a table keeps: of remarks their codes, of the hardest pairs nothing that is a list of identifiers. */
function kept(record: MeasureRecord): unknown {
  const remarks = record.remarks.map(({ code }) => code);
  return JSON.parse(JSON.stringify({ ...record, remarks, hardestPairs: undefined }));
}

describe('records in', () => {
  it.each(['a.csv', 'a.arrow', 'a.arrows'])('%s are read back to the last bit', async (name) => {
    const isStream = name.endsWith('s');
    const bytes = name.endsWith('csv')
      ? await recordsToCsv(records)
      : await recordsToArrow(records, isStream ? 'stream' : 'file');
    writeFileSync(at(name), bytes);
    expect(await isRecords(at(name))).toBe(true);
    expect((await readRecords(at(name))).map(kept)).toEqual(records.map(kept));
  });

  it('lines of JSON are read back as they were, with or without a last line end', async () => {
    const lines = records.map((record) => JSON.stringify(record));
    const plain = JSON.parse(JSON.stringify(records)) as MeasureRecord[];
    for (const text of [lines.join('\n'), `${lines.join('\r\n')}\r\n\r\n`]) {
      writeFileSync(at('a.ndjson'), text);
      expect(await readRecords(at('a.ndjson'))).toEqual(plain);
    }
  });
});

describe('what is no record', () => {
  it.each([
    ['a.ndjson', '{"record":1}', 'line 1', 'it has no "whole"'],
    ['b.ndjson', 'null', 'line 1', 'not an object'],
    ['c.ndjson', '\n{', 'line 2', 'not JSON'],
    ['a.csv', 'a,b\n1,2\n', 'a.csv', 'no column "record"'],
    ['b.csv', '', 'b.csv', 'empty'],
    ['c.csv', 'a,b\n1,"2\n', 'c.csv', 'not CSV'],
    ['a.arrow', 'ARROW1 and then nothing', 'a.arrow', 'not Arrow'],
  ])('%s is told with its place', async (name, text, place, why) => {
    writeFileSync(at(name), text);
    const error: unknown = await readRecords(at(name)).catch((reason: unknown) => reason);
    expect(error).toMatchObject({ code: 'input.notARecord' });
    expect((error as Error).message).toContain(place);
    expect((error as Error).message).toContain(why);
  });

  it('a text where a number belongs is told with row and column', async () => {
    const text = await recordsToCsv(records);
    const value = String(records[1].whole.kinetic);
    writeFileSync(at('d.csv'), text.replace(value, 'much'));
    await expect(readRecords(at('d.csv'))).rejects.toMatchObject({
      code: 'input.notARecord',
      message: expect.stringMatching(/row 3.*"much" in column "whole\.kinetic"/) as string,
    });
  });

  it('another version is told', async () => {
    const other = { ...records[0], record: 2 } as unknown as MeasureRecord;
    writeFileSync(at('e.ndjson'), JSON.stringify(other));
    await expect(readRecords(at('e.ndjson'))).rejects.toMatchObject({
      code: 'input.recordVersion',
    });
    await expect(readRecords(at('none.ndjson'))).rejects.toMatchObject({ code: 'input.notFound' });
  });
});

it('lines are the same wherever the bytes are cut', async () => {
  const text = 'ein\nzwölf — ☉\r\n\nlast';
  const bytes = Buffer.from(text);
  for (let size = 1; size <= bytes.length; size++) {
    const chunks = async function* () {
      for (let k = 0; k < bytes.length; k += size) yield bytes.subarray(k, k + size);
      await Promise.resolve();
    };
    const found: string[] = [];
    for await (const line of linesOf(chunks())) found.push(line);
    expect(found).toEqual(['ein', 'zwölf — ☉', '', 'last']);
    const blocks: string[][] = [];
    for await (const block of blocksOfLines(chunks())) blocks.push(block);
    expect(blocks.flat()).toEqual(found);
  }
});
