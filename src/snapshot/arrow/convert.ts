/** Bytes of a buffer → numbers of our columns, a block of rows at a time. */
import { takeBuffer } from '../../numerics/reuse.ts';
import { BYTES_OF, type NumberKind, type PlannedColumn, type StoredKind } from './kinds.ts';

export type StoredColumn =
  | Float64Array
  | Float32Array
  | Int8Array
  | Int16Array
  | Int32Array
  | BigInt64Array
  | Uint8Array
  | Uint16Array
  | Uint32Array
  | BigUint64Array;

const ARRAYS = {
  float32: Float32Array,
  float64: Float64Array,
  int8: Int8Array,
  int16: Int16Array,
  int32: Int32Array,
  int64: BigInt64Array,
  uint8: Uint8Array,
  uint16: Uint16Array,
  uint32: Uint32Array,
  uint64: BigUint64Array,
} as const;

/** A column on shared memory; every row must be written. */
export function allocateStored(kind: StoredKind, rows: number): StoredColumn {
  // The constructors take any buffer, their types only one kind.
  const buffer: unknown = takeBuffer(rows * BYTES_OF[kind]);
  return new ARRAYS[kind](buffer as ArrayBuffer, 0, rows);
}

/** Whether the bytes of the file are the bytes of the column: they can be read in place. */
export function isInPlace(column: PlannedColumn): boolean {
  return (
    column.targets.length === 1 && column.dictionaryId === null && column.kind === column.stored
  );
}

/**
 * Converts `rows` rows at the beginning of `bytes` (aligned to 8) into the targets from `rowBegin`.
 * @param componentOf - from index in the file's dictionary to our component, for that column alone
 * @returns null, or the first index that is not in the dictionary
 */
export function convertRows(
  column: PlannedColumn,
  bytes: Uint8Array,
  rows: number,
  targets: readonly StoredColumn[],
  rowBegin: number,
  componentOf: Uint16Array | null,
): number | null {
  const width = column.targets.length;
  const values = valuesOf(column.kind, bytes, rows * width);
  if (componentOf) {
    return mapIndices(values, rows, componentOf, targets[0] as Uint16Array, rowBegin);
  }
  if (width === 1 && column.kind === column.stored) {
    // Same kind on both sides, which the types cannot say.
    (targets[0] as Float64Array).set(values as Float64Array, rowBegin);
    return null;
  }
  const reals = values instanceof BigInt64Array || values instanceof BigUint64Array;
  const numbers = reals ? widen(values) : (values as Float64Array);
  for (let k = 0; k < width; k++) {
    const target = targets[k] as Float64Array;
    for (let i = 0, from = k; i < rows; i++, from += width) target[rowBegin + i] = numbers[from];
  }
  return null;
}

function valuesOf(kind: NumberKind, bytes: Uint8Array, count: number): StoredColumn {
  if (kind === 'float16') return decodeHalf(new Uint16Array(bytes.buffer, bytes.byteOffset, count));
  return new ARRAYS[kind](bytes.buffer as ArrayBuffer, bytes.byteOffset, count);
}

function mapIndices(
  indices: StoredColumn,
  rows: number,
  componentOf: Uint16Array,
  target: Uint16Array,
  rowBegin: number,
): number | null {
  for (let i = 0; i < rows; i++) {
    const index = Number(indices[i]);
    if (!(index >= 0 && index < componentOf.length)) return index;
    target[rowBegin + i] = componentOf[index];
  }
  return null;
}

/** 64-bit integers as reals, rounded to the nearest. */
function widen(values: BigInt64Array | BigUint64Array): Float64Array {
  const halves = new Uint32Array(values.buffer, values.byteOffset, values.length * 2);
  const signed = values instanceof BigInt64Array;
  const result = new Float64Array(values.length);
  for (let i = 0; i < result.length; i++) {
    const high = signed ? halves[2 * i + 1] | 0 : halves[2 * i + 1];
    result[i] = high * 4294967296 + halves[2 * i];
  }
  return result;
}

let halfTable: Float32Array | undefined;

function decodeHalf(bits: Uint16Array): Float32Array {
  halfTable ??= Float32Array.from({ length: 65536 }, (_, value) => halfToNumber(value));
  const result = new Float32Array(bits.length);
  for (let i = 0; i < bits.length; i++) result[i] = halfTable[bits[i]];
  return result;
}

/** Source: IEEE 754-2019, binary16: 1 sign bit, 5 bits of exponent with bias 15, 10 of fraction. */
export function halfToNumber(bits: number): number {
  const sign = bits & 0x8000 ? -1 : 1;
  const exponent = (bits >> 10) & 31;
  const fraction = bits & 1023;
  if (exponent === 31) return fraction === 0 ? sign * Infinity : NaN;
  if (exponent === 0) return sign * fraction * 2 ** -24;
  return sign * (1 + fraction / 1024) * 2 ** (exponent - 15);
}
