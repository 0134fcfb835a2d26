/** Many snapshots: small ones spread whole over the workers, large ones worked on by all together. */
import type { MeasureRecord } from '../dynamics/record.ts';
import { InputError, UnanswerableError, UsageError, type SettlemarkError } from '../errors.ts';
import type { Crew, TaskModule } from '../parallel/crew.ts';
import { received } from '../parallel/protocol.ts';
import { snapshotBytes } from '../snapshot/parts.ts';
import { measurePrepared, type SurveyOptions } from './measure.ts';
import type * as MeasureTask from './measure.task.ts';
import { eachOnce, prepareEach, type PreparedSnapshot } from './prepare.ts';

const TASK: TaskModule<typeof MeasureTask> = {
  url: new URL('./measure.task.js', import.meta.url),
  load: () => import('./measure.task.ts'),
};

/** Files up to this size go whole to one worker: some 75,000 bodies. */
const SMALL_BYTES = 4 * 2 ** 20;
/** Small files a round and worker: enough to keep all busy, few enough that results come steadily. */
const FILES_A_WORKER = 16;

/** What became of one path. Errors are those that a user's input can cause; bugs are thrown. */
export type FileOutcome = (
  | { readonly file: string; readonly record: MeasureRecord; readonly error: null }
  | { readonly file: string; readonly record: null; readonly error: SettlemarkError }
) & {
  /** Whether the record came from a ledger, and nothing was measured. */
  readonly isKnown?: boolean;
};

/** A snapshot that is ready to be measured, or the error of its run file. */
type Entry = PreparedSnapshot | (FileOutcome & { readonly record: null });

/**
 * Measures snapshots and gives their outcomes in the order of the paths, as soon as that order
 * allows. The figures of a record do not depend on how the work was spread.
 * @param snapshots - files, or prepared snapshots, whose own options count: of `options` only progress
 *   and signal are used for these
 * @param filesAWorker - small files that a worker takes at once, whose outcomes come together
 */
export async function* measureMany(
  snapshots: readonly (string | PreparedSnapshot)[],
  options: SurveyOptions,
  crew: Crew,
  filesAWorker = FILES_A_WORKER,
): AsyncGenerator<FileOutcome> {
  const entries = await prepareAll(snapshots, options);
  let round = await beginRound(entries, 0, options, crew, filesAWorker);
  try {
    for (let at = 0; at < entries.length;) {
      if (round === null) {
        const entry = entries[at++];
        yield isFailed(entry) ? entry : await measureAlone(entry, options, crew);
        round = await beginRound(entries, at, options, crew, filesAWorker);
        continue;
      }
      const { files, outcomes } = round;
      at += files;
      // The next round waits at the workers, so that none of them waits for the last file of this one.
      round = await beginRound(entries, at, options, crew, filesAWorker);
      yield* await outcomes;
    }
  } finally {
    await round?.outcomes.catch(() => undefined);
  }
}

/** Prepares what is a path; all at once if that goes well, else one by one, to tell which do not. */
async function prepareAll(
  snapshots: readonly (string | PreparedSnapshot)[],
  options: SurveyOptions,
): Promise<Entry[]> {
  const paths = snapshots.filter((snapshot) => typeof snapshot === 'string');
  let prepared: Iterator<Entry>;
  try {
    prepared = (await prepareEach(paths, options)).values();
  } catch (error) {
    if (!isOfInput(error)) throw error;
    const each = paths.map(async (file): Promise<Entry> => {
      try {
        return (await prepareEach([file], options, paths))[0];
      } catch (reason) {
        if (!isOfInput(reason)) throw reason;
        return { file, record: null, error: reason };
      }
    });
    prepared = (await Promise.all(each)).values();
  }
  return eachOnce(
    snapshots.map((snapshot) =>
      typeof snapshot === 'string' ? (prepared.next().value as Entry) : snapshot,
    ),
  );
}

function isFailed(entry: Entry): entry is Exclude<Entry, PreparedSnapshot> {
  return 'error' in entry;
}

function isOfInput(error: unknown): error is SettlemarkError {
  return (
    error instanceof InputError || error instanceof UnanswerableError || error instanceof UsageError
  );
}

interface SmallRound {
  readonly files: number;
  readonly outcomes: Promise<FileOutcome[]>;
}

/** Gives small files from index `begin` on to the workers; null if there are not even two. */
async function beginRound(
  entries: readonly Entry[],
  begin: number,
  options: SurveyOptions,
  crew: Crew,
  filesAWorker: number,
): Promise<SmallRound | null> {
  const batch = await smallFiles(entries, begin, crew, filesAWorker);
  if (batch.length < 2) return null;
  const outcomes = measureTogether(batch, options, crew);
  outcomes.catch(() => undefined); // Whoever waits for them hears of it, which may be later.
  return { files: batch.length, outcomes };
}

/** The small files from index `begin` on, as many as make a round; none for a crew of one. */
async function smallFiles(
  entries: readonly Entry[],
  begin: number,
  crew: Crew,
  filesAWorker: number,
): Promise<PreparedSnapshot[]> {
  if (crew.threads === 1) return [];
  const some = entries.slice(begin, begin + crew.threads * filesAWorker);
  const bad = some.findIndex(isFailed);
  const good = (bad < 0 ? some : some.slice(0, bad)) as PreparedSnapshot[];
  const small = await Promise.all(good.map(isSmall));
  const end = small.indexOf(false);
  return end < 0 ? good : good.slice(0, end);
}

/** A path that cannot be looked at is left to the reader, which says what is wrong with it. */
async function isSmall(snapshot: PreparedSnapshot): Promise<boolean> {
  return snapshot.file !== '-' && ((await snapshotBytes(snapshot)) ?? Infinity) <= SMALL_BYTES;
}

async function measureTogether(
  snapshots: readonly PreparedSnapshot[],
  { onStage }: SurveyOptions,
  crew: Crew,
): Promise<FileOutcome[]> {
  onStage?.('together', null);
  // One object for all that have the same options, so that it is sent once.
  const sendable = new Map<PreparedSnapshot['options'], PreparedSnapshot['options']>();
  const round = {
    snapshots: snapshots.map((snapshot) => {
      const known = sendable.get(snapshot.options);
      const options = known ?? withoutFunctions(snapshot.options);
      if (known === undefined) sendable.set(snapshot.options, options);
      return { ...snapshot, options };
    }),
  };
  const outcomes = (await crew.run(TASK, 'measureFiles', round, snapshots.length)).flat();
  outcomes.sort((a, b) => a.job - b.job);
  return outcomes.map((outcome) => {
    const { file } = snapshots[outcome.job];
    return 'record' in outcome
      ? { file, record: outcome.record, error: null }
      : { file, record: null, error: received(outcome.error) };
  });
}

function withoutFunctions(options: PreparedSnapshot['options']): PreparedSnapshot['options'] {
  const read = { ...options.read };
  delete read.onProgress;
  delete read.signal;
  return { ...options, read };
}

async function measureAlone(
  snapshot: PreparedSnapshot,
  options: SurveyOptions,
  crew: Crew,
): Promise<FileOutcome> {
  const { file } = snapshot;
  try {
    return { file, record: await measurePrepared(snapshot, options, crew), error: null };
  } catch (error) {
    if (!isOfInput(error)) throw error;
    return { file, record: null, error };
  }
}
