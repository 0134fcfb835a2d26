/** From arguments and options to the snapshots of a command, each with all that is settled about it. */
import {
  findSeries,
  findSnapshots,
  prepareSnapshots,
  type ExitCode,
  type PreparedSnapshot,
  type SeriesRange,
  type SurveyOptions,
} from '../index.ts';
import { eachPath } from './many.ts';
import { surveyOptionsOf, type CommandOptions } from './readOptions.ts';
import type { Streams } from './streams.ts';

/** Options of all commands that measure. */
export type SnapshotOptions = CommandOptions;

/** Options of the library for those of a command. @throws UsageError of `parseColumns` */
export async function surveyOf(
  options: SnapshotOptions,
  streams: Streams,
): Promise<{ readonly survey: SurveyOptions; readonly range: SeriesRange }> {
  const { from, to, every } = options;
  return {
    survey: await surveyOptionsOf(options, streams.interrupt),
    range: {
      ...(from !== undefined && { from }),
      ...(to !== undefined && { to }),
      ...(every !== undefined && { every }),
    },
  };
}

export interface FoundSnapshots {
  readonly snapshots: readonly PreparedSnapshot[];
  /** Exit code of what went wrong on the way, if anything. */
  readonly code: ExitCode;
}

/**
 * The snapshots that arguments mean. A folder is a series of its own. Files that are named are taken
 * as they are named, unless a range is asked for: then all of them are one series.
 * @throws UsageError and InputError of run files and times; AlreadyReported if nothing is left
 */
export async function snapshotsOf(
  args: readonly string[],
  { survey, range }: Awaited<ReturnType<typeof surveyOf>>,
  streams: Streams,
): Promise<FoundSnapshots> {
  const isSeries = Object.keys(range).length > 0;
  const series = { ...survey, ...range };
  const found = new Map<string, readonly PreparedSnapshot[] | 'named'>();
  const code = await eachPath(args, streams, async (arg) => {
    const [first] = await findSnapshots([arg]);
    found.set(arg, first === arg ? 'named' : await findSeries([arg], series));
  });
  const named = [...found].flatMap(([arg, value]) => (value === 'named' ? [arg] : []));
  const ofNamed = isSeries
    ? await findSeries(named, series)
    : await prepareSnapshots(named, survey);
  // A series of named files stands where the first of them was named.
  const rest = [...ofNamed];
  const next = () => rest.splice(0, isSeries ? rest.length : 1);
  const snapshots = [...found.values()].flatMap((value) => (value === 'named' ? next() : value));
  return { snapshots, code };
}
