/** What is settled about a snapshot before it is read: the caller's options over those of its run file. */
import { dirname } from 'node:path';
import type { MeasureOptions } from '../dynamics/settings.ts';
import { loadUnits } from '../snapshot/ownUnits.ts';
import type { Remark } from '../snapshot/particles.ts';
import { joinFiles, type JoinedFile } from '../snapshot/parts.ts';
import type { ReadOptions } from '../snapshot/reading.ts';
import type { SurveyOptions } from './measure.ts';
import { readExternal } from './externalFile.ts';
import type { SeriesRange } from './range.ts';
import { findRunFile, readRunFile, type RunFile, type RunSettings } from './runFile.ts';
import { TIME_KEYS, timesOf, type FoundTime, type StatedTime, type TimeSettings } from './times.ts';

/** A snapshot and how it will be read and measured. */
export interface PreparedSnapshot {
  /** Its file; of a snapshot in parts the first of them. */
  readonly file: string;
  /** Files of a snapshot in parts, as far as they are there; null for others. */
  readonly parts: readonly string[] | null;
  readonly options: PreparedOptions;
  /** Path of the run file whose defaults are among the options, or null. */
  readonly runFile: string | null;
  /** Its time as stated from outside, or null if only the snapshot itself can say it. */
  readonly time: StatedTime | null;
  /** Findings that were made before it was read. */
  readonly remarks: readonly Remark[];
  /** Worker threads that the run file asks for. */
  readonly threads: number | null;
  /** Which snapshots of the run its run file wants. */
  readonly range: SeriesRange;
}

/** Options of the measurement and of the reader, with nothing left that a run file could decide. */
export type PreparedOptions = MeasureOptions & { readonly read?: ReadOptions };

/** What all snapshots of one folder share. */
interface Settled extends Pick<PreparedSnapshot, 'options' | 'runFile' | 'threads' | 'range'> {
  readonly times: TimeSettings;
  readonly timesFrom: 'option' | 'run file';
}

/**
 * Settles the options and times of each snapshot. Run files are looked for in the folders of the
 * snapshots, once each, unless `options.runFile` names one for all or is false. Files that are parts
 * of one snapshot, as their layout says, are one.
 * @param files - in any order; for the option `interval` they are one series
 * @throws UsageError and InputError of `readRunFile`, `loadUnits` and `timesOf`
 */
export async function prepareSnapshots(
  files: readonly string[],
  options: SurveyOptions = {},
): Promise<PreparedSnapshot[]> {
  return eachOnce(await prepareEach(files, options));
}

/** Of the same snapshot in parts only the first entry. */
export function eachOnce<T extends { readonly file: string }>(entries: readonly T[]): T[] {
  const seen = new Set<string>();
  return entries.filter((entry) => {
    if (!('parts' in entry) || entry.parts === null) return true;
    const isNew = !seen.has(entry.file);
    seen.add(entry.file);
    return isNew;
  });
}

/**
 * {@link prepareSnapshots} with an entry for each file, in their order.
 * @param series - all files of the series, if these are only some of them
 */
export async function prepareEach(
  files: readonly string[],
  options: SurveyOptions,
  series: readonly string[] = files,
): Promise<PreparedSnapshot[]> {
  const folders = new Map<string | null, Settled>();
  for (const file of files) {
    const folder = folderOf(file);
    if (folders.has(folder)) continue;
    folders.set(folder, await overlay(options, await runFileOf(folder, options), file));
  }
  const settledOf = (file: string) => folders.get(folderOf(file)) as Settled;
  const joined = await joinFiles(
    files.map((file) => ({ file, layout: settledOf(file).options.read?.layout })),
  );
  const times = await findTimes(eachOnce(joined), series, folders);
  return joined.map((entry) => {
    const { options: own, runFile, threads, range } = settledOf(entry.file);
    const found = times.get(entry.file) as FoundTime;
    return { ...entry, options: own, runFile, threads, range, ...found };
  });
}

