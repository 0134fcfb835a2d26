/** Bodies of raw files into columns: cut into pieces, loaded by one thread or by all of a crew. */
import { crewOfOne, type Crew, type TaskModule } from '../../parallel/crew.ts';
import type { OpenFile } from '../files.ts';
import type { FloatColumn, IdColumn } from '../particles.ts';
import { bytesOf, crewFor, PIECE_BYTES, watchOf, type LoadOptions } from '../pieces.ts';
import type * as BodiesTask from './bodies.task.ts';
import type { ComponentCodes } from './component-codes.ts';
import type { Sources } from './plan.ts';
import type { RawStructure } from './structure.ts';

const TASK: TaskModule<typeof BodiesTask> = {
  url: new URL('./bodies.task.js', import.meta.url),
  load: () => import('./bodies.task.ts'),
};

/** Where the numbers of the sources of one column go. */
export type Target =
  | { readonly kind: 'reals'; readonly sources: Sources; readonly column: FloatColumn }
  | { readonly kind: 'ids'; readonly sources: Sources; readonly column: IdColumn }
  | { readonly kind: 'components'; readonly sources: Sources; readonly codes: ComponentCodes };

/** Half-open range of bodies. */
export interface BodyRange {
  readonly begin: number;
  readonly end: number;
}

/** What is read of one file: the bodies of `ranges`, into the targets from index 0 on. */
export interface Load {
  readonly file: OpenFile;
  readonly structure: RawStructure;
  readonly targets: readonly Target[];
  readonly ranges: readonly BodyRange[];
}

/** Bodies `body` … of a block, `first` … of the file, which go to index `at` … of the targets. */
export interface Piece {
  /** Index of the load. */
  readonly load: number;
  readonly block: number;
  readonly body: number;
  readonly first: number;
  readonly at: number;
  readonly count: number;
  readonly bytes: number;
}

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
  options: LoadOptions,
  crew?: Crew,
): Promise<void> {
  await readLoads([{ file, structure, targets, ranges }], options, crew);
}

/** {@link readBodies} of several files at once, all workers on all of them. */
export async function readLoads(
  loads: readonly Load[],
  options: LoadOptions,
  crew = crewOfOne(),
): Promise<void> {
  const pieces = loads.flatMap(piecesOf);
  // Codes of components are numbered as they are met: one thread after the other.
  const inOrder = loads.some(({ targets }) => targets.some(({ kind }) => kind === 'components'));
  const workers = inOrder ? crewOfOne() : crewFor(bytesOf(pieces), crew);
  const round = { loads, pieces };
  await workers.run(TASK, 'decodePieces', round, pieces.length, watchOf(pieces, options));
}

function piecesOf({ structure, targets, ranges }: Load, load: number): Piece[] {
  const { blocks } = structure;
  const fields = new Set(targets.flatMap(({ sources }) => sources.map(({ field }) => field)));
  const pieces: Piece[] = [];
  blocks.forEach(({ fields: placed, stride, runs }, block) => {
    if (!placed.some(({ field }) => fields.has(field))) return;
    const most = Math.max(1, Math.floor(PIECE_BYTES / stride));
    for (const run of runs) {
      let passed = 0;
      for (const { begin, end } of ranges) {
        const last = Math.min(end, run.at + run.count);
        for (let first = Math.max(begin, run.at); first < last; first += most) {
          const count = Math.min(most, last - first);
          const [body, at] = [run.body + first - run.at, passed + first - begin];
          pieces.push({ load, block, body, first, at, count, bytes: count * stride });
        }
        passed += end - begin;
      }
    }
  });
  return pieces;
}
