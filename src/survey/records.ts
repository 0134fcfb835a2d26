/** Records that were made earlier: one JSON object a line. */
import { createReadStream } from 'node:fs';
import { createInterface } from 'node:readline';
import { RECORD_VERSION, type MeasureRecord } from '../dynamics/record.ts';
import { InputError } from '../errors.ts';

/** Keys without which a line is not a record. */
const KEYS = ['whole', 'bound', 'lagrangian', 'boundLagrangian', 'frame', 'settings', 'engine'];

/** Whether a path is named like a file of records. */
export const isRecords = (path: string): boolean => /\.(ndjson|jsonl)$/i.test(path);

/**
 * Reads records line by line; empty lines are passed over.
 * @throws InputError `input.notARecord` with file and line; `input.recordVersion`; `input.notFound`
 */
export async function readRecords(path: string): Promise<MeasureRecord[]> {
  const records: MeasureRecord[] = [];
  let line = 0;
  try {
    const lines = createInterface({ input: createReadStream(path), crlfDelay: Infinity });
    for await (const text of lines) {
      line++;
      if (text.trim() !== '') records.push(recordIn(text, `${path}, line ${line}`));
    }
  } catch (error) {
    if (error instanceof InputError) throw error;
    const reason = error instanceof Error ? error.message : String(error);
    throw new InputError('input.notFound', `${path}: ${reason}`, 'check the path', {
      cause: error,
    });
  }
  return records;
}

function recordIn(text: string, where: string): MeasureRecord {
  let value: unknown;
  try {
    value = JSON.parse(text);
  } catch (error) {
    throw notARecord(where, 'it is not JSON', error);
  }
  if (value === null || typeof value !== 'object') throw notARecord(where, 'it is not an object');
  const missing = KEYS.find((key) => {
    const part = (value as Record<string, unknown>)[key];
    return part === null || typeof part !== 'object';
  });
  if (missing !== undefined) throw notARecord(where, `it has no "${missing}"`);
  const { record: version } = value as { record?: unknown };
  if (version !== RECORD_VERSION) {
    throw new InputError(
      'input.recordVersion',
      `${where}: a record of version ${JSON.stringify(version) ?? 'none'}; this Settlemark knows version ${RECORD_VERSION}`,
      'measure the snapshot again',
    );
  }
  return value as MeasureRecord;
}

function notARecord(where: string, why: string, cause?: unknown): InputError {
  return new InputError(
    'input.notARecord',
    `${where}: not a record of a snapshot: ${why}`,
    'give files that `settlemark measure --format ndjson` wrote, one record a line',
    { cause },
  );
}
