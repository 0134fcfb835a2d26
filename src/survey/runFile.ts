/** `settlemark.json` in the folder of a run: that run's defaults for the options of a measurement. */
import { dirname, isAbsolute, join } from 'node:path';
import { EXTRA_NAMES, extrasNamed } from '../dynamics/extras.ts';
import { refuseClash, type MeasureOptions } from '../dynamics/settings.ts';
import { InputError, UsageError } from '../errors.ts';
import { nearestName } from '../numerics/nearest.ts';
import { fileBytes } from '../snapshot/files.ts';
import { jsonPlaces, parseJson, type JsonPlaces, type TextPlace } from '../snapshot/jsonText.ts';
import {
  checkUnits,
  isUnitsFile,
  loadUnits,
  ownUnits,
  unitSystemOf,
  type RefuseUnits,
  type Units,
  type UnitsDefinition,
} from '../snapshot/ownUnits.ts';
import { FIELD_NAMES, type ReadOptions } from '../snapshot/reading.ts';
import {
  expectation,
  foundText,
  keyPath,
  lookUp,
  offer,
  type Issue,
} from '../snapshot/schemaIssues.ts';
import { readTextFile } from '../snapshot/textFile.ts';
import { UNIT_SYSTEMS } from '../snapshot/units.ts';
import { checkRange, type SeriesRange } from './range.ts';
import { checkTimeSettings, type TimeSettings } from './times.ts';

/** Name of the file that is looked for in the folder of a snapshot. */
export const RUN_FILE_NAME = 'settlemark.json';

type SelectingOption = 'only' | 'group' | 'within' | 'about';

/** What a run file may decide. Paths in it are relative to the file; here they are ready to be opened. */
export interface RunSettings
  extends
    Omit<MeasureOptions, 'fromRunFile'>,
    Pick<ReadOptions, 'layout' | 'columns' | SelectingOption>,
    TimeSettings,
    SeriesRange {
  readonly threads?: number;
}

export interface RunFile {
  readonly path: string;
  readonly settings: RunSettings;
}

/**
 * The run file of a folder, or null if there is none.
 * @throws as {@link readRunFile}
 */
export async function findRunFile(folder: string): Promise<RunFile | null> {
  const path = join(folder, RUN_FILE_NAME);
  return (await fileBytes(path)) === null ? null : readRunFile(path);
}

/**
 * Reads and checks a run file.
 * @throws UsageError `usage.runFileNotJson`, `usage.runFileUnknownKey`, `usage.runFileInvalid`,
 * `usage.gravityClash`; InputError if it, or a file of units that it names, cannot be read
 */
export async function readRunFile(path: string): Promise<RunFile> {
  const text = await readTextFile(path, 'settings in JSON');
  const value = parseJson(text, ({ line, column, found }, cause) => {
    throw new UsageError(
      'usage.runFileNotJson',
      `${path}, line ${line}, column ${column}: expected JSON, found ${found}`,
      'Correct the run file there; JSON knows no comments and no comma after the last item.',
      { cause },
    );
  });
  const places = await jsonPlaces(text);
  if (places.twice !== null) {
    throw invalid(
      path,
      places.twice,
      `${places.twice.key} stands there twice; expected each key once`,
      'Remove the one that is not meant.',
    );
  }
  const { runFileSchema, RUN_FILE_KEYS } = await import('./runFileSchema.ts');
  checkSizes(path, places, value);
  const result = runFileSchema.safeParse(value);
  if (!result.success) throw ofIssue(path, places, value, result.error.issues, RUN_FILE_KEYS);
  // The schema knows the keys as optional, not as possibly undefined: JSON has no undefined.
  const stated = { ...result.data };
  delete stated.$schema;
  delete stated.settlemark;
  return { path, settings: await complete(path, places, stated as RunSettings) };
}

/** Makes paths ready to be opened, loads units, and checks what keys mean together. */
async function complete(
  path: string,
  places: JsonPlaces,
  stated: RunSettings,
): Promise<RunSettings> {
  const { layout, times, units: named, with: extras = [], external } = stated;
  checkTimeSettings(stated, (key, text, remedy) => {
    throw invalid(path, places.valueAt([key]), `${key}: ${text}`, remedy);
  });
  checkRange(stated, (key, text, remedy) => {
    throw invalid(path, places.valueAt([key]), `${key}: ${text}`, remedy);
  });
  extras.forEach((name, k) => checkExtra(path, places, name, k));
  let units = named;
  if (typeof units === 'string' && !isUnitsFile(units)) checkName(path, places, units);
  if (units !== undefined && isUnitsFile(units)) units = await unitsBeside(path, units);
  if (units !== undefined) {
    refuseClash(
      placeText(path, places.valueAt(['gravity'])),
      unitSystemOf(units),
      stated.gravity ?? null,
    );
  }
  return {
    ...stated,
    ...(layout !== undefined && { layout: beside(path, layout) }),
    ...(typeof times === 'string' && { times: beside(path, times) }),
    ...(units !== undefined && { units }),
    ...(typeof external === 'string' && { external: beside(path, external) }),
  };
}

