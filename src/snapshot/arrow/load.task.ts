/** Pieces of record batches → rows of columns; beside them in memory is one buffer a thread. */
import type { TakeJob } from '../../parallel/crew.ts';
import type { PlannedBatch } from './batches.ts';
import { readBody, type Body } from './body.ts';
import { codecNamed, decompress } from './codecs.ts';
import { convertRows, isInPlace, type StoredColumn } from './convert.ts';
import { damaged } from './damage.ts';
import { BYTES_OF, type PlannedColumn } from './kinds.ts';
import { PIECE_BYTES } from '../pieces.ts';
import type { Piece } from './load.ts';

export interface LoadRound {
  /** Name for messages. */
  readonly file: string;
  readonly plan: readonly PlannedColumn[];
  readonly batches: readonly PlannedBatch[];
  /** Row at which each batch begins. */
  readonly rowBegins: readonly number[];
  /** Of each planned column. */
  readonly targets: readonly (readonly StoredColumn[])[];
  readonly pieces: readonly Piece[];
}

/** A job is a piece. @throws InputError `input.arrowDamaged`, `input.changed`, `input.unreadable` */
export async function loadPieces(round: LoadRound, takeJob: TakeJob): Promise<void> {
  const { plan, batches, pieces } = round;
  try {
    for (let job = takeJob(); job >= 0; job = takeJob()) {
      const piece = pieces[job];
      const { body, bodyLength } = batches[piece.batch];
      if (piece.column !== null) {
        await loadColumn(round, piece, piece.column, body);
        continue;
      }
      // A small batch is read whole: one call instead of one a column.
      await withScratch(bodyLength, async (bytes) => {
        await readBody(body, bytes, 0);
        for (let column = 0; column < plan.length; column++) {
          await loadColumn(round, piece, column, bytes);
        }
      });
    }
  } finally {
    spares = spares.filter(({ length }) => length <= KEPT_BYTES);
  }
}

async function loadColumn(
  round: LoadRound,
  { batch: number, row, rows }: Piece,
  index: number,
  body: Body,
): Promise<void> {
  const batch = round.batches[number];
  const column = round.plan[index];
  const targets = round.targets[index];
  const region = batch.regions[index];
  const rowBytes = BYTES_OF[column.kind] * column.targets.length;
  const begin = round.rowBegins[number] + row;
  const place = `column "${column.fileName}" of ${batch.place}`;
  const convert = (bytes: Uint8Array): void => {
    const componentOf = column.dictionaryId === null ? null : batch.componentOf;
    const stray = convertRows(column, bytes, rows, targets, begin, componentOf);
    if (stray === null) return;
    const names = componentOf?.length ?? 0;
    throw damaged(round.file, place, `index ${stray} into a dictionary of ${names} names`);
  };

  if (column.isText) {
    const indices = batch.componentIndices?.subarray(row, row + rows);
    (targets[0] as Uint16Array).set(indices ?? [], begin);
  } else if (batch.codec !== null) {
    const codec = await codecNamed(batch.codec);
    await withScratch(region.length, async (packed) => {
      await readBody(body, packed, region.offset);
      convert(decompress(codec, packed, rows * rowBytes, round.file, place));
    });
    // What a codec in native code gave is freed in a turn of the event loop, and not before.
    if (rows * rowBytes > PIECE_BYTES) await new Promise((resolve) => setImmediate(resolve));
  } else if (isInPlace(column)) {
    // The bytes of the file are the bytes of the column.
    const bytes = new Uint8Array(targets[0].buffer, begin * rowBytes, rows * rowBytes);
    await readBody(body, bytes, region.offset + row * rowBytes);
  } else {
    await withScratch(rows * rowBytes, async (bytes) => {
      await readBody(body, bytes, region.offset + row * rowBytes);
      convert(bytes);
    });
  }
}

/** Larger rooms are kept for the time of a round only. */
const KEPT_BYTES = 2 ** 24;

let spares: Uint8Array[] = [];

/** Runs `work` with `length` bytes, aligned to 8, that are used again: new memory costs more than reading. */
async function withScratch(
  length: number,
  work: (bytes: Uint8Array) => Promise<void>,
): Promise<void> {
  const spare = spares.pop();
  const room = spare !== undefined && spare.length >= length ? spare : new Uint8Array(length);
  try {
    await work(room.subarray(0, length));
  } finally {
    spares.push(room);
  }
}
