/** Where in a file the numbers lie that a layout speaks of: header, counts and blocks, checked to the byte. */
import { InputError } from '../../errors.ts';
import type { OpenFile } from '../files.ts';
import {
  addUp,
  countsText,
  placeComponents,
  statedComponents,
  type PlacedComponent,
  type StatedComponent,
} from './components.ts';
import { noParticles, readHeader, statedCount, wordBytesOf } from './header.ts';
import { bodyBytes, fieldBytes, isSkip, type Layout, type LayoutField } from './layout.ts';
import { findRecord, type FortranRecord, type Segment, type WordBytes } from './markers.ts';
import {
  countIn,
  runsOf,
  sectionsOf,
  strideOf,
  type Entry,
  type Run,
  type Section,
} from './sections.ts';

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
  /** One; more if a field is held by components that are not neighbours. */
  readonly runs: readonly Run[];
  /** If each body is a Fortran record of its own: the words that stand in each stride. */
  readonly bodyMarkers: { readonly wordBytes: WordBytes; readonly length: number } | null;
}

export interface RawStructure {
  readonly layout: Layout;
  readonly count: number;
  /** All items of the header by name, 64-bit integers as bigint. */
  readonly header: ReadonlyMap<string, number | bigint>;
  /** In the order of the file; none if the layout does not list any. */
  readonly components: readonly PlacedComponent[];
  readonly blocks: readonly Block[];
}

/**
 * Lays the layout over the file.
 * @throws InputError `input.truncated` (shorter than count and layout need), `input.sizeMismatch`
 * (longer), `input.partialRecord` (no count, and not a whole number of bodies), `input.badCount`,
 * `input.headerValue`, `input.noParticles`, `input.markers`
 */
export async function layOver(file: OpenFile, layout: Layout): Promise<RawStructure> {
  const { header, end } = await readHeader(file, layout);
  const components = statedComponents(file, layout, header);
  const total = statedCount(file, layout, header);
  const stated = components === null ? total : addUp(file, components, total);
  if (stated === 0n) {
    const isWhole = components === null;
    throw noParticles(
      file,
      isWhole ? 'the header says that it holds 0 bodies' : 'all its components have 0 bodies',
    );
  }
  const sections = sectionsOf(layout, components);
  const found =
    layout.markers === 'none'
      ? plainBlocks(file, layout, sections, components, stated)
      : await recordBlocks(file, layout, end, sections, stated);
  return { layout, header, components: placeComponents(components ?? []), ...found };
}

interface Found {
  readonly count: number;
  readonly blocks: Block[];
}

