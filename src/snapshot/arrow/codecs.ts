/** Decompression of one buffer of a batch: LZ4 frames and Zstandard. */
import * as zlib from 'node:zlib';
import { CompressionType } from 'apache-arrow/fb/compression-type';
import { InputError } from '../../errors.ts';
import { damaged } from './damage.ts';

/** Bytes before the compressed ones: the length when decompressed, or −1 for "stored as it is". */
export const LENGTH_PREFIX = 8;

export type CodecName = 'LZ4' | 'Zstandard';

export interface Codec {
  readonly name: CodecName;
  /** No valid input of n bytes gives more than n times this, so longer promises are damage. */
  readonly mostExpansion: number;
  readonly decode: (bytes: Uint8Array) => Uint8Array;
  /** Length that the frame itself states, null if it does not, NaN if it is no frame. */
  readonly statedLength: (bytes: Uint8Array) => number | null;
}

type Decode = (bytes: Uint8Array) => Uint8Array;
const LOADERS = { LZ4: loadLz4, Zstandard: loadZstandard };
const loaded = new Map<CodecName, Promise<Codec>>();

/** The codec of a name, loaded when first asked for. */
export function codecNamed(name: CodecName): Promise<Codec> {
  let codec = loaded.get(name);
  if (!codec) {
    codec = LOADERS[name]();
    loaded.set(name, codec);
  }
  return codec;
}

/**
 * The codec of a batch.
 * @throws InputError `input.codec`
 */
export async function codecOf(type: number, method: number, file: string): Promise<Codec> {
  if (method === 0) {
    if (type === (CompressionType.LZ4_FRAME as number)) return codecNamed('LZ4');
    if (type === (CompressionType.ZSTD as number)) return codecNamed('Zstandard');
  }
  throw new InputError(
    'input.codec',
    `${file}: compressed with codec ${type}, method ${method}; expected LZ4 frames or Zstandard, buffer by buffer`,
    'Write the file uncompressed, or with LZ4 or Zstandard.',
  );
}

async function loadLz4(): Promise<Codec> {
  const { decompressFrameSync } = await import('lz4-napi');
  return {
    name: 'LZ4',
    mostExpansion: 255,
    decode: (bytes) =>
      decompressFrameSync(Buffer.from(bytes.buffer, bytes.byteOffset, bytes.byteLength)),
    statedLength: lz4StatedLength,
  };
}

async function loadZstandard(): Promise<Codec> {
  const native = (zlib as { zstdDecompressSync?: Decode }).zstdDecompressSync;
  const decode: Decode = native ?? (await import('fzstd')).decompress;
  // A block of 4 bytes may repeat one byte 128 KiB times.
  return {
    name: 'Zstandard',
    mostExpansion: 32768,
    decode: (bytes) => decode(bytes),
    statedLength: zstandardStatedLength,
  };
}

/**
 * Decompresses one buffer and checks its length.
 * @param bytes - the buffer with its 8-byte prefix
 * @param expected - bytes that the column needs; padding after them is allowed
 * @returns at least `expected` bytes, aligned to 8
 * @throws InputError `input.arrowDamaged`
 */
export function decompress(
  codec: Codec,
  bytes: Uint8Array,
  expected: number,
  file: string,
  place: string,
): Uint8Array {
  const promised = promisedLength(bytes, codec, expected, file, place);
  const packed = bytes.subarray(LENGTH_PREFIX);
  if (promised === packed.length && isStored(bytes)) return aligned(packed);
  // The frame's own length is looked at first: decoders allocate what it says.
  const stated = codec.statedLength(packed);
  if (stated !== null && stated !== promised)
    throw damaged(
      file,
      place,
      Number.isNaN(stated)
        ? `no ${codec.name} frame`
        : `a ${codec.name} frame of ${stated} bytes where ${promised} are announced`,
    );
  let unpacked: Uint8Array;
  try {
    unpacked = codec.decode(packed);
  } catch (error) {
    const text = error instanceof Error ? error.message : String(error);
    throw damaged(file, place, `${codec.name}: ${text}`, error);
  }
  if (unpacked.length !== promised)
    throw damaged(
      file,
      place,
      `${codec.name} gave ${unpacked.length} bytes where ${promised} are announced`,
    );
  return aligned(unpacked);
}

/**
 * Length after decompression that the prefix promises, checked against what is needed and what is
 * possible, so that nothing is allocated on a damaged promise.
 * @param bytes - the prefix and, unless `storedBytes` is given, all that follows
 */
export function promisedLength(
  bytes: Uint8Array,
  codec: Codec,
  expected: number,
  file: string,
  place: string,
  storedBytes = bytes.length - LENGTH_PREFIX,
): number {
  if (storedBytes < 0) throw damaged(file, place, 'its length prefix is missing');
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const promised = isStored(bytes) ? storedBytes : Number(view.getBigInt64(0, true));
  if (promised < expected || promised > paddedLimit(expected))
    throw damaged(file, place, `${promised} bytes where ${expected} are needed`);
  if (promised > storedBytes * codec.mostExpansion)
    throw damaged(file, place, `${storedBytes} bytes cannot hold ${promised}`);
  return promised;
}

/** A buffer may be padded or allocated in advance, but one twice as long holds another type. */
export function paddedLimit(expected: number): number {
  return expected + Math.max(64, expected - 1);
}

function isStored(bytes: Uint8Array): boolean {
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  return view.getBigInt64(0, true) === -1n;
}

function aligned(bytes: Uint8Array): Uint8Array {
  return bytes.byteOffset % 8 === 0 ? bytes : bytes.slice();
}

/** Source: LZ4 Frame Format Description 1.6.4, "Frame Descriptor". */
function lz4StatedLength(bytes: Uint8Array): number | null {
  if (bytes.length < 7) return NaN;
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  if (view.getUint32(0, true) !== 0x184d2204) return NaN;
  const hasContentSize = (bytes[4] & 0b1000) !== 0;
  if (!hasContentSize) return null;
  return bytes.length < 15 ? NaN : Number(view.getBigUint64(6, true));
}

/** Source: RFC 8878, section 3.1.1.1 (frame header). */
function zstandardStatedLength(bytes: Uint8Array): number | null {
  if (bytes.length < 6) return NaN;
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  if (view.getUint32(0, true) !== 0xfd2fb528) return NaN;
  const descriptor = bytes[4];
  const singleSegment = (descriptor >> 5) & 1;
  const size = [singleSegment, 2, 4, 8][descriptor >> 6];
  if (size === 0) return null;
  const at = 5 + (1 - singleSegment) + [0, 1, 2, 4][descriptor & 3];
  if (at + size > bytes.length) return NaN;
  if (size === 1) return bytes[at];
  if (size === 2) return view.getUint16(at, true) + 256;
  return size === 4 ? view.getUint32(at, true) : Number(view.getBigUint64(at, true));
}
