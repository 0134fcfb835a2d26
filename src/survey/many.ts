/** Many snapshots: small ones spread whole over the workers, large ones worked on by all together. */
import { stat } from 'node:fs/promises';
import type { MeasureRecord } from '../dynamics/record.ts';
import { InputError, UnanswerableError, UsageError, type SettlemarkError } from '../errors.ts';
import type { Crew, TaskModule } from '../parallel/crew.ts';
import { measureFile, type SurveyOptions } from './measure.ts';
import { received } from './measure.task.ts';
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
  const most = crew.threads * FILES_A_WORKER;
  for (let at = 0; at < paths.length;) {
    const batch: string[] = [];
    while (crew.threads > 1 && batch.length < most && at + batch.length < paths.length) {
      const path = paths[at + batch.length];
      if (!(await isSmall(path))) break;
      batch.push(path);
    }
    if (batch.length > 1) yield* measureTogether(batch, options, crew);
    else yield await measureAlone(paths[at], options, crew);
    at += Math.max(1, batch.length);
  }
}

/** A path that cannot be looked at is left to the reader, which says what is wrong with it. */
async function isSmall(path: string): Promise<boolean> {
  if (path === '-') return false;
  const found = await stat(path).catch(() => null);
  return found !== null && found.isFile() && found.size <= SMALL_BYTES;
}

async function* measureTogether(
  paths: readonly string[],
  options: SurveyOptions,
  crew: Crew,
): AsyncGenerator<FileOutcome> {
  const { onStage, read, ...measurement } = options;
  onStage?.('together', null);
  const readable = { ...read };
  delete readable.onProgress;
  delete readable.signal;
  const round = { paths, options: { ...measurement, read: readable } };
  const outcomes = (await crew.run(TASK, 'measureFiles', round, paths.length)).flat();
  outcomes.sort((a, b) => a.job - b.job);
  for (const outcome of outcomes) {
    const file = paths[outcome.job];
    if ('record' in outcome) yield { file, record: outcome.record, error: null };
    else yield { file, record: null, error: received(outcome.error) };
  }
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
