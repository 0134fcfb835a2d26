/** Many snapshots: small ones spread whole over the workers, large ones worked on by all together. */
import type { MeasureRecord } from '../dynamics/record.ts';
import { InputError, UnanswerableError, UsageError, type SettlemarkError } from '../errors.ts';
import type { Crew, TaskModule } from '../parallel/crew.ts';
import { received } from '../parallel/protocol.ts';
import { fileBytes } from '../snapshot/files.ts';
import { measureFile, type SurveyOptions } from './measure.ts';
import type * as MeasureTask from './measure.task.ts';

const TASK: TaskModule<typeof MeasureTask> = {
  url: new URL('./measure.task.js', import.meta.url),
  load: () => import('./measure.task.ts'),
};

/** Files up to this size go whole to one worker: some 75,000 bodies. */
const SMALL_BYTES = 4 * 2 ** 20;
/** Small files a round and worker: enough to keep all busy, few enough that results come steadily. */
const FILES_A_WORKER = 16;

/** What became of one path. Errors are those that a user's input can cause; bugs are thrown. */
export type FileOutcome =
  | { readonly file: string; readonly record: MeasureRecord; readonly error: null }
  | { readonly file: string; readonly record: null; readonly error: SettlemarkError };

/**
 * Measures files and gives their outcomes in the order of the paths, as soon as that order allows.
 * The figures of a record do not depend on how the work was spread.
 */
export async function* measureMany(
  paths: readonly string[],
  options: SurveyOptions,
  crew: Crew,
): AsyncGenerator<FileOutcome> {
  let round = await beginRound(paths, 0, options, crew);
  try {
    for (let at = 0; at < paths.length;) {
      if (round === null) {
        yield await measureAlone(paths[at++], options, crew);
        round = await beginRound(paths, at, options, crew);
        continue;
      }
      const { files, outcomes } = round;
      at += files;
      // The next round waits at the workers, so that none of them waits for the last file of this one.
      round = await beginRound(paths, at, options, crew);
      yield* await outcomes;
    }
  } finally {
    await round?.outcomes.catch(() => undefined);
  }
}

interface SmallRound {
  readonly files: number;
  readonly outcomes: Promise<FileOutcome[]>;
}

/** Gives small files from index `begin` on to the workers; null if there are not even two. */
async function beginRound(
  paths: readonly string[],
  begin: number,
  options: SurveyOptions,
  crew: Crew,
): Promise<SmallRound | null> {
  const batch = await smallFiles(paths, begin, crew);
  if (batch.length < 2) return null;
  const outcomes = measureTogether(batch, options, crew);
  outcomes.catch(() => undefined); // Whoever waits for them hears of it, which may be later.
  return { files: batch.length, outcomes };
}

/** The small files from index `begin` on, as many as make a round; none for a crew of one. */
async function smallFiles(paths: readonly string[], begin: number, crew: Crew): Promise<string[]> {
  if (crew.threads === 1) return [];
  const some = paths.slice(begin, begin + crew.threads * FILES_A_WORKER);
  const small = await Promise.all(some.map(isSmall));
  const end = small.indexOf(false);
  return end < 0 ? some : some.slice(0, end);
}

/** A path that cannot be looked at is left to the reader, which says what is wrong with it. */
async function isSmall(path: string): Promise<boolean> {
  return path !== '-' && ((await fileBytes(path)) ?? Infinity) <= SMALL_BYTES;
}

async function measureTogether(
  paths: readonly string[],
  options: SurveyOptions,
  crew: Crew,
): Promise<FileOutcome[]> {
  const { onStage, read, ...measurement } = options;
  onStage?.('together', null);
  const readable = { ...read };
  delete readable.onProgress;
  delete readable.signal;
  const round = { paths, options: { ...measurement, read: readable } };
  const outcomes = (await crew.run(TASK, 'measureFiles', round, paths.length)).flat();
  outcomes.sort((a, b) => a.job - b.job);
  return outcomes.map((outcome) => {
    const file = paths[outcome.job];
    return 'record' in outcome
      ? { file, record: outcome.record, error: null }
      : { file, record: null, error: received(outcome.error) };
  });
}

async function measureAlone(
  file: string,
  options: SurveyOptions,
  crew: Crew,
): Promise<FileOutcome> {
  try {
    return { file, record: await measureFile(file, options, crew), error: null };
  } catch (error) {
    const expected =
      error instanceof InputError ||
      error instanceof UnanswerableError ||
      error instanceof UsageError;
    if (!expected) throw error;
    return { file, record: null, error };
  }
}
