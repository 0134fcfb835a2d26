/** A table of times: CSV with the columns `file` and `time`, one row a snapshot. */
import { readdir } from 'node:fs/promises';
import { basename, dirname, resolve } from 'node:path';
import { InputError } from '../errors.ts';
import { fileBytes } from './files.ts';
import { readTextFile } from './textFile.ts';

/** Name of the table that is found by itself in the folder of a snapshot. */
export const TIMES_NAME = 'times.csv';

/** Some million rows. */
const TABLE_BYTES = 1 << 28;

export interface TimesTable {
  readonly path: string;
  readonly rows: number;
  /** Time of a file: by its path, seen from the table's folder, or else by its name alone. */
  readonly timeOf: (file: string) => number | null;
  /** Files in its rows, as they stand there, that are neither in these folders nor where they say. */
  readonly filesNotIn: (folders: readonly string[]) => Promise<string[]>;
}

interface Row {
  readonly line: number;
  readonly time: number;
}

/**
 * Reads and checks a table of times. Other columns than `file` and `time` are passed over.
 * @throws InputError `input.timesEmpty`, `input.timesColumns`, `input.timesRow` (with its line),
 * `input.timesTwice` (a file in two rows), and those of opening a file
 */
export async function readTimes(path: string): Promise<TimesTable> {
  const text = await readTextFile(path, 'times', TABLE_BYTES);
  const rows = await parse(text, path);
  const [head, ...body] = rows;
  if (head === undefined || (body.length === 0 && isHead(head.cells))) throw empty(path);
  const names = head.cells.map((name) => name.toLowerCase());
  const [fileAt, timeAt] = ['file', 'time'].map((name) => names.indexOf(name));
  if (fileAt < 0 || timeAt < 0) throw wrongHead(path, head.cells);
  const byPath = new Map<string, Row>();
  const byName = new Map<string, Row>();
  for (const { cells, line } of body) {
    const file = cells[fileAt] ?? '';
    const time = cells[timeAt] ?? '';
    if (file === '') throw wrongRow(path, line, 'no name of a file', 'the name of a snapshot');
    const value = time === '' ? NaN : Number(time);
    if (!Number.isFinite(value)) {
      const found = time === '' ? 'no time' : `the time "${time}"`;
      throw wrongRow(path, line, `${found} of ${file}`, 'a finite number');
    }
    const whole = resolve(dirname(path), file);
    const earlier = byPath.get(whole);
    if (earlier !== undefined) throw twice(path, file, earlier.line, line);
    byPath.set(whole, { line, time: value });
    if (basename(file) === file) byName.set(file, { line, time: value });
  }
  return {
    path,
    rows: body.length,
    timeOf: (file) => (byPath.get(resolve(file)) ?? byName.get(basename(file)))?.time ?? null,
    filesNotIn: async (folders) => {
      const names = new Set((await Promise.all(folders.map(namesIn))).flat());
      const gone: string[] = [];
      for (const { cells } of body) {
        const file = cells[fileAt] ?? '';
        const isName = basename(file) === file;
        if (isName ? names.has(file) : (await fileBytes(resolve(dirname(path), file))) !== null) {
          continue;
        }
        gone.push(file);
      }
      return gone;
    },
  };
}

const namesIn = (folder: string): Promise<string[]> => readdir(folder).catch(() => []);

interface Cells {
  readonly cells: readonly string[];
  readonly line: number;
}

async function parse(text: string, path: string): Promise<Cells[]> {
  const { parse: parseCsv, CsvError } = await import('csv-parse/sync');
  try {
    const rows = parseCsv(text, {
      bom: true,
      info: true,
      relax_column_count: true,
      skip_empty_lines: true,
      skip_records_with_empty_values: true,
      trim: true,
    }) as unknown as { record: string[]; info: { lines: number } }[];
    return rows.map(({ record, info }) => ({ cells: record, line: info.lines }));
  } catch (error) {
    if (!(error instanceof CsvError)) throw error;
    const line = (error as unknown as { lines?: number }).lines;
    throw new InputError(
      'input.timesRow',
      `${path}${line === undefined ? '' : `, line ${line}`}: this is not CSV: ${error.message}`,
      'Look for a quote that is not closed.',
      { cause: error },
    );
  }
}

function isHead(cells: readonly string[]): boolean {
  return cells.some((name) => ['file', 'time'].includes(name.toLowerCase()));
}

function empty(path: string): InputError {
  return new InputError(
    'input.timesEmpty',
    `${path} holds no times; expected a line "file,time" and a row for each snapshot`,
    'Write one row a snapshot, such as snap_000.bin,0.0',
  );
}

function wrongHead(path: string, cells: readonly string[]): InputError {
  const found = cells.join(',');
  return new InputError(
    'input.timesColumns',
    `${path}, line 1: found the columns "${found.length > 60 ? `${found.slice(0, 57)}...` : found}"; expected file and time among them, separated by commas`,
    'Begin the table with the line: file,time',
  );
}

function wrongRow(path: string, line: number, found: string, expected: string): InputError {
  return new InputError(
    'input.timesRow',
    `${path}, line ${line}: found ${found}; expected ${expected}`,
    'Correct that row, or remove it.',
  );
}

function twice(path: string, file: string, first: number, second: number): InputError {
  return new InputError(
    'input.timesTwice',
    `${path}, line ${second}: ${file} stands there already in line ${first}; expected each file once`,
    'Remove the row that is not meant.',
  );
}
