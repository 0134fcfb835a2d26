import { compressFrameSync } from 'lz4-napi';
import { describe, expect, it } from 'vitest';
import { InputError } from '../../../src/errors.ts';
import { codecOf, decompress, paddedLimit } from '../../../src/snapshot/arrow/codecs.ts';
import { seededChoice } from './sample.ts';

const LZ4 = await codecOf(0, 0, 'a.arrow');
const ZSTANDARD = await codecOf(1, 0, 'a.arrow');

/** A buffer as it lies in a batch: length, then what is compressed (or −1 and what is stored). */
function buffer(promised: number, packed: Uint8Array): Uint8Array {
  const bytes = new Uint8Array(8 + packed.length);
  new DataView(bytes.buffer).setBigInt64(0, BigInt(promised), true);
  bytes.set(packed, 8);
  return bytes;
}
function code(work: () => unknown): string {
  try {
    work();
    return 'none';
  } catch (error) {
    if (error instanceof InputError) return error.code;
    throw error;
  }
}

// Compressible in parts: repeats, and bytes that do not repeat.
const choose = seededChoice(3);
const data = Uint8Array.from({ length: 300_000 }, (_, i) => (i % 1000 < 500 ? i % 7 : choose(256)));

/**
 * Zstandard by hand, since nothing here compresses: RFC 8878, section 3.1.1, a frame with a single
 * segment and a content size of 4 bytes, raw and run-length blocks of at most 128 KiB.
 */
function zstandardFrame(
  contentSize: number,
  blocks: readonly (Uint8Array | [number, number])[],
): Uint8Array {
  const parts: Uint8Array[] = [Uint8Array.of(0x28, 0xb5, 0x2f, 0xfd, 0b10100000)];
  parts.push(new Uint8Array(Uint32Array.of(contentSize).buffer));
  blocks.forEach((block, i) => {
    const isRun = Array.isArray(block);
    const size = isRun ? block[1] : block.length;
    const header = (size << 3) | ((isRun ? 1 : 0) << 1) | (i === blocks.length - 1 ? 1 : 0);
    parts.push(Uint8Array.of(header & 255, (header >> 8) & 255, (header >> 16) & 255));
    parts.push(isRun ? Uint8Array.of(block[0]) : block);
  });
  return Buffer.concat(parts);
}

describe('decompress', () => {
  it('takes LZ4 frames with and without checksums, aligned to 8 bytes', () => {
    for (const blockChecksums of [false, true]) {
      for (const contentChecksum of [false, true]) {
        const packed = compressFrameSync(Buffer.from(data), { blockChecksums, contentChecksum });
        const unpacked = decompress(LZ4, buffer(data.length, packed), data.length, 'a', 'b');
        expect(Buffer.compare(unpacked, data)).toBe(0);
        expect(unpacked.byteOffset % 8).toBe(0);
      }
    }
  });

  it('takes Zstandard frames', () => {
    const head = data.subarray(0, 1000);
    const frame = zstandardFrame(3000, [head, [42, 2000]]);
    const unpacked = decompress(ZSTANDARD, buffer(3000, frame), 3000, 'a', 'b');
    expect(Buffer.compare(unpacked.subarray(0, 1000), head)).toBe(0);
    expect(unpacked.subarray(1000).every((byte) => byte === 42)).toBe(true);
  });

  it('takes bytes stored as they are (length −1), aligned to 8 bytes', () => {
    const shifted = new Uint8Array(buffer(-1, data).length + 1);
    shifted.set(buffer(-1, data), 1);
    const stored = decompress(LZ4, shifted.subarray(1), data.length, 'a', 'b');
    expect(Buffer.compare(stored, data)).toBe(0);
    expect(stored.byteOffset % 8).toBe(0);
  });

  it('refuses a length that is not the promised one, before allocating it', () => {
    const packed = compressFrameSync(Buffer.from(data), {});
    const wrong = (promised: number, needed: number) =>
      code(() => decompress(LZ4, buffer(promised, packed), needed, 'a', 'b'));
    expect(wrong(data.length, data.length + 8)).toBe('input.arrowDamaged');
    expect(wrong(data.length + 8, data.length)).toBe('input.arrowDamaged');
    expect(wrong(2 ** 50, 2 ** 50)).toBe('input.arrowDamaged');
    expect(wrong(-2, data.length)).toBe('input.arrowDamaged');
    const lying = zstandardFrame(2 ** 31, [[1, 100]]);
    expect(code(() => decompress(ZSTANDARD, buffer(100, lying), 100, 'a', 'b'))).toBe(
      'input.arrowDamaged',
    );
  });

  it('ends on any damaged frame, with an InputError or as many bytes as promised', () => {
    const lz4 = compressFrameSync(Buffer.from(data), { blockChecksums: true });
    const zstandard = zstandardFrame(3000, [data.subarray(0, 1000), [42, 2000]]);
    let refused = 0;
    for (let trial = 0; trial < 400; trial++) {
      const [codec, packed, length] =
        trial % 2 === 0
          ? ([LZ4, lz4, data.length] as const)
          : ([ZSTANDARD, zstandard, 3000] as const);
      const changed = Uint8Array.from(packed);
      const reach = trial % 4 < 2 ? 32 : changed.length;
      for (let k = choose(3); k >= 0; k--) changed[choose(reach)] = choose(256);
      const found = code(() => {
        const unpacked = decompress(codec, buffer(length, changed), length, 'a', 'b');
        expect(unpacked).toHaveLength(length);
      });
      if (found !== 'none') refused++;
    }
    expect(refused).toBeGreaterThan(200);
  });
});

describe('paddedLimit', () => {
  // Source: the format pads buffers to multiples of 8 or 64 bytes; a float64 buffer taken for
  // float32 would be twice as long as needed and must not pass.
  it('lets padding pass, and no buffer of twice the length', () => {
    for (const needed of [8, 100, 1000, 1e9]) {
      expect(paddedLimit(needed)).toBeGreaterThanOrEqual(Math.ceil(needed / 64) * 64);
      if (needed > 64) expect(paddedLimit(needed)).toBeLessThan(2 * needed);
    }
  });
});
