/**
 * Kernels from a chunk of bytes to columns. A chunk holds whole bodies from its first byte on;
 * `offset` and `stride` are in bytes; the numbers go to `target[at]`, `target[at + 1]`, ...
 */
import { takeBuffer } from '../../numerics/reuse.ts';
import type { FloatColumn, IdColumn } from '../particles.ts';
import { NATIVE_ORDER, type ByteOrder, type NumberType } from './types.ts';

/** The bytes of a chunk seen as what the kernels need. */
export interface Chunk {
  readonly bytes: Buffer;
  readonly view: DataView;
  readonly doubles: Float64Array;
  readonly floats: Float32Array;
}

let spare: Chunk | null = null;

/** A chunk of at least `bytes` bytes, to be given back: new memory costs more than the decoding. */
export function takeChunk(bytes: number): Chunk {
  const chunk = spare !== null && spare.bytes.length >= bytes ? spare : allocateChunk(bytes);
  spare = null;
  return chunk;
}

export function giveChunk(chunk: Chunk): void {
  spare = chunk;
}

function allocateChunk(bytes: number): Chunk {
  const buffer = new ArrayBuffer(Math.ceil(bytes / 8) * 8);
  return {
    bytes: Buffer.from(buffer),
    view: new DataView(buffer),
    doubles: new Float64Array(buffer),
    floats: new Float32Array(buffer),
  };
}

/** Decodes reals, or integers taken for reals, times `scale`. */
export function decodeReals(
  chunk: Chunk,
  offset: number,
  stride: number,
  type: NumberType,
  order: ByteOrder,
  isNative: boolean,
  scale: number,
  target: FloatColumn,
  at: number,
  count: number,
): void {
  if (isNative && scale === 1) {
    if (type === 'float64' && target instanceof Float64Array && (offset | stride) % 8 === 0) {
      copyDoubles(chunk.doubles, offset / 8, stride / 8, target, at, count);
      return;
    }
    if (type === 'float32' && target instanceof Float32Array && (offset | stride) % 4 === 0) {
      copyFloats(chunk.floats, offset / 4, stride / 4, target, at, count);
      return;
    }
  }
  decodeByView(chunk.view, offset, stride, type, order === 'little', target, at, count);
  if (scale !== 1) for (let i = at, end = at + count; i < end; i++) target[i] *= scale;
}

function copyDoubles(
  source: Float64Array,
  from: number,
  step: number,
  target: Float64Array,
  at: number,
  count: number,
): void {
  for (let i = at, j = from, end = at + count; i < end; i++, j += step) target[i] = source[j];
}

function copyFloats(
  source: Float32Array,
  from: number,
  step: number,
  target: Float32Array,
  at: number,
  count: number,
): void {
  for (let i = at, j = from, end = at + count; i < end; i++, j += step) target[i] = source[j];
}

const TWO_32 = 4294967296;

function decodeByView(
  view: DataView,
  offset: number,
  stride: number,
  type: NumberType,
  little: boolean,
  target: FloatColumn,
  at: number,
  count: number,
): void {
  const end = at + count;
  let o = offset;
  switch (type) {
    case 'float64':
      for (let i = at; i < end; i++, o += stride) target[i] = view.getFloat64(o, little);
      return;
    case 'float32':
      for (let i = at; i < end; i++, o += stride) target[i] = view.getFloat32(o, little);
      return;
    case 'int8':
      for (let i = at; i < end; i++, o += stride) target[i] = view.getInt8(o);
      return;
    case 'uint8':
      for (let i = at; i < end; i++, o += stride) target[i] = view.getUint8(o);
      return;
    case 'int16':
      for (let i = at; i < end; i++, o += stride) target[i] = view.getInt16(o, little);
      return;
    case 'uint16':
      for (let i = at; i < end; i++, o += stride) target[i] = view.getUint16(o, little);
      return;
    case 'int32':
      for (let i = at; i < end; i++, o += stride) target[i] = view.getInt32(o, little);
      return;
    case 'uint32':
      for (let i = at; i < end; i++, o += stride) target[i] = view.getUint32(o, little);
      return;
    // High · 2^32 is exact and the sum rounds once: the nearest double, without a BigInt a body.
    case 'int64':
      for (let i = at; i < end; i++, o += stride) {
        const high = view.getInt32(little ? o + 4 : o, little);
        target[i] = high * TWO_32 + view.getUint32(little ? o : o + 4, little);
      }
      return;
    case 'uint64':
      for (let i = at; i < end; i++, o += stride) {
        const high = view.getUint32(little ? o + 4 : o, little);
        target[i] = high * TWO_32 + view.getUint32(little ? o : o + 4, little);
      }
      return;
  }
}

/** Allocates a column of the same type as the file's, in shared memory. */
export function allocateIds(count: number, type: NumberType): IdColumn {
  switch (type) {
    case 'float64':
      return new Float64Array(takeBuffer(count * 8), 0, count);
    case 'int64':
      return new BigInt64Array(takeBuffer(count * 8), 0, count);
    case 'uint64':
      return new BigUint64Array(takeBuffer(count * 8), 0, count);
    case 'float32':
      return new Float32Array(takeBuffer(count * 4), 0, count);
    case 'int32':
      return new Int32Array(takeBuffer(count * 4), 0, count);
    case 'uint32':
      return new Uint32Array(takeBuffer(count * 4), 0, count);
    case 'int16':
      return new Int16Array(takeBuffer(count * 2), 0, count);
    case 'uint16':
      return new Uint16Array(takeBuffer(count * 2), 0, count);
    case 'int8':
      return new Int8Array(takeBuffer(count), 0, count);
    case 'uint8':
      return new Uint8Array(takeBuffer(count), 0, count);
  }
}

/** Copies the bytes of identifiers as they are, whatever their type, into native order. */
export function decodeIds(
  view: DataView,
  offset: number,
  stride: number,
  order: ByteOrder,
  target: IdColumn,
  at: number,
  count: number,
): void {
  const little = order === 'little';
  const { buffer } = target;
  let o = offset;
  if (target.BYTES_PER_ELEMENT === 8) {
    const words = new Uint32Array(buffer);
    const first = order === NATIVE_ORDER ? 0 : 4;
    const second = 4 - first;
    for (let i = 2 * at, end = 2 * (at + count); i < end; i += 2, o += stride) {
      words[i] = view.getUint32(o + first, little);
      words[i + 1] = view.getUint32(o + second, little);
    }
  } else if (target.BYTES_PER_ELEMENT === 4) {
    const words = new Uint32Array(buffer);
    for (let i = at, end = at + count; i < end; i++, o += stride) {
      words[i] = view.getUint32(o, little);
    }
  } else if (target.BYTES_PER_ELEMENT === 2) {
    const words = new Uint16Array(buffer);
    for (let i = at, end = at + count; i < end; i++, o += stride) {
      words[i] = view.getUint16(o, little);
    }
  } else {
    const words = new Uint8Array(buffer);
    for (let i = at, end = at + count; i < end; i++, o += stride) words[i] = view.getUint8(o);
  }
}
