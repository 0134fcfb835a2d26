/** The records of a series: snapshots are measured, records made earlier are read. */
import {
  InputError,
  isRecords,
  measureFiles,
  readRecords,
  UnanswerableError,
  type MeasureRecord,
  type PreparedSnapshot,
  type Remark,
  type SurveyOptions,
} from '../index.ts';
import { turn, withCrew } from './crew.ts';
import { reportFailure } from './failure.ts';
import { ledgerFor, type LedgerOptions } from './ledger.ts';
import { startProgress } from './progress.ts';
import type { Streams } from './streams.ts';

/** Which of the arguments are files of records, and which snapshots or folders of them. */
export async function sortInputs(
  args: readonly string[],
): Promise<{ readonly recordFiles: readonly string[]; readonly paths: readonly string[] }> {
  const recordFiles: string[] = [];
  const paths: string[] = [];
  for (const arg of args) ((await isRecords(arg)) ? recordFiles : paths).push(arg);
  return { recordFiles, paths };
}

/** What is to be measured and read. */
export interface SeriesWork {
  readonly recordFiles: readonly string[];
  readonly snapshots: readonly PreparedSnapshot[];
  readonly survey: SurveyOptions;
  readonly threads: number | undefined;
  readonly quiet: boolean;
  readonly ledger: LedgerOptions['ledger'];
}

/** A snapshot that could not be measured; the error has been told. */
export interface Skipped {
  readonly file: string;
  readonly error: InputError | UnanswerableError;
}

export interface MeasuredSeries {
  readonly records: readonly MeasureRecord[];
  readonly skipped: readonly Skipped[];
  /** About the ledger and the times of snapshots. */
  readonly remarks: readonly Remark[];
}

/** Reads the records and measures the snapshots; those that cannot be are told on standard error. */
export async function measureSeries(work: SeriesWork, streams: Streams): Promise<MeasuredSeries> {
  const { recordFiles, snapshots, survey, threads, quiet, ledger: asked } = work;
  const records: MeasureRecord[] = [];
  for (const file of recordFiles) records.push(...(await readRecords(file)));
  if (snapshots.length === 0) return { records, skipped: [], remarks: [] };
  const asksFor = snapshots.find((snapshot) => snapshot.threads !== null)?.threads ?? undefined;
  const skipped: Skipped[] = [];
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
          skipped.push({ file, error });
        } else throw error;
      }
    } finally {
      await ledger?.close();
      progress.close();
    }
  });
  const ofLedger = [...remarks, ...(ledger?.remarks ?? [])];
  return { records, skipped, remarks: [...ofLedger, ...remarksOfTimes(snapshots)] };
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
