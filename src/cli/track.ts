/** `settlemark track`: has the run settled, when, and how do we know? */
import {
  findSeries,
  InputError,
  isRecords,
  measureFiles,
  readRecords,
  UnanswerableError,
  verdictOf,
  type ExitCode,
  EXIT,
  type MeasureRecord,
  type PreparedSnapshot,
  type Remark,
  type SurveyOptions,
  type Verdict,
} from '../index.ts';
import { turn, withCrew } from './crew.ts';
import { reportFailure } from './failure.ts';
import { ledgerFor, type LedgerOptions } from './ledger.ts';
import type { MeasureCommandOptions } from './measure.ts';
import { formatOf, refuseOverwriting, withOutput } from './output.ts';
import { startProgress } from './progress.ts';
import { surveyOf } from './snapshots.ts';
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
  const { threads, format: askedFormat, out, quiet = false, ...rest } = options;
  const format = formatOf(askedFormat, out, ['table', 'json']);
  const records: MeasureRecord[] = [];
  const paths: string[] = [];
  for (const arg of args) {
    if (await isRecords(arg)) records.push(...(await readRecords(arg)));
    else paths.push(arg);
  }
  const { survey, range } = await surveyOf(rest, streams);
  const snapshots = paths.length > 0 ? await findSeries(paths, { ...survey, ...range }) : [];
  await refuseOverwriting(out, [
    ...args,
    ...snapshots.flatMap(({ file, parts }) => parts ?? [file]),
  ]);
  const work = { snapshots, survey, threads, quiet, ledger: rest.ledger };
  // A file that cannot be written is told of before anything is measured.
  await withOutput(out, streams, async (sink) => {
    const verdict = await judge(work, records, streams);
    if (format === 'json') return sink(`${JSON.stringify(verdict, null, 2)}\n`);
    const { verdictPage } = await import('./verdictPage.ts');
    return sink(
      verdictPage(verdict, out === undefined ? paintFor(streams.stdout, streams.env) : NO_PAINT),
    );
  });
  return EXIT.done;
}

interface Work {
  readonly snapshots: readonly PreparedSnapshot[];
  readonly survey: SurveyOptions;
  readonly threads: number | undefined;
  readonly quiet: boolean;
  readonly ledger: LedgerOptions['ledger'];
}

async function judge(work: Work, records: MeasureRecord[], streams: Streams): Promise<Verdict> {
  const { snapshots } = work;
  const { skipped, remarks: ofLedger } =
    snapshots.length > 0 ? await measureAll(work, records, streams) : { skipped: [], remarks: [] };
  if (records.length === 0) {
    throw new UnanswerableError(
      'unanswerable.series',
      'no snapshot of the series could be measured',
      'see what was said of each of them above',
    );
  }
  const found = verdictOf(records);
  const remarks: Remark[] = [...found.remarks, ...ofLedger, ...remarksOfTimes(snapshots)];
  if (skipped.length > 0) {
    remarks.unshift({
      code: 'snapshotsSkipped',
      text: `${skipped.length} of ${snapshots.length} snapshots could not be measured and are left out: ${skipped.slice(0, 3).join(', ')}${skipped.length > 3 ? ', …' : ''}`,
      remedy: 'see what was said of each of them above',
    });
  }
  return { ...found, remarks };
}

const OF_TIMES = ['time.repeated', 'time.missing', 'time.noFile'];

/** What was found about times before anything was read: of each kind the first, and how many more. */
function remarksOfTimes(snapshots: readonly PreparedSnapshot[]): Remark[] {
  const all = snapshots.flatMap(({ remarks }) => remarks);
  return OF_TIMES.flatMap((wanted) => {
    const [first, ...others] = all.filter(({ code }) => code === wanted);
    if (first === undefined) return [];
    const text = others.length === 0 ? first.text : `${first.text} (and ${others.length} more)`;
    return [{ ...first, text }];
  });
}

/** Measures all snapshots; those that cannot be are told on standard error and returned. */
async function measureAll(
  { snapshots, survey, threads, quiet, ledger: asked }: Work,
  records: MeasureRecord[],
  streams: Streams,
): Promise<{ readonly skipped: readonly string[]; readonly remarks: readonly Remark[] }> {
  const asksFor = snapshots.find((snapshot) => snapshot.threads !== null)?.threads ?? undefined;
  const skipped: string[] = [];
  const { ledger, remarks } = await ledgerFor(
    snapshots.map(({ file }) => file),
    asked === undefined ? {} : { ledger: asked },
  );
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
