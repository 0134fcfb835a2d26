/** Records as an Arrow table. */
import {
  Bool,
  Field,
  Float64,
  Int64,
  RecordBatch,
  Schema,
  Struct,
  Table,
  Utf8,
  makeData,
  tableToIPC,
  vectorFromArray,
  type Data,
  type DataType,
} from 'apache-arrow';
import { RECORD_VERSION, type MeasureRecord } from './record.ts';
import { recordColumns, type CellType, type RecordColumn } from './recordColumns.ts';
import { dimensionText } from './registryText.ts';

/** Marks a table of records, and names the version of their form. */
const VERSION_KEY = 'settlemark.record';

const TYPES: Readonly<Record<CellType, () => DataType>> = {
  text: () => new Utf8(),
  number: () => new Float64(),
  integer: () => new Int64(),
  boolean: () => new Bool(),
};

/**
 * Arrow IPC with one row a record and the columns of {@link recordColumns}: Utf8, Float64, Int64
 * and Bool, with nulls. The metadata of a field hold `text` and, as far as there are such, `unit`,
 * `dimension` and `error` (the name of the column with its 1σ error).
 * @param format - a file (with a footer), or a stream, which a pipe can take
 */
export async function recordsToArrow(
  records: readonly MeasureRecord[],
  format: 'file' | 'stream' = 'file',
): Promise<Uint8Array> {
  const columns = await recordColumns(records);
  const fields = columns.map(fieldOf);
  const schema = new Schema(fields, new Map([[VERSION_KEY, String(RECORD_VERSION)]]));
  const length = records.length;
  const children = columns.map((column, k) => dataOf(column, fields[k].type as DataType));
  const struct = makeData({ type: new Struct(fields), length, children, nullCount: 0 });
  return tableToIPC(new Table(schema, [new RecordBatch(schema, struct)]), format);
}

function fieldOf(column: RecordColumn): Field {
  const { name, type, unit, dimension, error, text } = column;
  const metadata = new Map([['text', text]]);
  const words = dimension === null ? '' : dimensionText(dimension);
  if (words !== '') metadata.set('dimension', words);
  if (unit !== '') metadata.set('unit', unit);
  if (error !== null) metadata.set('error', error);
  return new Field(name, TYPES[type](), true, metadata);
}

function dataOf(column: RecordColumn, type: DataType): Data {
  if (column.cells.length === 0) return makeData({ type });
  return vectorFromArray(arrowCells(column), type).data[0];
}

function arrowCells({ type, cells }: RecordColumn): readonly unknown[] {
  if (type !== 'integer') return cells;
  return cells.map((cell) => (cell === null ? null : BigInt(cell)));
}
