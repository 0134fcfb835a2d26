/** `settlemark track`: has the run settled, when, and how do we know? */
import {
  findSeries,
  UnanswerableError,
  verdictOf,
  type ExitCode,
  EXIT,
  type Remark,
  type Verdict,
} from '../index.ts';
import type { LedgerOptions } from './ledger.ts';
import type { MeasureCommandOptions } from './measure.ts';
import { formatOf, refuseOverwriting, withOutput } from './output.ts';
import { measureSeries, sortInputs, type SeriesWork } from './series.ts';
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
  const { recordFiles, paths } = await sortInputs(args);
  const { survey, range } = await surveyOf(rest, streams);
  const snapshots = paths.length > 0 ? await findSeries(paths, { ...survey, ...range }) : [];
  await refuseOverwriting(out, [
    ...args,
    ...snapshots.flatMap(({ file, parts }) => parts ?? [file]),
  ]);
  const work = { recordFiles, snapshots, survey, threads, quiet, ledger: rest.ledger };
  // A file that cannot be written is told of before anything is measured.
  await withOutput(out, streams, async (sink) => {
    const verdict = await judge(work, streams);
    if (format === 'json') return sink(`${JSON.stringify(verdict, null, 2)}\n`);
    const { verdictPage } = await import('./verdictPage.ts');
    return sink(
      verdictPage(verdict, out === undefined ? paintFor(streams.stdout, streams.env) : NO_PAINT),
    );
  });
  return EXIT.done;
}

async function judge(work: SeriesWork, streams: Streams): Promise<Verdict> {
  const { snapshots } = work;
  const series = await measureSeries(work, streams);
  const { records } = series;
  const skipped = series.skipped.map(({ file }) => file);
  if (records.length === 0) {
    throw new UnanswerableError(
      'unanswerable.series',
      'no snapshot of the series could be measured',
      'see what was said of each of them above',
    );
  }
  const found = verdictOf(records);
  const remarks: Remark[] = [...found.remarks, ...series.remarks];
  if (skipped.length > 0) {
    remarks.unshift({
      code: 'snapshotsSkipped',
      text: `${skipped.length} of ${snapshots.length} snapshots could not be measured and are left out: ${skipped.slice(0, 3).join(', ')}${skipped.length > 3 ? ', …' : ''}`,
      remedy: 'see what was said of each of them above',
    });
  }
  return { ...found, remarks };
}
