/** Loads are cut into pieces that can be loaded in any order, each by any thread. */
import { crewOfOne, type Crew, type RoundWatch } from '../parallel/crew.ts';
import type { ReadOptions } from './reading.ts';

/** Large enough that the cost of a call does not matter, small enough to stay in a cache. */
export const PIECE_BYTES = 2 ** 21;
/** Less is loaded sooner than the workers of a crew are told to. */
const TOGETHER_BYTES = 8 * 2 ** 20;
const PROGRESS_EVERY_MS = 50;

export interface LoadOptions {
  readonly onProgress?: ReadOptions['onProgress'] | undefined;
  readonly signal?: AbortSignal | undefined;
}

export interface Sized {
  readonly bytes: number;
}

export function bytesOf(pieces: readonly Sized[]): number {
  return pieces.reduce((sum, { bytes }) => sum + bytes, 0);
}

/** The crew for a load of so many bytes. */
export function crewFor(bytes: number, crew: Crew): Crew {
  return bytes < TOGETHER_BYTES ? crewOfOne() : crew;
}

type Progress = NonNullable<ReadOptions['onProgress']>;

/** Tells progress not more often than some tens of times a second, and the end of it. */
export function seldom(onProgress: Progress | undefined): Progress {
  let toldAt = -Infinity;
  return (done, total) => {
    const now = performance.now();
    if (now - toldAt < PROGRESS_EVERY_MS && done !== total) return;
    toldAt = now;
    onProgress?.(done, total);
  };
}

/** What is to be known of a round whose jobs are these pieces: its progress in bytes, and its end. */
export function watchOf(pieces: readonly Sized[], { onProgress, signal }: LoadOptions): RoundWatch {
  if (onProgress === undefined) return { signal };
  const total = bytesOf(pieces);
  const tell = seldom(onProgress);
  let piece = 0;
  let bytes = 0;
  return {
    signal,
    onProgress: (done) => {
      while (piece < done) bytes += pieces[piece++].bytes;
      tell(bytes, total);
    },
  };
}
