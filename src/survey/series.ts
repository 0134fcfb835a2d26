/** A series of snapshots: in the order of time, each time once, cut to what is wanted of it. */
import { InputError, UnanswerableError, UsageError } from '../errors.ts';
import { readStatedTime } from '../snapshot/read.ts';
import { expandPaths } from '../snapshot/series.ts';
import type { SurveyOptions } from './measure.ts';
import { prepareSnapshots, type PreparedSnapshot } from './prepare.ts';
import { checkRange, type RangeKey, type SeriesRange } from './range.ts';

export interface SeriesOptions extends SurveyOptions, SeriesRange {}

/** Files whose headers are read at a time. */
const TOGETHER = 32;
/** Times are the same if they differ by less than this part of the time that the series spans. */
const SAME = 1e-9;

/** A snapshot with its time as far as it is known; `unreadable` is told when it is measured. */
interface Timed {
  readonly snapshot: PreparedSnapshot;
  readonly time: number | null;
  readonly isReadable: boolean;
  /** Its place in the natural order of names. */
  readonly place: number;
}

/**
 * The snapshots that files and folders mean, as one series: in the order of time if all of them have
 * one, else in the natural order of names. Of several at the same time the last by name is kept, as
 * after a restart, unless all are at one time, which makes no series. Then come `from`, `to`, `every`.
 * Only headers are read.
 * @param paths - files, folders; all one run
 * @throws UsageError `usage.range` and those of `prepareSnapshots`; UnanswerableError
 * `unanswerable.emptySeries`, `unanswerable.noTime` if `from` or `to` is asked of a snapshot without time
 */
export async function findSeries(
  paths: readonly string[],
  options: SeriesOptions = {},
): Promise<PreparedSnapshot[]> {
  const { from, to, every, ...survey } = options;
  const asked = { from, to, every };
  checkRange(asked as SeriesRange, (key, text, remedy) => {
    throw new UsageError('usage.range', `--${key}: ${text}`, remedy);
  });
  const prepared = await prepareSnapshots(await expandPaths(paths), survey);
  const range = rangeOf(asked, prepared);
  if (prepared.length < 2 && range.from === undefined && range.to === undefined) return prepared;
  return cut(once(inOrder(await timed(prepared))), range).map(({ snapshot }) => snapshot);
}

/** The caller's range, and what it leaves open from the first run file that says it. */
function rangeOf(
  asked: { readonly [K in RangeKey]: number | undefined },
  prepared: readonly PreparedSnapshot[],
): SeriesRange {
  const keys: readonly RangeKey[] = ['from', 'to', 'every'];
  return Object.fromEntries(
    keys.flatMap((key) => {
      const of = (range: SeriesRange) => range[key];
      const value =
        asked[key] ?? prepared.map(({ range }) => of(range)).find((v) => v !== undefined);
      return value === undefined ? [] : [[key, value]];
    }),
  );
}

/** Reads the times that nobody stated from the snapshots themselves. */
async function timed(prepared: readonly PreparedSnapshot[]): Promise<Timed[]> {
  const all: Timed[] = [];
  for (let at = 0; at < prepared.length; at += TOGETHER) {
    const some = prepared.slice(at, at + TOGETHER).map(async (snapshot, k): Promise<Timed> => {
      const place = at + k;
      const { time, file, options } = snapshot;
      if (time !== null) return { snapshot, place, time: time.value, isReadable: true };
      try {
        const own = await readStatedTime(file, options.read);
        return { snapshot, place, time: own, isReadable: true };
      } catch (error) {
        if (!(error instanceof InputError || error instanceof UsageError)) throw error;
        return { snapshot, place, time: null, isReadable: false };
      }
    });
    all.push(...(await Promise.all(some)));
  }
  return all;
}

function inOrder(series: readonly Timed[]): Timed[] {
  if (series.some(({ time, isReadable }) => time === null && isReadable)) return [...series];
  // What cannot be read stays behind its neighbour by name.
  let last = -Infinity;
  const times = series.map(({ time }) => (last = time ?? last));
  return [...series].sort((a, b) => times[a.place] - times[b.place] || a.place - b.place);
}

/** Keeps of those at the same time the last. */
function once(series: readonly Timed[]): Timed[] {
  const { first, last } = spanOf(series);
  if (!(last > first)) return [...series];
  const groups: { begin: number; members: Timed[] }[] = [];
  let open: (typeof groups)[number] | undefined;
  for (const entry of series) {
    if (entry.time !== null && open && entry.time - open.begin <= SAME * (last - first)) {
      open.members.push(entry);
      continue;
    }
    const group = { begin: entry.time ?? NaN, members: [entry] };
    groups.push(group);
    if (entry.time !== null) open = group;
  }
  return groups.map(({ members }) => {
    const kept = members.reduce((a, b) => (b.place > a.place ? b : a));
    const others = members.filter((member) => member !== kept);
    return others.length === 0
      ? kept
      : withRemark(
          kept,
          others.map(({ snapshot }) => snapshot.file),
        );
  });
}

/** First and last time; Infinity and -Infinity if none is known. */
function spanOf(series: readonly Timed[]): { first: number; last: number } {
  let first = Infinity;
  let last = -Infinity;
  for (const { time } of series) {
    if (time === null) continue;
    first = Math.min(first, time);
    last = Math.max(last, time);
  }
  return { first, last };
}

function withRemark(entry: Timed, dropped: readonly string[]): Timed {
  const { snapshot, time } = entry;
  const remark = {
    code: 'time.repeated',
    text: `time ${time} stands in several files, as after a restart: ${snapshot.file} is kept, the last by name; ${dropped.join(', ')} ${dropped.length === 1 ? 'is' : 'are'} left out`,
    remedy: 'If another is meant, move the others away, or name the files that you want.',
  };
  return { ...entry, snapshot: { ...snapshot, remarks: [...snapshot.remarks, remark] } };
}

function cut(series: readonly Timed[], { from, to, every = 1 }: SeriesRange): Timed[] {
  const inRange = from === undefined && to === undefined ? series : within(series, from, to);
  return inRange.filter((_, k) => k % every === 0);
}

function within(series: readonly Timed[], from = -Infinity, to = Infinity): Timed[] {
  const timeless = series.find(({ time, isReadable }) => time === null && isReadable);
  if (timeless !== undefined) {
    throw new UnanswerableError(
      'unanswerable.noTime',
      `${timeless.snapshot.file} has no time, so nobody can say whether it lies in the range asked for`,
      'Say the times with --times FILE, --interval DT or --time-pattern, or leave out --from and --to.',
    );
  }
  const { first, last } = spanOf(series);
  // 3 × 0.1 is more than 0.3.
  const slack = SAME * Math.max(Math.abs(first), Math.abs(last));
  const wanted = series.filter(
    ({ time }) => time === null || (time >= from - slack && time <= to + slack),
  );
  if (wanted.some(({ time }) => time !== null) || first > last) return wanted;
  throw new UnanswerableError(
    'unanswerable.emptySeries',
    `no snapshot lies between ${from === -Infinity ? 'the beginning' : from} and ${to === Infinity ? 'the end' : to}: the times of the ${series.length} snapshots go from ${first} to ${last}`,
    'Correct --from and --to; times are in the unit of time of the snapshots.',
  );
}
