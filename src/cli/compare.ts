/** `settlemark compare`: is this run statistically the same as reference runs? */
import { open, readFile } from 'node:fs/promises';
import {
  compareRuns,
  comparedRun,
  EXIT,
  exitCodeOf,
  findSeries,
  isRecords,
  looksLikeReference,
  parseReference,
  readRecords,
  referenceText,
  UsageError,
  type ComparedRun,
  type ExitCode,
  type MeasureRecord,
} from '../index.ts';
import { AlreadyReported } from './failure.ts';
import type { LedgerOptions } from './ledger.ts';
import type { MeasureCommandOptions } from './measure.ts';
import { formatOf, refuseOverwriting, withOutput } from './output.ts';
import { measureSeries } from './series.ts';
import { surveyOf } from './snapshots.ts';
import { write, type Streams } from './streams.ts';
import { NO_PAINT, paintFor } from './style.ts';

export interface CompareCommandOptions
  extends Omit<MeasureCommandOptions, 'format' | 'with'>, LedgerOptions {
  readonly format?: 'table' | 'json';
  /** Reference runs. */
  readonly with?: readonly string[];
  readonly falseAlarm?: number;
  readonly windows?: number;
  readonly store?: string;
}

/** Compares runs with reference runs, or stores runs as a reference if there are none to compare with. */
export async function compare(
  args: readonly string[],
  options: CompareCommandOptions,
  streams: Streams,
): Promise<ExitCode> {
  const { with: others = [], falseAlarm, windows, store, format: asked, out, ...rest } = options;
  if (others.length === 0 && store === undefined) {
    throw new UsageError(
      'usage.missingOption',
      'compare needs reference runs or a file to store one in',
      'say --with RUN, or --store FILE to make these runs a reference',
    );
  }
  const format = formatOf(asked, out, ['table', 'json']);
  for (const file of [out, store]) await refuseOverwriting(file, [...args, ...others]);
  const read = (paths: readonly string[]) => readRuns(paths, rest, streams);
  const candidates = await read(args);
  if (others.length === 0) {
    await withOutput(store, streams, (sink) => sink(referenceText(candidates)));
    return EXIT.done;
  }
  const references = await read(others);
  const result = compareRuns(candidates, references, {
    ...(falseAlarm !== undefined && { falseAlarm }),
    ...(windows !== undefined && { windows }),
  });
  if (store !== undefined) {
    await withOutput(store, streams, (sink) => sink(referenceText(references)));
  }
  await withOutput(out, streams, async (sink) => {
    if (format === 'json') return sink(`${JSON.stringify(result, null, 2)}\n`);
    const { comparePage } = await import('./comparePage.ts');
    const paint = out === undefined ? paintFor(streams.stdout, streams.env) : NO_PAINT;
    return sink(comparePage(result, paint));
  });
  if (result.verdict === 'same') return EXIT.done;
  const named = result.quantities.flatMap((one) => (one.different ? [one.quantity] : []));
  const what = named.length > 0 ? named.slice(0, 3).join(', ') : 'the runs as a whole';
  await write(streams.stderr, `settlemark: the runs differ: ${what}\n`);
  return EXIT.gateFailed;
}

type RunOptions = Omit<
  CompareCommandOptions,
  'with' | 'falseAlarm' | 'windows' | 'store' | 'format' | 'out'
>;

/** Each path is one run; a stored reference may hold several. */
async function readRuns(
  paths: readonly string[],
  { threads, quiet = false, ...rest }: RunOptions,
  streams: Streams,
): Promise<ComparedRun[]> {
  const runs: ComparedRun[] = [];
  for (const path of paths) {
    if (await isReference(path)) runs.push(...parseReference(await readFile(path, 'utf8'), path));
    else if (await isRecords(path)) runs.push(comparedRun(await readRecords(path), path));
    else runs.push(comparedRun(await measureRun(path, threads, quiet, rest, streams), path));
  }
  return runs;
}

/** By its first bytes, whatever its name. What cannot be opened is none; its reader says why. */
async function isReference(path: string): Promise<boolean> {
  if (path === '-') return false;
  try {
    const handle = await open(path, 'r');
    try {
      const head = Buffer.alloc(64);
      const { bytesRead } = await handle.read(head, 0, head.length, 0);
      return looksLikeReference(head.toString('latin1', 0, bytesRead)) || /\.json$/i.test(path);
    } finally {
      await handle.close();
    }
  } catch {
    return false;
  }
}

async function measureRun(
  path: string,
  threads: number | undefined,
  quiet: boolean,
  rest: Omit<RunOptions, 'threads' | 'quiet'>,
  streams: Streams,
): Promise<readonly MeasureRecord[]> {
  const { survey, range } = await surveyOf(rest, streams);
  const snapshots = await findSeries([path], { ...survey, ...range });
  const work = { recordFiles: [], snapshots, survey, threads, quiet, ledger: rest.ledger };
  const { records, skipped } = await measureSeries(work, streams);
  // A run of one snapshot that cannot be measured ends with the code of what has just been told of it.
  if (snapshots.length === 1 && skipped.length === 1)
    throw new AlreadyReported(exitCodeOf(skipped[0].error));
  return records;
}