function plainBlocks(
  file: OpenFile,
  layout: Layout,
  sections: readonly Section[],
  components: readonly StatedComponent[] | null,
  stated: bigint | null,
): Found {
  if (stated !== null) checkLength(file, layout, components, stated);
  const count = Number(stated ?? countFromLength(file, layout));
  let offset = layout.headerBytes;
  const blocks = sections.map((section): Block => {
    const stride = strideOf(section);
    const segments = [{ offset, bytes: Number(countIn(section, BigInt(count))) * stride }];
    offset += segments[0].bytes;
    const runs = runsOf(section, count);
    return { fields: place(section.entries, 0), stride, segments, runs, bodyMarkers: null };
  });
  return { count, blocks };
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

/** Bytes that a file without length words has. */
export function plainBytes(
  layout: Layout,
  components: readonly StatedComponent[] | null,
  count: bigint,
): bigint {
  const bodies =
    components === null
      ? count * BigInt(bodyBytes(layout))
      : components.reduce((sum, c) => sum + c.count * BigInt(bodyBytes(layout, c.name)), 0n);
  return BigInt(layout.headerBytes) + bodies;
}

function checkLength(
  file: OpenFile,
  layout: Layout,
  components: readonly StatedComponent[] | null,
  count: bigint,
): void {
  const expected = plainBytes(layout, components, count);
  const size = BigInt(file.size);
  if (expected === size) return;
  const after = layout.headerBytes > 0 ? ` after a header of ${layout.headerBytes}` : '';
  const sum = `${bodiesText(layout, components, count)}${after} take ${expected} bytes`;
  if (expected < size) {
    throw new InputError(
      'input.sizeMismatch',
      `${file.path} has ${size} bytes; expected ${expected}: ${sum}`,
      'Correct the layout.',
    );
  }
  const isOneBlock = components === null && layout.arrangement === 'interleaved';
  const whole = (size - BigInt(layout.headerBytes)) / BigInt(bodyBytes(layout));
  throw new InputError(
    'input.truncated',
    `${file.path} has ${size} bytes; expected ${expected}: ${sum}`,
    `If the layout is right, the file is cut off${isOneBlock ? ` inside body ${whole} (counted from 0)` : ''}.`,
  );
}

function bodiesText(
  layout: Layout,
  components: readonly StatedComponent[] | null,
  count: bigint,
): string {
  if (components === null) return `${count} bodies of ${bodyBytes(layout)} bytes`;
  return components
    .filter((c) => c.count > 0n)
    .map((c) => `${countsText([c])} of ${bodyBytes(layout, c.name)} bytes`)
    .join(' and ');
}

function place(entries: readonly Entry[], start: number): PlacedField[] {
  const placed: PlacedField[] = [];
  let offset = start;
  for (const entry of entries) {
    if (!isSkip(entry)) placed.push({ field: entry, offset });
    offset += fieldBytes(entry);
  }
  return placed;
}

/** One record a section; or, of interleaved bodies, one a body: the length words tell. */
async function recordBlocks(
  file: OpenFile,
  layout: Layout,
  start: number,
  sections: readonly Section[],
  stated: bigint | null,
): Promise<Found> {
  if (start === file.size) throw noParticles(file, 'it ends with its header');
  const wordBytes = wordBytesOf(layout);
  const blocks: Block[] = [];
  let at = start;
  let count = stated;
  for (const section of sections) {
    const expected = countIn(section, count);
    if (expected === 0n) {
      at = await afterEmptyRecord(file, layout, at);
      continue;
    }
    const stride = strideOf(section);
    const record = await findRecord(file, at, wordBytes, layout.byteOrder);
    const isOneABody =
      layout.arrangement === 'interleaved' &&
      record.bytes === stride &&
      (expected === null ? record.end < file.size : expected !== 1n);
    const found = isOneABody
      ? bodyRecords(file, at, section, wordBytes, expected)
      : wholeRecord(file, record, section, expected);
    count ??= BigInt(found.count);
    blocks.push({ ...found.block, runs: runsOf(section, Number(count)) });
    at = found.end;
  }
  checkEnd(file, at);
  return { count: Number(count), blocks };
}

/** A component without bodies may have left a record of 0 bytes, or none. */
async function afterEmptyRecord(file: OpenFile, layout: Layout, at: number): Promise<number> {
  if (at === file.size) return at;
  const record = await findRecord(file, at, wordBytesOf(layout), layout.byteOrder);
  return record.bytes === 0 ? record.end : at;
}

interface FoundRecords {
  readonly count: number;
  readonly block: Omit<Block, 'runs'>;
  readonly end: number;
}

function bodyRecords(
  file: OpenFile,
  start: number,
  section: Section,
  wordBytes: WordBytes,
  expected: bigint | null,
): FoundRecords {
  const length = strideOf(section);
  const stride = length + 2 * wordBytes;
  const left = file.size - start;
  // Without components nothing follows.
  const bytes = section.holders === null ? left : Math.min(left, Number(expected) * stride);
  const count = Math.floor(bytes / stride);
  if (bytes % stride !== 0 || (expected !== null && expected !== BigInt(count))) {
    throw recordMismatch(file, `${bytes} bytes of records of ${stride}`, stride, expected);
  }
  const fields = place(section.entries, wordBytes);
  const segments = [{ offset: start, bytes }];
  const bodyMarkers = { wordBytes, length };
  return { count, block: { fields, stride, segments, bodyMarkers }, end: start + bytes };
}

function wholeRecord(
  file: OpenFile,
  record: FortranRecord,
  section: Section,
  expected: bigint | null,
): FoundRecords {
  const stride = strideOf(section);
  const count = countOfRecord(file, record.bytes, stride, expected, section.what);
  const fields = place(section.entries, 0);
  const block = { fields, stride, segments: record.segments, bodyMarkers: null };
  return { count, block, end: record.end };
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