/** What the caller says about times holds for all; what run files say, each for its own folder. */
async function findTimes(
  snapshots: readonly JoinedFile[],
  series: readonly string[],
  folders: ReadonlyMap<string | null, Settled>,
): Promise<Map<string, FoundTime>> {
  const times = new Map<string, FoundTime>();
  const seek = async (
    some: readonly JoinedFile[],
    { times: how, timesFrom, options: { read } }: Settled,
  ): Promise<void> => {
    const found = await timesOf(some, how, timesFrom, {
      layout: read?.layout,
      ...(timesFrom === 'option' && { files: series }),
    });
    found.forEach((time, k) => times.set(some[k].file, time));
  };
  const stated = [...folders.values()].find(({ timesFrom }) => timesFrom === 'option');
  if (stated !== undefined) await seek(snapshots, stated);
  else {
    for (const [folder, settled] of folders) {
      await seek(
        snapshots.filter(({ file }) => folderOf(file) === folder),
        settled,
      );
    }
  }
  return times;
}

const folderOf = (file: string): string | null => (file === '-' ? null : dirname(file));

async function runFileOf(
  folder: string | null,
  { runFile }: SurveyOptions,
): Promise<RunFile | null> {
  if (runFile === false) return null;
  if (runFile !== undefined) return readRunFile(runFile);
  return folder === null ? null : findRunFile(folder);
}

/** Lays the caller's options over those of a run file. */
async function overlay(
  options: SurveyOptions,
  run: RunFile | null,
  file: string,
): Promise<Settled> {
  const stated = defined(options) as Stated;
  const read = defined(options.read ?? {}) as ReadOptions;
  const { layout, columns, threads = null, from, to, every, ...settings } = run?.settings ?? {};
  const { only, group, within, about, ...rest } = settings;
  const selecting = defined({ only, group, within, about }) as ReadOptions;
  const byCaller = takeTimes(stated);
  const byRun = takeTimes(rest);
  // A start alone belongs to the interval of the run file; all else decides about times altogether.
  const isOption = Object.keys(byCaller).some((key) => key !== 'start');
  for (const key of ['runFile', 'onStage', 'read'] as const) delete stated[key];
  const taken = takenDefaults(stated, rest);
  const units = stated.units ?? taken.units;
  const external = stated.external ?? taken.external;
  const keys = Object.keys(taken) as (keyof MeasureOptions)[];
  return {
    options: {
      ...taken,
      ...stated,
      ...(units !== undefined && { units: await loadUnits(units) }),
      ...(typeof external === 'string' && { external: await readExternal(external) }),
      ...(keys.length > 0 && { fromRunFile: keys }),
      // Standard input is an Arrow stream, whatever else the run consists of.
      read: { ...selecting, ...readOptions(read, file === '-' ? undefined : layout, columns) },
    },
    runFile: run?.path ?? null,
    threads,
    range: defined({ from, to, every }),
    times: isOption ? byCaller : { ...byRun, ...byCaller },
    timesFrom: isOption ? 'option' : 'run file',
  };
}

type Stated = { -readonly [K in keyof SurveyOptions]: SurveyOptions[K] };

/** Takes the settings of times out of others. */
function takeTimes(settings: {
  -readonly [K in keyof TimeSettings]: TimeSettings[K];
}): TimeSettings {
  const taken = TIME_KEYS.map((key) => [key, settings[key]] as const);
  for (const key of TIME_KEYS) delete settings[key];
  return defined(Object.fromEntries(taken));
}

/** Without keys that are there and undefined, which JavaScript takes for options and we do not. */
function defined(options: object): object {
  return Object.fromEntries(Object.entries(options).filter(([, value]) => value !== undefined));
}

/** The defaults that the caller did not decide otherwise. */
function takenDefaults(stated: MeasureOptions, defaults: RunSettings): MeasureOptions {
  const isOpen = (key: string) => stated[key as keyof MeasureOptions] === undefined;
  const taken = Object.fromEntries(Object.entries(defaults).filter(([key]) => isOpen(key)));
  // Length and kernel belong together: who says that nothing is softened has decided both.
  if (stated.softening === 0) delete taken['softeningKernel'];
  if (stated.softeningKernel === 'none') delete taken['softening'];
  return taken;
}

function readOptions(
  read: ReadOptions,
  layout: string | undefined,
  columns: ReadOptions['columns'] | undefined,
): ReadOptions {
  return {
    ...(layout !== undefined && { layout }),
    ...read,
    ...(columns !== undefined && { columns: { ...columns, ...read.columns } }),
  };
}
