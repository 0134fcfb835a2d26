/** The number types of raw files. */

export const NUMBER_TYPES = [
  'float32',
  'float64',
  'int8',
  'int16',
  'int32',
  'int64',
  'uint8',
  'uint16',
  'uint32',
  'uint64',
] as const;

export type NumberType = (typeof NUMBER_TYPES)[number];

export type ByteOrder = 'little' | 'big';

/** Bytes of one number. */
export const TYPE_BYTES: Readonly<Record<NumberType, 1 | 2 | 4 | 8>> = {
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

/** Significant binary digits that reach a float64 column. */
export const TYPE_DIGITS: Readonly<Record<NumberType, number>> = {
  float32: 24,
  float64: 53,
  int8: 7,
  int16: 15,
  int32: 31,
  int64: 53,
  uint8: 8,
  uint16: 16,
  uint32: 32,
  uint64: 53,
};

export const NATIVE_ORDER: ByteOrder =
  new Uint8Array(Uint16Array.of(1).buffer)[0] === 1 ? 'little' : 'big';

/** One number of a header, where 64-bit integers must stay exact. */
export function readNumber(
  view: DataView,
  offset: number,
  type: NumberType,
  order: ByteOrder,
): number | bigint {
  const little = order === 'little';
  switch (type) {
    case 'float32':
      return view.getFloat32(offset, little);
    case 'float64':
      return view.getFloat64(offset, little);
    case 'int8':
      return view.getInt8(offset);
    case 'int16':
      return view.getInt16(offset, little);
    case 'int32':
      return view.getInt32(offset, little);
    case 'int64':
      return view.getBigInt64(offset, little);
    case 'uint8':
      return view.getUint8(offset);
    case 'uint16':
      return view.getUint16(offset, little);
    case 'uint32':
      return view.getUint32(offset, little);
    case 'uint64':
      return view.getBigUint64(offset, little);
  }
}

/** Writes one number; the caller has checked that it fits the type. */
export function writeNumber(
  view: DataView,
  offset: number,
  type: NumberType,
  order: ByteOrder,
  value: number | bigint,
): void {
  const little = order === 'little';
  switch (type) {
    case 'float32':
      return view.setFloat32(offset, Number(value), little);
    case 'float64':
      return view.setFloat64(offset, Number(value), little);
    case 'int8':
      return view.setInt8(offset, Number(value));
    case 'int16':
      return view.setInt16(offset, Number(value), little);
    case 'int32':
      return view.setInt32(offset, Number(value), little);
    case 'int64':
      return view.setBigInt64(offset, BigInt(value), little);
    case 'uint8':
      return view.setUint8(offset, Number(value));
    case 'uint16':
      return view.setUint16(offset, Number(value), little);
    case 'uint32':
      return view.setUint32(offset, Number(value), little);
    case 'uint64':
      return view.setBigUint64(offset, BigInt(value), little);
  }
}

/** Smallest and largest value of an integer type. */
export function integerRange(type: NumberType): readonly [bigint, bigint] | null {
  if (type.startsWith('float')) return null;
  const bits = BigInt(TYPE_BYTES[type] * 8);
  return type.startsWith('u')
    ? [0n, (1n << bits) - 1n]
    : [-(1n << (bits - 1n)), (1n << (bits - 1n)) - 1n];
}