async function unitsBeside(path: string, named: string): Promise<Units> {
  try {
    return await loadUnits(beside(path, named));
  } catch (error) {
    if (!(error instanceof InputError)) throw error;
    const code = error.code as `input.${string}`;
    throw new InputError(code, `${error.message} (named in ${path})`, error.remedy, {
      cause: error,
    });
  }
}

/** A path in a run file, from the folder of the run file. */
export function beside(runFile: string, path: string): string {
  return isAbsolute(path) ? path : join(dirname(runFile), path);
}

function checkName(path: string, places: JsonPlaces, name: string): void {
  const known = Object.keys(UNIT_SYSTEMS);
  if (known.includes(name)) return;
  const nearest = nearestName(name, known);
  throw invalid(
    path,
    places.valueAt(['units']),
    `units: found "${name}"; expected ${known.join(', ')}, a file that ends in .json, or an object with length, mass and velocity`,
    nearest === null ? 'Name one of these.' : `Did you mean "${nearest}"?`,
  );
}

function checkExtra(path: string, places: JsonPlaces, name: string, k: number): void {
  try {
    extrasNamed([name]);
  } catch (error) {
    if (!(error instanceof UsageError)) throw error;
    const expected = `${EXTRA_NAMES.join(', ')} or all`;
    throw invalid(
      path,
      places.valueAt(['with', k]),
      `with: found "${name}"; expected ${expected}`,
      error.remedy ?? `Name some of ${expected}.`,
    );
  }
}

/** Units as an object are checked by their own rules, which say more than a schema. */
function checkSizes(path: string, places: JsonPlaces, value: unknown): void {
  const units = lookUp(value, ['units']);
  if (typeof units !== 'object' || units === null) return;
  const refuse: RefuseUnits = (key, text, remedy) => {
    const at = key === null ? ['units'] : ['units', key];
    throw invalid(path, places.valueAt(at), `${at.join('.')}: ${text}`, remedy);
  };
  const definition: UnitsDefinition = checkUnits(units, refuse);
  ownUnits(definition, refuse);
}

function ofIssue(
  path: string,
  places: JsonPlaces,
  value: unknown,
  issues: readonly Issue[],
  keys: readonly string[],
): UsageError {
  // A misspelt key is the cause of what is missing.
  const issue = issues.find(({ code }) => code === 'unrecognized_keys') ?? issues[0];
  if (issue.code === 'unrecognized_keys') {
    const [key] = issue.keys;
    const isTop = issue.path.length === 0;
    const known = isTop ? keys : FIELD_NAMES;
    const nearest = nearestName(camelCase(key), known);
    return new UsageError(
      'usage.runFileUnknownKey',
      `${placeText(path, places.keyAt(issue.path, key))}${isTop ? '' : `${keyPath(issue.path, '')}: `}found the unknown key "${key}"; expected only ${known.join(', ')}`,
      nearest === null ? 'Remove it.' : `Did you mean "${nearest}"?`,
    );
  }
  const found = lookUp(value, issue.path);
  return invalid(
    path,
    places.valueAt(issue.path),
    `${keyPath(issue.path, 'the run file')}: found ${foundText(found)}; expected ${expectation(issue)}`,
    offer(issue, found) ?? 'Correct the run file there.',
  );
}

/** `--softening-kernel` as people know it from the command line → `softeningKernel`. */
function camelCase(key: string): string {
  return key
    .replace(/^-+/, '')
    .replace(/[-_ ]+(\w)/g, (_all, letter: string) => letter.toUpperCase());
}

function invalid(path: string, at: TextPlace, text: string, remedy: string): UsageError {
  return new UsageError('usage.runFileInvalid', `${placeText(path, at)}${text}`, remedy);
}

function placeText(path: string, { line, column }: TextPlace): string {
  return `${path}, line ${line}, column ${column}: `;
}
