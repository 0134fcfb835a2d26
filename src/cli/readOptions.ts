/** Options about what is read, from the command line to the library. */
import {
  parseColumns,
  type MeasureOptions,
  type ReadOptions,
  type SeriesRange,
  type SurveyOptions,
  type TimeSettings,
} from '../index.ts';

/** As commander gives them; what was not given is undefined. */
export interface ReadingOptions {
  readonly layout?: string | undefined;
  readonly columns?: string | undefined;
  readonly only?: string | undefined;
  readonly group?: number | bigint | undefined;
  readonly within?: number | undefined;
  readonly about?: readonly [number, number, number] | undefined;
}

/** @throws UsageError for `--columns` that cannot be read */
export async function readOptionsOf(
  { columns, ...given }: ReadingOptions,
  signal: AbortSignal,
): Promise<ReadOptions> {
  const stated = Object.fromEntries(
    Object.entries(given).filter(([, value]) => value !== undefined),
  );
  return {
    ...stated,
    ...(columns !== undefined && { columns: await parseColumns(columns) }),
    signal,
  };
}

/** What commands have besides the options that decide figures. */
export interface CommandOptions
  extends ReadingOptions, TimeSettings, SeriesRange, Omit<MeasureOptions, 'fromRunFile' | 'units'> {
  readonly units?: string;
  readonly external?: string;
  readonly runFile?: string | boolean;
}

/** Options that say how a command works and what it writes: none of them changes a figure. */
const OF_THE_COMMAND = [
  'threads',
  'format',
  'out',
  'quiet',
  'ledger',
  'until',
  'onVerdict',
  'poll',
  'still',
  'rules',
  'list',
  'strict',
  'junit',
  'markdown',
] as const;
/** Options that say which snapshots are meant. */
const OF_THE_SERIES = ['from', 'to', 'every'] as const;

/**
 * The options of a survey, without those of the command itself.
 * @throws UsageError as {@link readOptionsOf}
 */
export async function surveyOptionsOf(
  options: CommandOptions,
  signal: AbortSignal,
): Promise<SurveyOptions> {
  const { layout, columns, only, group, within, about, runFile, ...rest } = options;
  for (const key of [...OF_THE_COMMAND, ...OF_THE_SERIES])
    delete (rest as Record<string, unknown>)[key];
  return {
    ...rest,
    ...(typeof runFile === 'string' || runFile === false ? { runFile } : {}),
    read: await readOptionsOf({ layout, columns, only, group, within, about }, signal),
  };
}
