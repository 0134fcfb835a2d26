/** `settlemark measure`: one record a snapshot. */
import {
  extrasNamed,
  measureFiles,
  recordsToArrow,
  recordsToCsv,
  type ExitCode,
  type MeasureRecord,
} from '../index.ts';
import { turn, withCrew } from './crew.ts';
import { eachPath } from './many.ts';
import {
  FORMATS,
  formatOf,
  refuseOverwriting,
  refuseTerminal,
  withOutput,
  type Format,
} from './output.ts';
import { startProgress } from './progress.ts';
import { remarksText } from './remarks.ts';
import { snapshotsOf, surveyOf, type SnapshotOptions } from './snapshots.ts';
import { paintFor, NO_PAINT } from './style.ts';
import { write, type Streams } from './streams.ts';

export interface MeasureCommandOptions extends SnapshotOptions {
  readonly threads?: number;
  readonly format?: Format;
  readonly out?: string;
  readonly quiet?: boolean;
}

/** Measures each snapshot; one that fails is told on standard error and the rest are still measured. */
export async function measure(
  args: readonly string[],
  options: MeasureCommandOptions,
  streams: Streams,
): Promise<ExitCode> {
  const { threads, format: askedFormat, out, quiet = false, ...rest } = options;
  const format = formatOf(askedFormat, out, FORMATS);
  refuseTerminal(format, out, streams);
  extrasNamed(options.with ?? []); // A name that is not known is told before anything is read.
  const asked = await surveyOf(rest, streams);
  const { snapshots, code: before } = await snapshotsOf(args, asked, streams);
  const files = snapshots.map(({ file }) => file);
  await refuseOverwriting(
    out,
    snapshots.flatMap(({ file, parts }) => parts ?? [file]),
  );
  const isInParts = snapshots.length === 1 && snapshots[0].parts !== null;
  const isSeveral = (args.length > 1 && !isInParts) || files.length > 1;
  const remarksApart = !quiet && (format !== 'table' || out !== undefined);

  const asksFor = snapshots.find((snapshot) => snapshot.threads !== null)?.threads ?? undefined;
  return withCrew(threads ?? asksFor, streams.interrupt, async (crew) => {
    const progress = startProgress(streams.stderr, quiet, crew);
    return withOutput(out, streams, async (sink) => {
      const records: MeasureRecord[] = [];
      let begun = 0;
      const form = await formatter(format, isSeveral, out === undefined ? streams : null);
      const name = () =>
        files.length > 1 ? `${begun + 1} of ${files.length}, ${files[begun]}` : files[0];
      const outcomes = await measureFiles(
        snapshots,
        { ...asked.survey, onStage: (stage, fraction) => progress.stage(name(), stage, fraction) },
        crew,
      );
      const code = await eachPath(
        files,
        streams,
        async (file) => {
          await turn(streams.interrupt);
          const next = await outcomes.next().finally(() => progress.clear());
          begun++;
          if (next.done === true) throw new Error(`nothing came of ${file}`);
          const { record, error } = next.value;
          if (error !== null) throw error;
          if (form === null) records.push(record);
          else await sink(form(record));
          if (remarksApart && record.remarks.length > 0) {
            const text = remarksText(record.remarks, paintFor(streams.stderr, streams.env));
            await write(streams.stderr, `${file}\n${text}\n`);
          }
        },
        before,
      );
      if (form === null) await sink(await together(records, format, isSeveral, out));
      return code;
    }).finally(() => progress.close());
  });
}

/** All records in a format that cannot be begun before the last of them is known. */
async function together(
  records: readonly MeasureRecord[],
  format: Format,
  isSeveral: boolean,
  out: string | undefined,
): Promise<string | Uint8Array> {
  if (format === 'csv') return recordsToCsv(records);
  if (format === 'json') return `${JSON.stringify(isSeveral ? records : records[0], null, 2)}\n`;
  const isStream = out === undefined || out.toLowerCase().endsWith('.arrows');
  return recordsToArrow(records, isStream ? 'stream' : 'file');
}

/** Text of one record in a format that is written record by record; null for other formats. */
async function formatter(
  format: Format,
  isSeveral: boolean,
  screen: Streams | null,
): Promise<((record: MeasureRecord) => string) | null> {
  if (format !== 'table' && format !== 'ndjson') return null;
  if (format === 'ndjson') return (record) => `${JSON.stringify(record)}\n`;
  const { recordTable } = await import('./recordTable.ts');
  const paint = screen === null ? NO_PAINT : paintFor(screen.stdout, screen.env);
  let isFirst = true;
  return (record) => {
    const between = isSeveral && !isFirst ? `\n${paint.faint('─'.repeat(80))}\n\n` : '';
    isFirst = false;
    return between + recordTable(record, paint);
  };
}
