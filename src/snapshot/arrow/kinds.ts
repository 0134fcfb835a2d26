/** Kinds of numbers in the file and in memory, and what becomes of one column. */
import type { FieldName } from '../reading.ts';

/** Numbers as they lie in a buffer of the file. */
export type NumberKind =
  | 'float16'
  | 'float32'
  | 'float64'
  | 'int8'
  | 'int16'
  | 'int32'
  | 'int64'
  | 'uint8'
  | 'uint16'
  | 'uint32'
  | 'uint64';

/** Numbers as they are kept: float16 widens to float32, integers that mean a real to float64. */
export type StoredKind = Exclude<NumberKind, 'float16'>;

export const BYTES_OF: Readonly<Record<NumberKind, 1 | 2 | 4 | 8>> = {
  float16: 2,
  float32: 4,
  float64: 8,
  int8: 1,
  int16: 2,
  int32: 4,
  int64: 8,
  uint8: 1,
  uint16: 2,
  uint32: 4,
  uint64: 8,
};

/** One column of the file that is loaded, and the columns of ours that it fills. */
export interface PlannedColumn {
  readonly fieldIndex: number;
  readonly fileName: string;
  /** Our name for it. */
  readonly field: FieldName;
  readonly kind: NumberKind;
  readonly stored: StoredKind;
  /** Our columns: one, or three for a vector. */
  readonly targets: readonly FieldName[];
  /** Set for `component`: the values are indices into the dictionary of this id. */
  readonly dictionaryId: number | null;
  /** Set for a `component` of plain texts: they become indices when a batch is planned. */
  readonly isText: boolean;
}
