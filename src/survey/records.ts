/** Records that were made earlier: one JSON object a line, or a table as CSV or Arrow. */
import { createReadStream } from 'node:fs';
import { open, readFile } from 'node:fs/promises';
import { RECORD_VERSION, type MeasureRecord } from '../dynamics/record.ts';
import { InputError } from '../errors.ts';
import { asReadError } from '../snapshot/files.ts';
import { blocksOfLines } from '../snapshot/lines.ts';
import { notATable, recordsFromTable } from './recordTables.ts';

/** Keys without which a line is not a record. */
const KEYS = ['whole', 'bound', 'lagrangian', 'boundLagrangian', 'frame', 'settings', 'engine'];

/** Mark of a table of records among the metadata of an Arrow schema. */
const ARROW_MARK = 'settlemark.record';
/** The metadata of an Arrow stream stand at its beginning, those of a file may stand at its end alone. */
const ARROW_ENDS_BYTES = 2 ** 18;

/**
 * Whether a path is one of records: named like lines of JSON or CSV, or an Arrow table of records.
 * A file that cannot be looked at is none; its reader says why.
 */
export async function isRecords(path: string): Promise<boolean> {
  if (/\.(ndjson|jsonl|csv)$/i.test(path)) return true;
  if (!/\.(arrows?|feather|ipc)$/i.test(path)) return false;
  try {
    const handle = await open(path, 'r');
    try {
      const { size } = await handle.stat();
      const end = Buffer.alloc(Math.min(ARROW_ENDS_BYTES, size));
      for (const position of [0, size - end.length]) {
        await handle.read(end, 0, end.length, position);
        if (end.includes(ARROW_MARK)) return true;
      }
      return false;
    } finally {
      await handle.close();
    }
  } catch {
    return false;
  }
}

/**
 * Reads records: `.csv` and Arrow tables of records, else one record a line, where empty lines are passed over.
 * @throws InputError `input.notARecord` with file and line; `input.recordVersion`; `input.notFound`
 */
export async function readRecords(path: string): Promise<MeasureRecord[]> {
  try {
    if (/\.csv$/i.test(path)) return await fromCsv(path);
    if (/\.(arrows?|feather|ipc)$/i.test(path)) return await fromArrow(path);
    return await fromLines(path);
  } catch (error) {
    if (error instanceof InputError) throw error;
    throw asReadError(path, error);
  }
}

async function fromLines(path: string): Promise<MeasureRecord[]> {
  const records: MeasureRecord[] = [];
  let line = 0;
  for await (const texts of blocksOfLines(createReadStream(path, { highWaterMark: 2 ** 20 }))) {
    for (const text of texts) {
      line++;
      if (text.trim() !== '') records.push(recordIn(text, path, line));
    }
  }
  return records;
}

function recordIn(text: string, path: string, line: number): MeasureRecord {
  let value: unknown;
  try {
    value = JSON.parse(text);
  } catch (error) {
    throw notARecord(path, line, 'it is not JSON', error);
  }
  if (value === null || typeof value !== 'object')
    throw notARecord(path, line, 'it is not an object');
  const missing = KEYS.find((key) => {
    const part = (value as Record<string, unknown>)[key];
    return part === null || typeof part !== 'object';
  });
  if (missing !== undefined) throw notARecord(path, line, `it has no "${missing}"`);
  const { record: version } = value as { record?: unknown };
  if (version !== RECORD_VERSION) {
    throw new InputError(
      'input.recordVersion',
      `${path}, line ${line}: a record of version ${JSON.stringify(version) ?? 'none'}; this Settlemark knows version ${RECORD_VERSION}`,
      'measure the snapshot again',
    );
  }
  return value as MeasureRecord;
}

function notARecord(path: string, line: number, why: string, cause?: unknown): InputError {
  return new InputError(
    'input.notARecord',
    `${path}, line ${line}: not a record of a snapshot: ${why}`,
    'give files that `settlemark measure --format ndjson` wrote, one record a line',
    { cause },
  );
}

async function fromCsv(path: string): Promise<MeasureRecord[]> {
  const { parse } = await import('csv-parse/sync');
  const text = await readFile(path, 'utf8');
  let rows: string[][];
  try {
    rows = parse(text, { bom: true, skip_empty_lines: true });
  } catch (error) {
    throw notATable(path, `it is not CSV: ${error instanceof Error ? error.message : ''}`, error);
  }
  const [names, ...cells] = rows;
  if (names === undefined) throw notATable(path, 'it is empty');
  return recordsFromTable({
    path,
    names,
    rows: cells.length,
    cell: (row, column) => cells[row][column],
    place: (row) => `${path}, row ${row + 2}`,
  });
}

async function fromArrow(path: string): Promise<MeasureRecord[]> {
  const { tableFromIPC } = await import('apache-arrow');
  const bytes = await readFile(path);
  let table: ReturnType<typeof tableFromIPC>;
  try {
    table = tableFromIPC(bytes);
  } catch (error) {
    throw notATable(path, 'it is not Arrow, or not whole', error);
  }
  const names = table.schema.fields.map(({ name }) => name);
  const vectors = names.map((_, k) => table.getChildAt(k));
  return recordsFromTable({
    path,
    names,
    rows: table.numRows,
    cell: (row, column) => {
      const value: unknown = vectors[column]?.get(row) ?? null;
      return typeof value === 'bigint'
        ? Number(value)
        : (value as string | number | boolean | null);
    },
    place: (row) => `${path}, row ${row + 1}`,
  });
}
