/** Pieces of the blocks of raw files → columns, each through one reused chunk. */
import { InputError } from '../../errors.ts';
import type { TakeJob } from '../../parallel/crew.ts';
import { readExactly, type OpenFile } from '../files.ts';
import type { Load, Piece, Target } from './bodies.ts';
import { decodeIds, decodeReals, giveChunk, takeChunk, type Chunk } from './decode.ts';
import type { LayoutField } from './layout.ts';
import type { Segment } from './markers.ts';
import type { Block, RawStructure } from './structure.ts';
import { NATIVE_ORDER, TYPE_BYTES, type ByteOrder } from './types.ts';

export interface PiecesRound {
  readonly loads: readonly Load[];
  readonly pieces: readonly Piece[];
}

/** A job is a piece. @throws InputError `input.markers`, `input.changed`, `input.unreadable` */
export async function decodePieces(round: PiecesRound, takeJob: TakeJob): Promise<void> {
  const { loads, pieces } = round;
  const chunk = takeChunk(pieces.reduce((most, { bytes }) => Math.max(most, bytes), 0));
  const decoders = loads.map(({ file, structure, targets }) =>
    structure.blocks.map((block) =>
      decoderOf(file, structure, block, placeTargets(block, targets), chunk),
    ),
  );
  try {
    for (let job = takeJob(); job >= 0; job = takeJob()) {
      const { load, block, body, first, at, count, bytes } = pieces[job];
      const { file, structure } = loads[load];
      const { segments, stride } = structure.blocks[block];
      await readStretch(file, segments, body * stride, bytes, chunk.bytes);
      decoders[load][block](first, at, count);
    }
  } finally {
    giveChunk(chunk);
  }
}

interface PlacedTarget {
  readonly target: Target;
  readonly field: LayoutField;
  readonly offset: number;
}

/** Targets of a block, with the place of each one's number in the stride. */
function placeTargets(block: Block, targets: readonly Target[]): PlacedTarget[] {
  return targets.flatMap((target) =>
    target.sources.flatMap(({ field, lane }) => {
      const place = block.fields.find((placed) => placed.field === field);
      if (place === undefined) return [];
      return [{ target, field, offset: place.offset + lane * TYPE_BYTES[field.type] }];
    }),
  );
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
    for (const { target, field, offset } of placed) {
      const { type, scale } = field;
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
