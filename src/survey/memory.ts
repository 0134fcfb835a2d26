/** Memory that a measurement will take, asked for before anything is read. */
import { freemem } from 'node:os';
import { InputError, UsageError } from '../errors.ts';
import { snapshotBytes, type JoinedFile } from '../snapshot/parts.ts';
import { describeSnapshot } from '../snapshot/read.ts';
import type { ReadOptions, SnapshotDescription } from '../snapshot/reading.ts';
import { isSelecting } from '../snapshot/select.ts';

/** Files below this size are read without asking. */
const ASK_ABOVE_BYTES = 256 * 2 ** 20;
/** What Node and its threads take whatever is measured. */
const BASE_BYTES = 150 * 2 ** 20;

/**
 * Bytes a body beyond its own columns: tree copy 36, buckets 2, nodes with multipoles some 60,
 * potential and scratch 16, bound set and its field 17; softening adds the Clausius share twice.
 */
export const BYTES_A_BODY = 131;
const BYTES_IF_SOFTENED = 16;
/** Potentials and accelerations of the file, the same corrected, our own accelerations, shares of W. */
export const BYTES_OF_FILE_FORCES = 96;
/** Squared softening lengths of the bodies, in input and tree order; more and larger nodes for them. */
export const BYTES_OF_LENGTHS = 72;
/** Positions and velocities in physical coordinates. */
const BYTES_IF_COMOVING = 48;
/** Mass, position, velocity, what tells who is meant, and an index. */
const BYTES_TO_SELECT = 72;

/**
 * Bytes that measuring will take at its peak, roughly.
 * @param moreBytes - bytes a body that options add
 */
export function memoryNeeded(
  description: SnapshotDescription,
  softened: boolean,
  moreBytes = 0,
): number {
  const needed = description.columns
    .filter(({ field }) => field !== null)
    .reduce((sum, { width, type }) => sum + width * (type === 'float32' ? 4 : 8), 0);
  const isComoving = description.frame.kind === 'comoving';
  const columns = Math.min(needed, 64) + (isComoving ? BYTES_IF_COMOVING : 0);
  return (
    BASE_BYTES +
    description.count * (columns + BYTES_A_BODY + (softened ? BYTES_IF_SOFTENED : 0) + moreBytes)
  );
}

/**
 * Refuses a snapshot that will not fit into memory, before reading it.
 * @param moreBytes - bytes a body that options add
 * @param available - bytes that may be used; what the machine or container has free if not given
 * @throws InputError `input.tooLarge`
 */
export async function requireMemory(
  snapshot: JoinedFile,
  options: ReadOptions,
  softened: boolean,
  moreBytes: number,
  available?: number,
): Promise<void> {
  const { file: path } = snapshot;
  if (path === '-' || ((await snapshotBytes(snapshot)) ?? 0) < ASK_ABOVE_BYTES) return;
  const description = await describeSnapshot(path, options, 'no values');
  // How many bodies a selection leaves is not known before: those that are read must fit.
  const needed = isSelecting(options)
    ? BASE_BYTES + description.count * BYTES_TO_SELECT
    : memoryNeeded(description, softened, moreBytes);
  const free = available ?? memoryAvailable();
  if (needed <= free) return;
  throw new InputError(
    'input.tooLarge',
    `${path} holds ${description.count} bodies, which take about ${gigabytes(needed)} to measure; ${gigabytes(free)} are free`,
    'use a machine with more memory, end other programs, or write the snapshot in single precision',
  );
}

/**
 * Refuses to make more bodies than fit into memory, before anything is drawn.
 * @param bytesABody - of the columns and what is made beside them
 * @param available - bytes that may be used; what the machine or container has free if not given
 * @throws UsageError `usage.modelOption`
 */
export function requireMemoryToMake(count: number, bytesABody: number, available?: number): void {
  const needed = BASE_BYTES + count * bytesABody;
  // A count that is no number is refused where counts are checked.
  if (!(needed >= ASK_ABOVE_BYTES)) return;
  const free = available ?? memoryAvailable();
  if (needed <= free) return;
  throw new UsageError(
    'usage.modelOption',
    `The option count (--count) asks for ${count} bodies, which take about ${gigabytes(needed)} to make; ${gigabytes(free)} are free.`,
    'Give fewer bodies, use a machine with more memory, or end other programs.',
  );
}

/**
 * The same for a conversion, which holds all columns of the snapshot and no tree.
 * @throws InputError `input.tooLarge`
 */
export async function requireMemoryToConvert(path: string, options: ReadOptions): Promise<void> {
  if (path === '-') return;
  const { columns, count } = await describeSnapshot(path, options, 'no values');
  const perBody = columns
    .filter(({ field }) => field !== null)
    .reduce((sum, { width }) => sum + 8 * width, 0);
  const needed = 2 * BASE_BYTES + count * perBody;
  if (count * perBody < ASK_ABOVE_BYTES) return;
  const free = memoryAvailable();
  if (needed <= free) return;
  throw new InputError(
    'input.tooLarge',
    `${path} holds ${count} bodies, which take about ${gigabytes(needed)} to convert; ${gigabytes(free)} are free`,
    'use a machine with more memory, or end other programs',
  );
}

/** Bytes free to this process: what the machine has, or less if its container allows less. */
function memoryAvailable(): number {
  const limit = process.constrainedMemory();
  const free = freemem();
  return limit > 0 ? Math.min(free, Math.max(0, limit - process.memoryUsage().rss)) : free;
}

function gigabytes(bytes: number): string {
  return `${(bytes / 1e9).toPrecision(3)} GB`;
}
