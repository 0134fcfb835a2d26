/** Files of external fields: a list in JSON, each field with its form and its numbers. */
import { UsageError } from '../errors.ts';
import type { ExternalField } from '../models/external.ts';
import { nearestName } from '../numerics/nearest.ts';
import { jsonPlaces, parseJson, type TextPlace } from '../snapshot/jsonText.ts';
import { foundText } from '../snapshot/schemaIssues.ts';
import { readTextFile } from '../snapshot/textFile.ts';

type Domain = 'above 0' | 'at least 0';

/** Keys of each form beside `form` and `centre`. */
const FORMS: Readonly<Record<ExternalField['form'], Readonly<Record<string, Domain | 'tensor'>>>> =
  {
    pointMass: { mass: 'above 0' },
    plummer: { mass: 'above 0', scaleRadius: 'above 0' },
    nfw: { mass: 'above 0', within: 'above 0', scaleRadius: 'above 0' },
    logarithmic: { speed: 'above 0', coreRadius: 'at least 0', flattening: 'above 0' },
    miyamotoNagai: { mass: 'above 0', scaleLength: 'at least 0', scaleHeight: 'above 0' },
    tide: { tensor: 'tensor' },
  };
const MAY_LACK = ['flattening', 'centre'];

/**
 * Reads and checks `{ "fields": [ { "form": "plummer", "mass": 1, "scaleRadius": 2 }, … ] }`.
 * @throws UsageError `usage.external` with place, what was found, what was expected, and the nearest name;
 * InputError if the file cannot be read
 */
export async function readExternal(path: string): Promise<ExternalField[]> {
  const text = await readTextFile(path, 'external fields in JSON');
  const fail = ({ line, column }: TextPlace, what: string, remedy: string): never => {
    throw new UsageError(
      'usage.external',
      `${path}, line ${line}, column ${column}: ${what}`,
      remedy,
    );
  };
  const value: unknown = parseJson(text, (place) =>
    fail(place, `expected JSON, found ${place.found}`, 'Correct the file there.'),
  );
  const places = await jsonPlaces(text);
  const refuse: Refuse = (at, what, remedy, key) =>
    fail(key === undefined ? places.valueAt(at) : places.keyAt(at, key), what, remedy);
  if (places.twice !== null) {
    fail(
      places.twice,
      `${places.twice.key} stands there twice`,
      'Remove the one that is not meant.',
    );
  }
  const top = objectAt(value, [], refuse);
  knownKeys(top, [], ['fields'], refuse);
  const list = top['fields'];
  if (!Array.isArray(list) || list.length === 0) {
    return refuse(
      ['fields'],
      `fields: found ${foundText(list)}; expected a list of fields`,
      'State at least one.',
    );
  }
  return list.map((field, index) => checked(field, index, refuse));
}

type Refuse = (
  at: readonly (string | number)[],
  what: string,
  remedy: string,
  key?: string,
) => never;

function objectAt(
  value: unknown,
  at: readonly (string | number)[],
  refuse: Refuse,
): Record<string, unknown> {
  if (typeof value === 'object' && value !== null && !Array.isArray(value)) {
    return value as Record<string, unknown>;
  }
  return refuse(at, `found ${foundText(value)}; expected an object`, 'Put it into { and }.');
}

function knownKeys(
  value: object,
  at: readonly (string | number)[],
  known: readonly string[],
  refuse: Refuse,
): void {
  for (const key of Object.keys(value)) {
    if (known.includes(key)) continue;
    const near = nearestName(key, known);
    refuse(
      at,
      `found the unknown key "${key}"; expected only ${known.join(', ')}`,
      near === null ? 'Remove it.' : `Did you mean "${near}"?`,
      key,
    );
  }
}

function checked(field: unknown, index: number, refuse: Refuse): ExternalField {
  const at = ['fields', index];
  const given = objectAt(field, at, refuse);
  const { form } = given;
  if (typeof form !== 'string' || !Object.hasOwn(FORMS, form)) {
    const near = typeof form === 'string' ? nearestName(form, Object.keys(FORMS)) : null;
    return refuse(
      'form' in given ? [...at, 'form'] : at,
      `form: found ${foundText(form)}; expected ${Object.keys(FORMS).join(', ')}`,
      near === null ? 'Name one of these.' : `Did you mean "${near}"?`,
    );
  }
  const keys: Readonly<Record<string, Domain | 'tensor'>> = FORMS[form as ExternalField['form']];
  knownKeys(given, at, ['form', 'centre', ...Object.keys(keys)], refuse);
  for (const [key, domain] of Object.entries<string>({ ...keys, centre: 'centre' })) {
    const found = given[key];
    if (found === undefined && MAY_LACK.includes(key)) continue;
    const length = domain === 'tensor' ? 6 : 3;
    const isFit =
      domain === 'tensor' || domain === 'centre'
        ? Array.isArray(found) && found.length === length && found.every(Number.isFinite)
        : typeof found === 'number' && (domain === 'above 0' ? found > 0 : found >= 0);
    if (isFit) continue;
    const expected =
      domain === 'tensor' || domain === 'centre'
        ? `a list of ${length} numbers`
        : `a number ${domain === 'above 0' ? 'above 0' : 'of at least 0'}`;
    refuse(
      key in given ? [...at, key] : at,
      `${key} of ${form}: found ${foundText(found)}; expected ${expected}`,
      key in given ? 'Correct the number.' : `Add "${key}".`,
    );
  }
  return given as unknown as ExternalField;
}
