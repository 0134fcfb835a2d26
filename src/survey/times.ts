/** Where the time of a snapshot comes from, if not from the snapshot itself. */
import { readdir } from 'node:fs/promises';
import { basename, dirname, join, resolve } from 'node:path';
import type { SettingOrigin, TimeSource } from '../dynamics/record.ts';
import { InputError, UsageError } from '../errors.ts';
import { fileBytes } from '../snapshot/files.ts';
import type { Remark } from '../snapshot/particles.ts';
import { joinFiles, type JoinedFile } from '../snapshot/parts.ts';
import { inNaturalOrder, isSnapshotName } from '../snapshot/series.ts';
import { parseTimePattern, type TimePattern } from '../snapshot/timePattern.ts';
import { readTimes, TIMES_NAME, type TimesTable } from '../snapshot/timesTable.ts';

/** How times are stated; without any of these, `times.csv` beside a snapshot counts, then the snapshot. */
export interface TimeSettings {
  /** Table of times (CSV with the columns `file` and `time`); false: none, not even one found. */
  readonly times?: string | false;
  /** Snapshot k of the series, in the natural order of names, has the time start + k · interval. */
  readonly interval?: number;
  /** Time of the first snapshot; 0 if not given. */
  readonly start?: number;
  /** Name of a file with `{time}` in it, or with `{step}`, which `interval` turns into a time. */
  readonly timePattern?: string;
}

export const TIME_KEYS = ['times', 'interval', 'start', 'timePattern'] as const;
export type TimeKey = (typeof TIME_KEYS)[number];

/** A time that was stated for a snapshot, and who stated it how. */
export interface StatedTime {
  readonly value: number;
  readonly source: TimeSource;
  readonly from: SettingOrigin;
}

/** What is said about one snapshot: its time, or null if nothing but the snapshot says it. */
export interface FoundTime {
  readonly time: StatedTime | null;
  readonly remarks: readonly Remark[];
}

/** Throws the error for settings of time that contradict each other, at one of them. */
export type RefuseTimes = (key: TimeKey, text: string, remedy: string) => never;

const SAY_INTERVAL = 'Say --interval DT, the time from one snapshot (or step) to the next.';

/** The pattern of settings that are sound together, or null. Errors are those that `refuse` throws. */
export function checkTimeSettings(settings: TimeSettings, refuse: RefuseTimes): TimePattern | null {
  const { times, interval, start, timePattern } = settings;
  if (interval !== undefined && !(interval > 0 && Number.isFinite(interval))) {
    refuse('interval', `found ${interval}; expected a number above 0`, SAY_INTERVAL);
  }
  if (start !== undefined && !Number.isFinite(start)) {
    refuse('start', `found ${start}; expected a finite number`, SAY_INTERVAL);
  }
  const pattern =
    timePattern === undefined
      ? null
      : parseTimePattern(timePattern, (text, remedy) => refuse('timePattern', text, remedy));
  const sources = [
    typeof times === 'string' ? 'a table of times' : null,
    interval !== undefined && pattern?.kind !== 'step' ? 'an interval' : null,
    pattern !== null ? 'a pattern' : null,
  ].filter((source) => source !== null);
  if (sources.length > 1) {
    refuse(
      pattern !== null ? 'timePattern' : 'interval',
      `${sources.join(' and ')} say what the times are; expected one of them`,
      'Leave all but one away.',
    );
  }
  if (interval === undefined && (start !== undefined || pattern?.kind === 'step')) {
    refuse(
      start !== undefined ? 'start' : 'timePattern',
      `${start !== undefined ? 'a start' : 'a pattern with {step}'} says nothing without an interval`,
      SAY_INTERVAL,
    );
  }
  return pattern;
}

const OPTIONS: Readonly<Record<TimeKey, string>> = {
  times: '--times',
  interval: '--interval',
  start: '--start',
  timePattern: '--time-pattern',
};

interface Series {
  readonly files?: readonly string[];
  readonly layout: string | undefined;
}

/**
 * Finds times.
 * @param settings - of the caller or of the run file, whoever states any of them
 * @param from - who states them
 * @param series - all files of the series, for `interval`, or if not given those in the folder of
 *   each; and the layout that was named for them
 * @throws UsageError `usage.times`; InputError of the table, or `input.timesNone` if the caller's
 *   table has none of the files
 */
export async function timesOf(
  snapshots: readonly JoinedFile[],
  settings: TimeSettings,
  from: SettingOrigin,
  series: Series,
): Promise<FoundTime[]> {
  const files = snapshots.map(({ file }) => file);
  const pattern = checkTimeSettings(settings, (key, text, remedy) => {
    throw new UsageError('usage.times', `${OPTIONS[key]}: ${text}`, remedy);
  });
  const { times, interval, start = 0 } = settings;
  if (typeof times === 'string') {
    const table = await readTimes(times);
    const found = await byTable(snapshots, table, from);
    if (from === 'option' && found.every(({ time }) => time === null) && files.length > 0) {
      throw new InputError(
        'input.timesNone',
        `${times} names none of the snapshots: ${files[0]} is not in its ${table.rows} row(s)`,
        'Write names without folders, or paths from the folder of the table.',
      );
    }
    return found;
  }
  if (pattern !== null) {
    const isStep = pattern.kind === 'step';
    const timeOf = (found: number) => (isStep ? start + found * (interval ?? 1) : found);
    const found = files.map((file) => byPattern(file, pattern, timeOf, from));
    if (from === 'option' && found.every(({ time }) => time === null) && files.length > 0) {
      throw new UsageError(
        'usage.times',
        `--time-pattern: "${pattern.text}" fits no name, not even ${basename(files[0])}`,
        'Everything beside {time} and * must be as in the names.',
      );
    }
    return found;
  }
  if (interval !== undefined) {
    const places = await placesInSeries(files, series);
    return places.map((k) => stated(start + k * interval, 'interval', from));
  }
  return times === false ? files.map(() => NOTHING) : beside(snapshots);
}

