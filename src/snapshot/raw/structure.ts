/** Where in a file the numbers lie that a layout speaks of: header, count and blocks, checked to the byte. */
import { InputError } from '../../errors.ts';
import type { OpenFile } from '../files.ts';
import { noParticles, readHeader, statedCount, wordBytesOf } from './header.ts';
import {
  bodyBytes,
  fieldBytes,
  isSkip,
  type Layout,
  type LayoutField,
  type LayoutSkip,
} from './layout.ts';
import { findRecord, type Segment, type WordBytes } from './markers.ts';

/** A field inside a block, `offset` bytes after the beginning of each body's part of it. */
export interface PlacedField {
  readonly field: LayoutField;
  readonly offset: number;
}

/** Bytes in which the same fields come again every `stride` bytes, once a body. */
export interface Block {
  readonly fields: readonly PlacedField[];
  readonly stride: number;
  readonly segments: readonly Segment[];
  /** If each body is a Fortran record of its own: the words that stand in each stride. */
  readonly bodyMarkers: { readonly wordBytes: WordBytes; readonly length: number } | null;
}

export interface RawStructure {
  readonly layout: Layout;
  readonly count: number;
  /** All items of the header by name, 64-bit integers as bigint. */
  readonly header: ReadonlyMap<string, number | bigint>;
  readonly blocks: readonly Block[];
}

/**
 * Lays the layout over the file.
 * @throws InputError `input.truncated` (shorter than count and layout need), `input.sizeMismatch`
 * (longer), `input.partialRecord` (no count, and not a whole number of bodies), `input.badCount`,
 * `input.noParticles`, `input.markers`
 */
export async function layOver(file: OpenFile, layout: Layout): Promise<RawStructure> {
  const { header, end } = await readHeader(file, layout);
  const stated = statedCount(file, layout, header);
  if (layout.markers === 'none') {
    const count = stated ?? countFromLength(file, layout);
    if (stated !== null) checkLength(file, layout, stated);
    return { layout, count: Number(count), header, blocks: plainBlocks(layout, Number(count)) };
  }
  const { count, blocks } =
    layout.arrangement === 'interleaved'
      ? await interleavedRecords(file, layout, end, stated)
      : await columnRecords(file, layout, end, stated);
  return { layout, count, header, blocks };
}

function countFromLength(file: OpenFile, layout: Layout): bigint {
  const stride = bodyBytes(layout);
  const bytes = file.size - layout.headerBytes;
  if (bytes === 0) throw noParticles(file, 'it ends with its header');
  const rest = bytes % stride;
  if (rest !== 0) {
    throw new InputError(
      'input.partialRecord',
      `${file.path} has ${file.size} bytes; expected ${layout.headerBytes > 0 ? `a header of ${layout.headerBytes} and ` : ''}a multiple of ${stride} bytes a body, but ${rest} are left over after ${Math.floor(bytes / stride)} bodies`,
      'The file is cut off, or the layout is not its own.',
    );
  }
  return BigInt(bytes / stride);
}

function checkLength(file: OpenFile, layout: Layout, count: bigint): void {
  const stride = bodyBytes(layout);
  const expected = BigInt(layout.headerBytes) + count * BigInt(stride);
  const size = BigInt(file.size);
  if (expected === size) return;
  const sum = `${count} bodies of ${stride} bytes${layout.headerBytes > 0 ? ` after a header of ${layout.headerBytes}` : ''} take ${expected} bytes`;
  if (expected < size) {
    throw new InputError(
      'input.sizeMismatch',
      `${file.path} has ${size} bytes; expected ${expected}: ${sum}`,
      'Correct the layout.',
    );
  }
  const whole = (size - BigInt(layout.headerBytes)) / BigInt(stride);
  throw new InputError(
    'input.truncated',
    `${file.path} has ${size} bytes; expected ${expected}: ${sum}`,
    `If the layout is right, the file is cut off${layout.arrangement === 'interleaved' ? ` inside body ${whole} (counted from 0)` : ''}.`,
  );
}

function place(entries: readonly (LayoutField | LayoutSkip)[], start: number): PlacedField[] {
  const placed: PlacedField[] = [];
  let offset = start;
  for (const entry of entries) {
    if (!isSkip(entry)) placed.push({ field: entry, offset });
    offset += fieldBytes(entry);
  }
  return placed;
}

