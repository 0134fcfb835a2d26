/** The header of a raw file, and the count that it states. */
import { InputError } from '../../errors.ts';
import { readExactly, type OpenFile } from '../files.ts';
import type { Layout } from './layout.ts';
import { findRecord, type WordBytes } from './markers.ts';
import { readNumber, TYPE_BYTES } from './types.ts';

export function wordBytesOf(layout: Layout): WordBytes {
  return layout.markers === 'fortran8' ? 8 : 4;
}

/**
 * Reads the header and its items; `end` is the offset of the first byte after it.
 * @throws InputError `input.truncated`, `input.markers`
 */
export async function readHeader(
  file: OpenFile,
  layout: Layout,
): Promise<{ header: Map<string, number | bigint>; end: number }> {
  const header = new Map<string, number | bigint>();
  const { headerBytes } = layout;
  if (headerBytes > file.size) {
    throw new InputError(
      'input.truncated',
      `${file.path} has ${file.size} bytes; expected a header of ${headerBytes} bytes and bodies after it`,
      'Correct headerBytes in the layout, or the file is cut off.',
    );
  }
  const view = new DataView(new ArrayBuffer(headerBytes));
  const bytes = new Uint8Array(view.buffer);
  let end = headerBytes;
  if (layout.markers === 'none') {
    await readExactly(file, bytes, 0, headerBytes, 0);
  } else {
    end = 0;
    for (let done = 0; done < headerBytes;) {
      const record = await findRecord(file, end, wordBytesOf(layout), layout.byteOrder);
      if (record.bytes === 0 || done + record.bytes > headerBytes) {
        throw new InputError(
          'input.markers',
          `${file.path}: the Fortran record at byte ${end} holds ${record.bytes} bytes; expected ${headerBytes - done} of the header`,
          `Set headerBytes to the bytes of the header's records without their length words, for instance ${done + record.bytes}.`,
        );
      }
      for (const segment of record.segments) {
        await readExactly(file, bytes, done, segment.bytes, segment.offset);
        done += segment.bytes;
      }
      end = record.end;
    }
  }
  for (const item of layout.header) {
    header.set(item.name, readNumber(view, item.offset, item.type, layout.byteOrder));
  }
  return { header, end };
}

/**
 * The count of all bodies that header or constants state, or null. It stays a bigint until the file
 * proves it.
 * @throws InputError `input.badCount`
 */
export function statedCount(
  file: OpenFile,
  layout: Layout,
  header: ReadonlyMap<string, number | bigint>,
): bigint | null {
  const value = header.get('count') ?? layout.constants?.count;
  return value === undefined ? null : countOf(file, 'count', value);
}

/** A value of the header as a count. @throws InputError `input.badCount` */
export function countOf(
  file: Pick<OpenFile, 'path'>,
  what: string,
  value: number | bigint,
): bigint {
  if (typeof value === 'bigint' ? value >= 0n : Number.isInteger(value) && value >= 0) {
    return BigInt(value);
  }
  throw new InputError(
    'input.badCount',
    `${file.path}: the header's ${what} is ${value}; expected a whole number of at least 0`,
    'Correct type, offset or byteOrder of the count in the layout.',
  );
}

export function noParticles(file: OpenFile, why: string): InputError {
  return new InputError(
    'input.noParticles',
    `${file.path} holds no particles: ${why}; expected at least 1`,
    'Look whether the simulation wrote this snapshot to its end.',
  );
}

/** End of the last header item: the least that headerBytes can be. */
export function headerItemsEnd(layout: Layout): number {
  return layout.header.reduce((end, item) => Math.max(end, item.offset + TYPE_BYTES[item.type]), 0);
}
