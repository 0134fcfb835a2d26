/** Loads planned batches into columns: cut into pieces, loaded by one thread or by all of a crew. */
import { InputError } from '../../errors.ts';
import { crewOfOne, type TaskModule } from '../../parallel/crew.ts';
import { bytesOf, crewFor, PIECE_BYTES, watchOf, type LoadOptions } from '../pieces.ts';
import type { FieldName } from '../reading.ts';
import type { PlannedBatch } from './batches.ts';
import { allocateStored, type StoredColumn } from './convert.ts';
import { BYTES_OF, type PlannedColumn } from './kinds.ts';
import type * as LoadTask from './load.task.ts';

const TASK: TaskModule<typeof LoadTask> = {
  url: new URL('./load.task.js', import.meta.url),
  load: () => import('./load.task.ts'),
};

export type ColumnSet = ReadonlyMap<FieldName, StoredColumn>;

/** Bodies up to this are read whole. */
const SMALL_BODY_BYTES = 2 ** 20;

/** Rows `row` … of one column of a batch, or of all its columns. */
export interface Piece {
  readonly batch: number;
  readonly column: number | null;
  readonly row: number;
  readonly rows: number;
  /** As they lie in the file. */
  readonly bytes: number;
}

/** All columns of a plan for `rows` rows, on shared memory. @throws InputError `input.tooLarge` */
export function allocateColumns(
  plan: readonly PlannedColumn[],
  rows: number,
  file: string,
): Map<FieldName, StoredColumn> {
  try {
    return new Map(
      plan.flatMap(({ targets, stored }) =>
        targets.map((target) => [target, allocateStored(stored, rows)] as const),
      ),
    );
  } catch (error) {
    throw new InputError(
      'input.tooLarge',
      `${file}: no memory for ${rows} bodies`,
      'Use a machine with more memory, or a part of the snapshot.',
      { cause: error },
    );
  }
}

/**
 * Loads the planned columns of batches, one batch after the other, from row 0 on.
 * @throws InputError `input.arrowDamaged`, `input.changed`, `input.unreadable`; InterruptedError
 */
export async function loadBatches(
  batches: readonly PlannedBatch[],
  plan: readonly PlannedColumn[],
  columns: ColumnSet,
  file: string,
  options: LoadOptions,
  crew = crewOfOne(),
): Promise<void> {
  const pieces = batches.flatMap((batch, index) => piecesOf(batch, index, plan));
  const rowBegins: number[] = [];
  let rows = 0;
  for (const batch of batches) {
    rowBegins.push(rows);
    rows += batch.rows;
  }
  const targets = plan.map((column) => column.targets.map((target) => columns.get(target)!));
  const round = { file, plan, batches, rowBegins, targets, pieces };
  const workers = crewFor(bytesOf(pieces), crew);
  await workers.run(TASK, 'loadPieces', round, pieces.length, watchOf(pieces, options));
}

function piecesOf(batch: PlannedBatch, index: number, plan: readonly PlannedColumn[]): Piece[] {
  const { rows, codec, regions, bodyLength } = batch;
  if (rows === 0) return [];
  const rowBytes = plan.map(({ kind, targets }) => targets.length * BYTES_OF[kind]);
  const bytes = plan.map((_, i) => (codec ? regions[i].length : rows * rowBytes[i]));
  const whole = { batch: index, row: 0, rows };
  if (bodyLength <= SMALL_BODY_BYTES) {
    return [{ ...whole, column: null, bytes: bytes.reduce((sum, n) => sum + n, 0) }];
  }
  return plan.flatMap((_, column) => {
    if (codec) return [{ ...whole, column, bytes: bytes[column] }];
    const pieces: Piece[] = [];
    const most = Math.floor(PIECE_BYTES / rowBytes[column]);
    for (let row = 0; row < rows; row += most) {
      const count = Math.min(most, rows - row);
      pieces.push({ batch: index, column, row, rows: count, bytes: count * rowBytes[column] });
    }
    return pieces;
  });
}