function plainBlocks(layout: Layout, count: number): Block[] {
  const parts =
    layout.arrangement === 'interleaved' ? [layout.fields] : layout.fields.map((f) => [f]);
  let offset = layout.headerBytes;
  return parts.map((entries) => {
    const stride = entries.reduce((sum, entry) => sum + fieldBytes(entry), 0);
    const segments = [{ offset, bytes: count * stride }];
    offset += count * stride;
    return { fields: place(entries, 0), stride, segments, bodyMarkers: null };
  });
}

interface Found {
  readonly count: number;
  readonly blocks: Block[];
}

/** One record with all bodies, or one record a body. */
async function interleavedRecords(
  file: OpenFile,
  layout: Layout,
  start: number,
  stated: bigint | null,
): Promise<Found> {
  if (start === file.size) throw noParticles(file, 'it ends with its header');
  const wordBytes = wordBytesOf(layout);
  const length = bodyBytes(layout);
  const record = await findRecord(file, start, wordBytes, layout.byteOrder);
  if (record.bytes === length && record.end < file.size) {
    const stride = length + 2 * wordBytes;
    const bytes = file.size - start;
    const count = Math.floor(bytes / stride);
    if (bytes % stride !== 0 || (stated !== null && stated !== BigInt(count))) {
      throw recordMismatch(file, `${bytes} bytes of records of ${stride}`, stride, stated);
    }
    const bodyMarkers = { wordBytes, length };
    const fields = place(layout.fields, wordBytes);
    return {
      count,
      blocks: [{ fields, stride, segments: [{ offset: start, bytes }], bodyMarkers }],
    };
  }
  const count = countOfRecord(file, record.bytes, length, stated, 'the bodies');
  checkEnd(file, record.end);
  const fields = place(layout.fields, 0);
  return {
    count,
    blocks: [{ fields, stride: length, segments: record.segments, bodyMarkers: null }],
  };
}

/** One record a field. */
async function columnRecords(
  file: OpenFile,
  layout: Layout,
  start: number,
  stated: bigint | null,
): Promise<Found> {
  if (start === file.size) throw noParticles(file, 'it ends with its header');
  const blocks: Block[] = [];
  let at = start;
  let count = stated;
  for (const entry of layout.fields) {
    const stride = fieldBytes(entry);
    const record = await findRecord(file, at, wordBytesOf(layout), layout.byteOrder);
    const name = isSkip(entry) ? `a field of ${entry.skip} bytes` : entry.name;
    count = BigInt(countOfRecord(file, record.bytes, stride, count, name));
    blocks.push({
      fields: place([entry], 0),
      stride,
      segments: record.segments,
      bodyMarkers: null,
    });
    at = record.end;
  }
  checkEnd(file, at);
  return { count: Number(count), blocks };
}

function countOfRecord(
  file: OpenFile,
  bytes: number,
  stride: number,
  stated: bigint | null,
  what: string,
): number {
  if (bytes === 0) throw noParticles(file, `the record of ${what} is empty`);
  const fits = stated === null ? bytes % stride === 0 : BigInt(bytes) === stated * BigInt(stride);
  if (!fits) throw recordMismatch(file, `a record of ${bytes} bytes for ${what}`, stride, stated);
  return bytes / stride;
}

function recordMismatch(
  file: OpenFile,
  found: string,
  stride: number,
  stated: bigint | null,
): InputError {
  return new InputError(
    'input.sizeMismatch',
    `${file.path}: found ${found}; expected ${
      stated === null
        ? `a multiple of ${stride}`
        : `${stated * BigInt(stride)}: ${stated} bodies of ${stride} bytes`
    }`,
    'Correct fields, headerBytes or arrangement in the layout.',
  );
}

function checkEnd(file: OpenFile, end: number): void {
  if (end === file.size) return;
  throw new InputError(
    'input.sizeMismatch',
    `${file.path} has ${file.size} bytes; expected its end at byte ${end}, after the last record of the layout`,
    'Add the records that are missing in the layout, as {"skip": n} for n bytes a body.',
  );
}
