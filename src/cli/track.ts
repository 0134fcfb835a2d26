/** `settlemark track`: has the run settled, when, and how do we know? */
import {
  findSnapshots,
  InputError,
  isRecords,
  measureFiles,
  prepareSnapshots,
  readRecords,
  UnanswerableError,
  verdictOf,
  type ExitCode,
  EXIT,
  type MeasureRecord,
  type Remark,
  type Verdict,
} from '../index.ts';
import { turn, withCrew } from './crew.ts';
import { reportFailure } from './failure.ts';
import { ledgerFor, type LedgerOptions } from './ledger.ts';
import type { MeasureCommandOptions } from './measure.ts';
import { formatOf, refuseOverwriting, withOutput } from './output.ts';
import { startProgress } from './progress.ts';
import { surveyOptionsOf } from './readOptions.ts';
import { NO_PAINT, paintFor } from './style.ts';
import type { Streams } from './streams.ts';

export interface TrackOptions extends Omit<MeasureCommandOptions, 'format'>, LedgerOptions {
  readonly format?: 'table' | 'json';
}

/** Measures the series or takes records of it, and says what has become of the run. */
export async function track(
  args: readonly string[],
  options: TrackOptions,
  streams: Streams,
): Promise<ExitCode> {
  const { out } = options;
  const format = formatOf(options.format, out, ['table', 'json']);
  const records: MeasureRecord[] = [];
  const snapshots: string[] = [];
  for (const arg of args) {
    if (await isRecords(arg)) records.push(...(await readRecords(arg)));
    else snapshots.push(...(await findSnapshots([arg])));
  }
  await refuseOverwriting(out, [...args, ...snapshots]);
  // A file that cannot be written is told of before anything is measured.
  await withOutput(out, streams, async (sink) => {
    const verdict = await judge(snapshots, options, records, streams);
    if (format === 'json') return sink(`${JSON.stringify(verdict, null, 2)}\n`);
    const { verdictPage } = await import('./verdictPage.ts');
    return sink(
      verdictPage(verdict, out === undefined ? paintFor(streams.stdout, streams.env) : NO_PAINT),
    );
  });
  return EXIT.done;
}

async function judge(
  snapshots: readonly string[],
  options: TrackOptions,
  records: MeasureRecord[],
  streams: Streams,
): Promise<Verdict> {
  const { skipped, remarks: ofLedger } =
    snapshots.length > 0
      ? await measureAll(snapshots, options, records, streams)
      : { skipped: [], remarks: [] };
  if (records.length === 0) {
    throw new UnanswerableError(
      'unanswerable.series',
      'no snapshot of the series could be measured',
      'see what was said of each of them above',
    );
  }
  const found = verdictOf(records);
  const remarks: Remark[] = [...found.remarks, ...ofLedger];
  if (skipped.length > 0) {
    remarks.unshift({
      code: 'snapshotsSkipped',
      text: `${skipped.length} of ${snapshots.length} snapshots could not be measured and are left out: ${skipped.slice(0, 3).join(', ')}${skipped.length > 3 ? ', …' : ''}`,
      remedy: 'see what was said of each of them above',
    });
  }
  return { ...found, remarks };
}

/** Measures all snapshots; those that cannot be are told on standard error and returned. */
async function measureAll(
  files: readonly string[],
  options: TrackOptions,
  records: MeasureRecord[],
  streams: Streams,
): Promise<{ readonly skipped: readonly string[]; readonly remarks: readonly Remark[] }> {
  const { threads, quiet = false } = options;
  const survey = await surveyOptionsOf(options, streams.interrupt);
  const snapshots = await prepareSnapshots(files, survey);
  const asksFor = snapshots.find((snapshot) => snapshot.threads !== null)?.threads ?? undefined;
  const skipped: string[] = [];
  const { ledger, remarks } = await ledgerFor(files, options);
  await withCrew(threads ?? asksFor, streams.interrupt, async (crew) => {
    const progress = startProgress(streams.stderr, quiet, crew);
    try {
      let done = 0;
      for await (const { file, record, error } of await measureFiles(
        snapshots,
        survey,
        crew,
        ledger ?? undefined,
      )) {
        await turn(streams.interrupt);
        progress.say(`${file}, ${done + 1} of ${snapshots.length}`, ++done / snapshots.length);
        if (error === null) records.push(record);
        else if (error instanceof InputError || error instanceof UnanswerableError) {
          progress.clear();
          await reportFailure(error, streams);
          skipped.push(file);
        } else throw error;
      }
    } finally {
      await ledger?.close();
      progress.close();
    }
  });
  return { skipped, remarks: [...remarks, ...(ledger?.remarks ?? [])] };
}
