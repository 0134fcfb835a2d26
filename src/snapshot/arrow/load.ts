/** Loads planned batches into columns; in memory beside them is one buffer of one column at most. */
import { InputError } from '../../errors.ts';
import { decompress } from './codecs.ts';
import { allocateStored, convertRows, isInPlace, type StoredColumn } from './convert.ts';
import type { PlannedBatch } from './batches.ts';
import { assertNotAborted, memoryBody } from './framing.ts';
import type { Region } from './layout.ts';
import { damaged } from './messages.ts';
import { BYTES_OF, type PlannedColumn } from './plan.ts';
import type { FieldName, ReadOptions } from '../reading.ts';

export type ColumnSet = ReadonlyMap<FieldName, StoredColumn>;

/** Bytes read at a time; two at once, since first use of new memory costs more than reading. */
const CHUNK_BYTES = 4 * 2 ** 20;
const LANES = 2;
/** Bodies up to this are read whole: one call instead of one a column. */
const SMALL_BODY_BYTES = 2 ** 20;
const PROGRESS_MS = 50;

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

/** Reports progress, and ends the load when the signal says so. */
export class Watch {
  private done = 0;
  private lastReport = -Infinity;
  private readonly total: number;
  private readonly options: ReadOptions;

  /** @param total - bytes in all, 0 if that is not known */
  constructor(total: number, options: ReadOptions) {
    this.total = total;
    this.options = options;
  }

  advance(bytes: number): void {
    assertNotAborted(this.options.signal);
    this.done += bytes;
    const now = performance.now();
    if (now - this.lastReport < PROGRESS_MS && this.done !== this.total) return;
    this.lastReport = now;
    this.options.onProgress?.(this.done, this.total);
  }
}

/**
 * Loads the planned columns of one batch into rows `rowBegin` and following.
 * @throws InputError `input.arrowDamaged`; InterruptedError
 */
export async function loadBatch(
  batch: PlannedBatch,
  plan: readonly PlannedColumn[],
  columns: ColumnSet,
  rowBegin: number,
  file: string,
  watch: Watch,
): Promise<void> {
  let { body } = batch;
  if (batch.bodyLength <= SMALL_BODY_BYTES) {
    const bytes = new Uint8Array(batch.bodyLength);
    await body.read(bytes, 0);
    body = memoryBody(bytes);
  }
  for (let i = 0; i < plan.length; i++) {
    const targets = plan[i].targets.map((target) => columns.get(target)!);
    const job: ColumnJob = { batch, body, column: plan[i], targets, rowBegin, file, watch };
    if (batch.rows === 0) continue;
    if (batch.codec) await loadCompressed(job, batch.regions[i]);
    else if (isInPlace(plan[i])) await loadInPlace(job, batch.regions[i]);
    else await loadConverted(job, batch.regions[i]);
  }
}

interface ColumnJob {
  readonly batch: PlannedBatch;
  readonly body: PlannedBatch['body'];
  readonly column: PlannedColumn;
  readonly targets: readonly StoredColumn[];
  readonly rowBegin: number;
  readonly file: string;
  readonly watch: Watch;
}

/** The bytes of the file are the bytes of the column. */
async function loadInPlace(job: ColumnJob, region: Region): Promise<void> {
  const [target] = job.targets;
  const width = target.BYTES_PER_ELEMENT;
  const bytes = new Uint8Array(target.buffer, job.rowBegin * width, job.batch.rows * width);
  let next = 0;
  const lane = async () => {
    while (next < bytes.length) {
      const begin = next;
      const end = Math.min(begin + CHUNK_BYTES, bytes.length);
      next = end;
      await job.body.read(bytes.subarray(begin, end), region.offset + begin);
      job.watch.advance(end - begin);
    }
  };
  // All lanes must have ended before the file may be closed, whatever became of one.
  const results = await Promise.allSettled(Array.from({ length: LANES }, lane));
  for (const result of results) if (result.status === 'rejected') throw result.reason;
}

async function loadConverted(job: ColumnJob, region: Region): Promise<void> {
  const rowBytes = BYTES_OF[job.column.kind] * job.column.targets.length;
  const rowsAtOnce = Math.min(job.batch.rows, Math.floor(CHUNK_BYTES / 4 / rowBytes));
  const scratch = new Uint8Array(rowsAtOnce * rowBytes);
  for (let row = 0; row < job.batch.rows; row += rowsAtOnce) {
    const rows = Math.min(rowsAtOnce, job.batch.rows - row);
    const bytes = scratch.subarray(0, rows * rowBytes);
    await job.body.read(bytes, region.offset + row * rowBytes);
    convert(job, bytes, row, rows);
    job.watch.advance(bytes.length);
  }
}

async function loadCompressed(job: ColumnJob, region: Region): Promise<void> {
  const { batch, column, file } = job;
  const packed = new Uint8Array(region.length);
  await job.body.read(packed, region.offset);
  job.watch.advance(packed.length);
  const needed = batch.rows * column.targets.length * BYTES_OF[column.kind];
  const place = `column "${column.fileName}" of ${batch.place}`;
  convert(job, decompress(batch.codec!, packed, needed, file, place), 0, batch.rows);
}

function convert(job: ColumnJob, bytes: Uint8Array, row: number, rows: number): void {
  const { column, targets, batch } = job;
  const componentOf = column.dictionaryId === null ? null : batch.componentOf;
  const stray = convertRows(column, bytes, rows, targets, job.rowBegin + row, componentOf);
  if (stray !== null)
    throw damaged(
      job.file,
      `column "${column.fileName}" of ${batch.place}`,
      `index ${stray} into a dictionary of ${componentOf?.length ?? 0} names`,
    );
}
