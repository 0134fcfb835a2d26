/**
 * Records of sequential unformatted Fortran files: a length word before and after each.
 *
 * Source: GNU Fortran manual, "File format of unformatted sequential files". With 4-byte words a
 * record longer than 2 GiB is split into subrecords: a negative first word says that another
 * subrecord follows, a negative last word that one came before.
 */
import { InputError } from '../../errors.ts';
import { readExactly, type OpenFile } from '../files.ts';
import type { ByteOrder } from './types.ts';

/** A stretch of bytes of the file; the data of a record are those of its segments, one after the other. */
export interface Segment {
  readonly offset: number;
  readonly bytes: number;
}

export interface FortranRecord {
  readonly segments: readonly Segment[];
  /** Bytes of data, without length words. */
  readonly bytes: number;
  /** Offset of the byte after the last length word. */
  readonly end: number;
}

export type WordBytes = 4 | 8;

/**
 * Finds the record that begins at `start`; reads only its length words.
 * @throws InputError `input.markers` if the words do not agree with each other or with the file's
 * length
 */
export async function findRecord(
  file: OpenFile,
  start: number,
  wordBytes: WordBytes,
  order: ByteOrder,
): Promise<FortranRecord> {
  const segments: Segment[] = [];
  let at = start;
  let bytes = 0;
  for (;;) {
    const first = await readWord(file, at, wordBytes, order);
    const length = Math.abs(first);
    const last =
      at + length + 2 * wordBytes <= file.size
        ? await readWord(file, at + wordBytes + length, wordBytes, order)
        : null;
    if (last === null) {
      throw new InputError(
        'input.markers',
        `${file.path}: the Fortran length word at byte ${at} says ${length} bytes, but only ${Math.max(0, file.size - at - 2 * wordBytes)} lie between it and the end of the file`,
        'Correct markers, headerBytes or byteOrder in the layout; or the file is cut off.',
      );
    }
    const continued = segments.length > 0;
    if (Math.abs(last) !== length || (length > 0 && last < 0 !== continued)) {
      throw new InputError(
        'input.markers',
        `${file.path}: the Fortran length word at byte ${at} says ${first}, the one that should close its record, at byte ${at + wordBytes + length}, says ${last}; expected ${continued ? -length : length}`,
        'Correct markers, headerBytes or byteOrder in the layout; or the file is damaged.',
      );
    }
    segments.push({ offset: at + wordBytes, bytes: length });
    bytes += length;
    at += length + 2 * wordBytes;
    if (first >= 0) return { segments, bytes, end: at };
  }
}

async function readWord(
  file: OpenFile,
  at: number,
  wordBytes: WordBytes,
  order: ByteOrder,
): Promise<number> {
  if (at + wordBytes > file.size) {
    throw new InputError(
      'input.markers',
      `${file.path}: expected a Fortran length word at byte ${at}, but the file ends at byte ${file.size}`,
      'Correct markers, headerBytes or fields in the layout; or the file is cut off.',
    );
  }
  const word = new DataView(new ArrayBuffer(wordBytes));
  await readExactly(file, new Uint8Array(word.buffer), 0, wordBytes, at);
  return wordBytes === 4
    ? word.getInt32(0, order === 'little')
    : Number(word.getBigInt64(0, order === 'little'));
}
