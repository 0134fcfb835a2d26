/** Which buffer of a record batch belongs to which column, checked against schema and body. */
import { Type, UnionMode, MetadataVersion } from 'apache-arrow/enum';
import type { Field } from 'apache-arrow/schema';
import { DataType } from 'apache-arrow/type';
import { damaged } from './damage.ts';
import type { RecordBatch } from './messages.ts';

/** Validity and values, except for these. */
const BUFFERS_OF: Readonly<Partial<Record<Type, number>>> = {
  [Type.Null]: 0,
  [Type.Struct]: 1,
  [Type.FixedSizeList]: 1,
  [Type.Utf8]: 3,
  [Type.LargeUtf8]: 3,
  [Type.Binary]: 3,
  [Type.LargeBinary]: 3,
};

export interface Region {
  readonly offset: number;
  readonly length: number;
}

/** One column of a batch: its entries, missing entries, buffers in the order of the format. */
export interface ColumnLayout {
  readonly rows: number;
  readonly nulls: number;
  readonly buffers: readonly Region[];
  readonly children: readonly ColumnLayout[];
}

/**
 * Lays the nodes and buffers of a batch out over its columns.
 * @param types - of the schema's fields, in order
 * @param place - of the batch, for messages
 * @throws InputError `input.arrowDamaged` if counts, lengths or places do not agree
 * Source: Apache Arrow columnar format 1.5, "RecordBatch message", "Buffer listing for each layout".
 */
export function layoutBatch(
  types: readonly DataType[],
  batch: RecordBatch,
  bodyLength: number,
  version: number,
  file: string,
  place: string,
): ColumnLayout[] {
  const { nodes, buffers, variadicBufferCounts: variadic } = batch;
  if (batch.length < 0) throw damaged(file, place, `${batch.length} rows`);
  for (const { offset, length } of buffers) {
    if (offset < 0 || length < 0 || offset + length > bodyLength)
      throw damaged(
        file,
        place,
        `a buffer of ${length} bytes at ${offset} does not fit its body of ${bodyLength} bytes`,
      );
  }
  let node = 0;
  let buffer = 0;
  let view = 0;
  const columns = types.map((type) => column(type));
  if (columns.some(({ rows }) => rows !== batch.length))
    throw damaged(file, place, `its columns do not all have its ${batch.length} rows`);
  if (node !== nodes.length || buffer !== buffers.length)
    throw damaged(
      file,
      place,
      `${nodes.length} columns and ${buffers.length} buffers, but the schema makes ${node} and ${buffer}`,
    );
  return columns;

  function column(type: DataType): ColumnLayout {
    if (node >= nodes.length)
      throw damaged(file, place, `${nodes.length} columns are fewer than the schema has`);
    const { length: rows, nullCount: nulls } = nodes[node++];
    if (rows < 0 || nulls < 0 || nulls > rows)
      throw damaged(file, place, `a column of ${rows} rows with ${nulls} missing`);
    const taken = buffersOf(type);
    const own = buffers.slice(buffer, buffer + taken);
    if (own.length < taken)
      throw damaged(file, place, `${buffers.length} buffers are fewer than the schema needs`);
    buffer += taken;
    // A dictionary column's children belong to its dictionary.
    const children: readonly Field[] = DataType.isDictionary(type) ? [] : (type.children ?? []);
    return {
      rows,
      nulls,
      buffers: own,
      children: children.map((child) => column(child.type as DataType)),
    };
  }

  function buffersOf(type: DataType): number {
    if (DataType.isUtf8View(type) || DataType.isBinaryView(type))
      return 2 + (variadic[view++] ?? 0);
    if (DataType.isUnion(type)) {
      const validity = version < (MetadataVersion.V5 as number) ? 1 : 0;
      return validity + (type.mode === UnionMode.Dense ? 2 : 1);
    }
    return BUFFERS_OF[type.typeId] ?? 2;
  }
}
