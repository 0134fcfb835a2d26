/** What is settled about a snapshot before it is read: the caller's options over those of its run file. */
import { dirname } from 'node:path';
import type { MeasureOptions } from '../dynamics/settings.ts';
import { loadUnits } from '../snapshot/ownUnits.ts';
import { joinFiles } from '../snapshot/parts.ts';
import type { ReadOptions } from '../snapshot/reading.ts';
import type { SurveyOptions } from './measure.ts';
import { findRunFile, readRunFile, type RunFile, type RunSettings } from './runFile.ts';

/** A snapshot and how it will be read and measured. */
export interface PreparedSnapshot {
  /** Its file; of a snapshot in parts the first of them. */
  readonly file: string;
  /** Files of a snapshot in parts, as far as they are there; null for others. */
  readonly parts: readonly string[] | null;
  readonly options: Omit<SurveyOptions, 'runFile' | 'onStage'>;
  /** Path of the run file whose defaults are among the options, or null. */
  readonly runFile: string | null;
  /** Worker threads that the run file asks for. */
  readonly threads: number | null;
}

/**
 * Settles the options of each snapshot. Run files are looked for in the folders of the snapshots,
 * once each, unless `options.runFile` names one for all or is false. Files that are parts of one
 * snapshot, as their layout says, are one.
 * @throws UsageError and InputError of `readRunFile` and `loadUnits`
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

/** {@link prepareSnapshots} with an entry for each file, in their order. */
export async function prepareEach(
  files: readonly string[],
  options: SurveyOptions,
): Promise<PreparedSnapshot[]> {
  const settled = new Map<string | null, Promise<Omit<PreparedSnapshot, 'file' | 'parts'>>>();
  const prepared: Omit<PreparedSnapshot, 'parts'>[] = [];
  for (const file of files) {
    const folder = file === '-' ? null : dirname(file);
    let rest = settled.get(folder);
    if (rest === undefined) {
      rest = runFileOf(folder, options).then((run) => overlay(options, run, file));
      settled.set(folder, rest);
    }
    prepared.push({ file, ...(await rest) });
  }
  const joined = await joinFiles(
    prepared.map(({ file, options: { read } }) => ({ file, layout: read?.layout })),
  );
  return prepared.map((entry, k) => ({ ...entry, ...joined[k] }));
}

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
): Promise<Omit<PreparedSnapshot, 'file' | 'parts'>> {
  const stated = defined(options) as Stated;
  const read = defined(options.read ?? {}) as ReadOptions;
  for (const key of ['runFile', 'onStage', 'read'] as const) delete stated[key];
  const { layout, columns, only, group, within, about, threads, ...defaults } = run?.settings ?? {};
  const selecting = defined({ only, group, within, about }) as ReadOptions;
  const taken = takenDefaults(stated, defaults);
  const units = stated.units ?? taken.units;
  const keys = Object.keys(taken) as (keyof MeasureOptions)[];
  return {
    options: {
      ...taken,
      ...stated,
      ...(units !== undefined && { units: await loadUnits(units) }),
      ...(keys.length > 0 && { fromRunFile: keys }),
      // Standard input is an Arrow stream, whatever else the run consists of.
      read: { ...selecting, ...readOptions(read, file === '-' ? undefined : layout, columns) },
    },
    runFile: run?.path ?? null,
    threads: threads ?? null,
  };
}

type Stated = { -readonly [K in keyof SurveyOptions]: SurveyOptions[K] };

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
