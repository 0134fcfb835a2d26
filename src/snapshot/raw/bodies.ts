/** Streams the blocks of a raw file through one reused chunk into columns. */
import { InputError, InterruptedError } from '../../errors.ts';
import { readExactly, type OpenFile } from '../files.ts';
import type { FloatColumn, IdColumn } from '../particles.ts';
import type { ReadOptions } from '../reading.ts';
import type { ComponentCodes } from './components.ts';
import { allocateChunk, decodeIds, decodeReals, type Chunk } from './decode.ts';
import type { Segment } from './markers.ts';
import type { Source } from './plan.ts';
import type { Block, RawStructure } from './structure.ts';
import { NATIVE_ORDER, TYPE_BYTES, type ByteOrder } from './types.ts';

/** Where the numbers of one source go. */
export type Target =
  | { readonly kind: 'reals'; readonly source: Source; readonly column: FloatColumn }
  | { readonly kind: 'ids'; readonly source: Source; readonly column: IdColumn }
  | { readonly kind: 'components'; readonly source: Source; readonly codes: ComponentCodes };

/** Half-open range of bodies. */
export interface BodyRange {
  readonly begin: number;
  readonly end: number;
}

/** Large enough that the cost of a call does not matter, small enough to stay in a cache. */
const CHUNK_BYTES = 4 << 20;
const PROGRESS_EVERY_MS = 50;

/**
 * Reads the bodies of `ranges`, one after the other, into the targets from index 0 on. Blocks
 * without a target are not read at all.
 * @throws InterruptedError when `options.signal` is aborted; InputError `input.markers`,
 * `input.changed`, `input.unreadable`
 */
export async function readBodies(
  file: OpenFile,
  structure: RawStructure,
  targets: readonly Target[],
  ranges: readonly BodyRange[],
  options: Pick<ReadOptions, 'onProgress' | 'signal'>,
): Promise<void> {
  const jobs = structure.blocks
    .map((block) => ({ block, placed: placeTargets(block, targets) }))
    .filter((job) => job.placed.length > 0);
  const bodies = ranges.reduce((sum, range) => sum + range.end - range.begin, 0);
  const bytesTotal = jobs.reduce((sum, job) => sum + job.block.stride * bodies, 0);
  const chunk = allocateChunk(
    jobs.reduce((most, { block }) => {
      const perChunk = Math.max(1, Math.floor(CHUNK_BYTES / block.stride));
      return Math.max(most, Math.min(bodies, perChunk) * block.stride);
    }, 0),
  );
  let bytesDone = 0;
  let reportedAt = -Infinity;
  for (const { block, placed } of jobs) {
    const decode = decoderOf(file, structure, block, placed, chunk);
    const perChunk = Math.max(1, Math.floor(CHUNK_BYTES / block.stride));
    let at = 0;
    for (const range of ranges) {
      for (let body = range.begin; body < range.end; body += perChunk) {
        if (options.signal?.aborted) throw new InterruptedError();
        const count = Math.min(perChunk, range.end - body);
        const bytes = count * block.stride;
        await readStretch(file, block.segments, body * block.stride, bytes, chunk.bytes);
        decode(body, at, count);
        at += count;
        bytesDone += bytes;
        const now = performance.now();
        if (now - reportedAt >= PROGRESS_EVERY_MS || bytesDone === bytesTotal) {
          reportedAt = now;
          options.onProgress?.(bytesDone, bytesTotal);
        }
      }
    }
  }
}

interface PlacedTarget {
  readonly target: Target;
  readonly offset: number;
}

function placeTargets(block: Block, targets: readonly Target[]): PlacedTarget[] {
  return targets.flatMap((target) => {
    const { field, lane } = target.source;
    const place = block.fields.find((placed) => placed.field === field);
    if (place === undefined) return [];
    return [{ target, offset: place.offset + lane * TYPE_BYTES[field.type] }];
  });
}

/** Bytes `begin` … `begin + length` of the data that the segments make up, to the start of `into`. */
async function readStretch(
  file: OpenFile,
  segments: readonly Segment[],
  begin: number,
  length: number,
  into: Uint8Array,
): Promise<void> {
  let skipped = 0;
  let done = 0;
  for (const segment of segments) {
    const from = begin + done - skipped;
    if (done < length && from < segment.bytes) {
      const bytes = Math.min(length - done, segment.bytes - from);
      await readExactly(file, into, done, bytes, segment.offset + from);
      done += bytes;
    }
    skipped += segment.bytes;
  }
}

type Decoder = (firstBody: number, at: number, count: number) => void;

function decoderOf(
  file: OpenFile,
  structure: RawStructure,
  block: Block,
  placed: readonly PlacedTarget[],
  chunk: Chunk,
): Decoder {
  const fileOrder = structure.layout.byteOrder;
  const swap = fileOrder === NATIVE_ORDER ? null : uniformBytes(block);
  const order: ByteOrder = swap === null ? fileOrder : NATIVE_ORDER;
  const isNative = order === NATIVE_ORDER;
  const { stride, bodyMarkers } = block;
  return (firstBody, at, count) => {
    if (bodyMarkers !== null) {
      checkMarkers(file, chunk.view, block, bodyMarkers, fileOrder, firstBody, count);
    }
    if (swap === 8) chunk.bytes.subarray(0, count * stride).swap64();
    if (swap === 4) chunk.bytes.subarray(0, count * stride).swap32();
    for (const { target, offset } of placed) {
      const { type, scale } = target.source.field;
      if (target.kind === 'reals') {
        const { column } = target;
        decodeReals(chunk, offset, stride, type, order, isNative, scale, column, at, count);
      } else if (target.kind === 'ids') {
        decodeIds(chunk.view, offset, stride, order, target.column, at, count);
      } else {
        target.codes.decode(chunk, offset, stride, type, order, scale, at, count);
      }
    }
  };
}

/** 8 or 4 if every number of the block has that many bytes and lies on a multiple of them: then all can be swapped at once. */
function uniformBytes(block: Block): 4 | 8 | null {
  for (const bytes of [8, 4] as const) {
    const uniform = block.fields.every(
      (placed) => TYPE_BYTES[placed.field.type] === bytes && placed.offset % bytes === 0,
    );
    if (uniform && block.stride % bytes === 0) return bytes;
  }
  return null;
}

function checkMarkers(
  file: OpenFile,
  view: DataView,
  block: Block,
  markers: NonNullable<Block['bodyMarkers']>,
  order: ByteOrder,
  firstBody: number,
  count: number,
): void {
  const { wordBytes, length } = markers;
  const little = order === 'little';
  const word = (at: number): number =>
    wordBytes === 4 ? view.getInt32(at, little) : Number(view.getBigInt64(at, little));
  for (let i = 0, o = 0; i < count; i++, o += block.stride) {
    const first = word(o);
    const last = word(o + wordBytes + length);
    if (first === length && last === length) continue;
    throw new InputError(
      'input.markers',
      `${file.path}: the Fortran length words around body ${firstBody + i} say ${first} and ${last}; expected ${length} for each`,
      'Correct fields or markers in the layout; or the file is damaged.',
    );
  }
}
