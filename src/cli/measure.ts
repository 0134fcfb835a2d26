/** `settlemark measure`: one record a snapshot. */
import {
  findSnapshots,
  measureFiles,
  parseColumns,
  prepareSnapshots,
  type CentreMethod,
  type ExitCode,
  type MeasureRecord,
  type SofteningKernel,
  type SurveyOptions,
} from '../index.ts';
import { turn, withCrew } from './crew.ts';
import { eachPath } from './many.ts';
import { formatOf, refuseOverwriting, withOutput, type Format } from './output.ts';
import { startProgress } from './progress.ts';
import { remarksText } from './remarks.ts';
import { paintFor, NO_PAINT } from './style.ts';
import { write, type Streams } from './streams.ts';

export interface MeasureCommandOptions {
  readonly layout?: string;
  readonly columns?: string;
  /** True is commander's word for an option that was not given. */
  readonly runFile?: string | boolean;
  readonly units?: string;
  readonly gravity?: number;
  readonly softening?: number;
  readonly softeningKernel?: SofteningKernel;
  readonly error?: number;
  readonly exact?: boolean;
  readonly fractions?: readonly number[];
  readonly centre?: CentreMethod;
  readonly coulombFactor?: number;
  readonly coincident?: 'leave-out' | 'refuse';
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
  const { layout, columns, runFile, threads, format: asked, out, quiet = false, ...rest } = options;
  const survey: SurveyOptions = {
    ...rest,
    ...(runFile !== undefined && runFile !== true && { runFile }),
    read: {
      ...(layout !== undefined && { layout }),
      ...(columns !== undefined && { columns: await parseColumns(columns) }),
      signal: streams.interrupt,
    },
  };
  const files: string[] = [];
  const before = await eachPath(args, streams, async (arg) => {
    files.push(...(await findSnapshots([arg])));
  });
  await refuseOverwriting(out, files);
  const snapshots = await prepareSnapshots(files, survey);
  const format = formatOf(asked, out);
  const isSeveral = args.length > 1 || files.length > 1;
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
        { ...survey, onStage: (stage, fraction) => progress.stage(name(), stage, fraction) },
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
          if (format === 'json') records.push(record);
          else await sink(form(record));
          if (remarksApart && record.remarks.length > 0) {
            const text = remarksText(record.remarks, paintFor(streams.stderr, streams.env));
            await write(streams.stderr, `${file}\n${text}\n`);
          }
        },
        before,
      );
      if (format === 'json') {
        await sink(`${JSON.stringify(isSeveral ? records : records[0], null, 2)}\n`);
      }
      return code;
    }).finally(() => progress.close());
  });
}

/** Text of one record in a format that is written record by record. */
async function formatter(
  format: Format,
  isSeveral: boolean,
  screen: Streams | null,
): Promise<(record: MeasureRecord) => string> {
  if (format !== 'table') return (record) => `${JSON.stringify(record)}\n`;
  const { recordTable } = await import('./recordTable.ts');
  const paint = screen === null ? NO_PAINT : paintFor(screen.stdout, screen.env);
  let isFirst = true;
  return (record) => {
    const between = isSeveral && !isFirst ? `\n${paint.faint('─'.repeat(80))}\n\n` : '';
    isFirst = false;
    return between + recordTable(record, paint);
  };
}