/** Codes of the remarks that are made before a snapshot is read: they are of the call, not of its bytes. */
export const BEFORE_READING: ReadonlySet<string> = new Set([
  'time.found',
  'time.missing',
  'time.noFile',
  'time.repeated',
]);

const NOTHING: FoundTime = { time: null, remarks: [] };

function stated(value: number, source: TimeSource, from: SettingOrigin): FoundTime {
  return { time: { value, source, from }, remarks: [] };
}

async function byTable(
  snapshots: readonly JoinedFile[],
  table: TimesTable,
  from: SettingOrigin,
): Promise<FoundTime[]> {
  const found = snapshots.map((snapshot): FoundTime => {
    const value = timeIn(table, snapshot);
    if (value !== null) return stated(value, 'times file', from);
    const { file } = snapshot;
    return missing(`${file} is not in ${table.path}`, `Add a row for it: ${basename(file)},TIME`);
  });
  return withLostRows(found, snapshots, table);
}

/** A snapshot in parts may be named by any of them. */
function timeIn(table: TimesTable, { file, parts }: JoinedFile): number | null {
  for (const path of parts ?? [file]) {
    const value = table.timeOf(path);
    if (value !== null) return value;
  }
  return null;
}

/** Of a series the first snapshot gets a remark on rows whose files are nowhere. */
async function withLostRows(
  found: readonly FoundTime[],
  snapshots: readonly JoinedFile[],
  table: TimesTable,
): Promise<FoundTime[]> {
  if (snapshots.length < 2) return [...found];
  const folders = new Set([dirname(table.path), ...snapshots.map(({ file }) => dirname(file))]);
  const lost = await table.filesNotIn([...folders]);
  if (lost.length === 0) return [...found];
  const some = lost.slice(0, 3).join(', ');
  const remark = {
    code: 'time.noFile',
    text: `${table.path} has ${lost.length} row(s) for files that are not there: ${some}${lost.length > 3 ? ', …' : ''}`,
    remedy: 'Look whether snapshots of the run are missing, or correct the names in the table.',
  };
  return found.map((one, k) => (k === 0 ? { ...one, remarks: [...one.remarks, remark] } : one));
}

function byPattern(
  file: string,
  pattern: TimePattern,
  timeOf: (found: number) => number,
  from: SettingOrigin,
): FoundTime {
  const number = pattern.numberIn(basename(file));
  if (number !== null) return stated(timeOf(number), 'file name', from);
  const remedy = 'Correct --time-pattern; * stands for anything.';
  return missing(`the name of ${file} does not fit the pattern ${pattern.text}`, remedy);
}

function missing(text: string, remedy: string): FoundTime {
  const remark = {
    code: 'time.missing',
    text: `${text}, so its time is what the snapshot says itself, if anything`,
    remedy,
  };
  return { time: null, remarks: [remark] };
}

/** Times from `times.csv` in the folder of each file, where there is one. */
async function beside(snapshots: readonly JoinedFile[]): Promise<FoundTime[]> {
  const found = new Map<JoinedFile, FoundTime>();
  const folders = new Set(snapshots.map(({ file }) => (file === '-' ? null : dirname(file))));
  for (const folder of folders) {
    const path = folder === null ? null : join(folder, TIMES_NAME);
    if (path === null || (await fileBytes(path)) === null) continue;
    const table = await readTimes(path);
    const own = snapshots.filter(({ file }) => file !== '-' && dirname(file) === folder);
    const times = own.map((snapshot) => besideOne(snapshot, table));
    (await withLostRows(times, own, table)).forEach((time, k) => found.set(own[k], time));
  }
  return snapshots.map((snapshot) => found.get(snapshot) ?? NOTHING);
}

function besideOne(snapshot: JoinedFile, table: TimesTable): FoundTime {
  const value = timeIn(table, snapshot);
  if (value === null) return NOTHING;
  const remark = {
    code: 'time.found',
    text: `the time of ${snapshot.file} was taken from ${table.path}, found beside it`,
    remedy: 'If that is not its time, name the right table with --times FILE, or say --no-times.',
  };
  return { ...stated(value, 'times file', 'default'), remarks: [remark] };
}

/** Place of each file in the natural order of its series, from 0; parts of a snapshot have one. */
async function placesInSeries(
  files: readonly string[],
  { files: series, layout }: Series,
): Promise<number[]> {
  const once = async (some: readonly string[]): Promise<string[]> =>
    (await joinFiles(some.map((file) => ({ file, layout })))).map(({ file }) => file);
  if (series !== undefined) return placesIn(files, await once(series));
  const places = new Map<string, number>();
  for (const folder of new Set(files.map((file) => dirname(file)))) {
    const own = files.filter((file) => dirname(file) === folder);
    const entries = await readdir(folder, { withFileTypes: true }).catch(() => []);
    const others = entries
      .filter((entry) => isSnapshotName(entry.name) && !entry.isDirectory())
      .map(({ name }) => join(folder, name));
    const all = await once(others);
    placesIn(own, [...all, ...own]).forEach((place, k) => places.set(own[k], place));
  }
  return files.map((file) => places.get(file) ?? 0);
}

function placesIn(files: readonly string[], series: readonly string[]): number[] {
  const order = inNaturalOrder([...new Set(series.map((file) => resolve(file)))]);
  const places = new Map(order.map((file, place) => [file, place]));
  return files.map((file) => places.get(resolve(file)) ?? 0);
}
