/**
 * Units of a user's own: how large the unit of length, of mass and of velocity is, in SI or in units
 * that have a name. G follows from them.
 *
 * Sources of the sizes: see units.ts; day 86400 s and Julian year 365.25 d (IAU style manual 1989);
 * prefixes as in the SI Brochure, 9th ed.
 */
import { InputError, UsageError } from '../errors.ts';
import { nearestName } from '../numerics/nearest.ts';
import { parseJson } from './jsonText.ts';
import { readTextFile } from './textFile.ts';
import {
  AU,
  GM_SUN,
  GRAVITY_SI,
  JULIAN_YEAR,
  PARSEC,
  unitSystemNamed,
  type UnitSystem,
} from './units.ts';

/**
 * Sizes of the units: a number is in SI (m, kg, m/s, s), a text is a named unit with or without a
 * factor, such as `kpc`, `1e10 Msun`, `0.1 km/s`. Of `velocity`, `time` and `gravity` one is given:
 * the unit of velocity, the unit of time, or the value of G in these units (usually 1).
 */
export interface UnitsDefinition {
  readonly length: number | string;
  readonly mass: number | string;
  readonly velocity?: number | string | undefined;
  readonly time?: number | string | undefined;
  readonly gravity?: number | undefined;
}

/** Metres. */
const LENGTHS: Readonly<Record<string, number>> = {
  m: 1,
  cm: 0.01,
  km: 1000,
  au: AU,
  pc: PARSEC,
  kpc: 1e3 * PARSEC,
  Mpc: 1e6 * PARSEC,
};
/** G times the mass, in m³ s⁻²: GM of the Sun is known better than its mass. */
const MASSES: Readonly<Record<string, number>> = {
  kg: GRAVITY_SI,
  g: 1e-3 * GRAVITY_SI,
  Msun: GM_SUN,
};
/** Seconds. */
const TIMES: Readonly<Record<string, number>> = {
  s: 1,
  day: 86400,
  yr: JULIAN_YEAR,
  kyr: 1e3 * JULIAN_YEAR,
  Myr: 1e6 * JULIAN_YEAR,
  Gyr: 1e9 * JULIAN_YEAR,
};

export const UNITS_KEYS = ['length', 'mass', 'velocity', 'time', 'gravity'] as const;
type Key = (typeof UNITS_KEYS)[number];

/** Throws the error for one key of a definition, or for the whole of it if the key is null. */
export type RefuseUnits = (key: Key | null, text: string, remedy: string) => never;

/** A size in SI (of a mass: G times it), and the symbol it is printed with. */
interface Size {
  readonly value: number;
  readonly symbol: string;
  /** Whether the symbol is a bare name, without a factor. */
  readonly plain: boolean;
}

/** The unit system that a definition means. Errors are those that `refuse` throws. */
export function ownUnits(definition: UnitsDefinition, refuse: RefuseUnits): UnitSystem {
  const length = sizeOf('length', definition.length, LENGTHS, 'm', refuse);
  const mass = sizeOf('mass', definition.mass, MASSES, 'kg', refuse);
  const given = (['velocity', 'time', 'gravity'] as const).filter(
    (key) => definition[key] !== undefined,
  );
  if (given.length !== 1) {
    refuse(
      given[1] ?? null,
      `found ${given.length === 0 ? 'none' : given.join(' and ')} of velocity, time and gravity; expected one of them, since the others follow`,
      'For instance {"length": "1 kpc", "mass": "1e10 Msun", "velocity": "1 km/s"}.',
    );
  }
  const { velocity, time } = motion(definition, length, mass, refuse);
  const gravity = mass.value / (length.value * velocity.value ** 2);
  if (!(gravity > 0 && Number.isFinite(gravity))) {
    refuse(null, `G in these units would be ${gravity}`, 'Check the sizes of the units.');
  }
  return {
    name: 'own',
    mass: mass.symbol,
    length: length.symbol,
    velocity: velocity.symbol,
    time: time.symbol,
    // Stated, not computed from a root of itself.
    gravity: definition.gravity ?? gravity,
    si: { length: length.value, mass: mass.value / GRAVITY_SI, velocity: velocity.value },
  };
}

function motion(
  definition: UnitsDefinition,
  length: Size,
  mass: Size,
  refuse: RefuseUnits,
): { velocity: Size; time: Pick<Size, 'symbol'> } {
  if (definition.velocity !== undefined) {
    const velocity = velocityOf(definition.velocity, refuse);
    const [above, below] = velocity.symbol.split('/');
    const isQuotient = velocity.plain && length.plain && above === length.symbol;
    const symbol = isQuotient ? below : `${bracketed(length)}/${bracketed(velocity)}`;
    return { velocity, time: { symbol } };
  }
  if (definition.time !== undefined) {
    const time = sizeOf('time', definition.time, TIMES, 's', refuse);
    const symbol = `${bracketed(length)}/${bracketed(time)}`;
    const value = length.value / time.value;
    return { velocity: { value, symbol, plain: length.plain && time.plain }, time };
  }
  const { gravity = NaN } = definition;
  if (!(gravity > 0 && Number.isFinite(gravity))) {
    refuse('gravity', `found ${gravity}; expected a number above 0`, 'For instance "gravity": 1.');
  }
  const value = Math.sqrt(mass.value / (length.value * gravity));
  const velocity = { value, symbol: `${digits(value / 1000)} km/s`, plain: false };
  return { velocity, time: { symbol: `${digits(length.value / value / JULIAN_YEAR)} yr` } };
}

function velocityOf(found: number | string, refuse: RefuseUnits): Size {
  const expected =
    'a number above 0 in m/s, or a text such as "km/s", "0.1 km/s", "au/yr", "pc/Myr"';
  const parts =
    typeof found === 'string' ? /^(.*?)([A-Za-z]+) ?\/ ?([A-Za-z]+)$/.exec(found.trim()) : null;
  const factor = typeof found === 'number' ? found : factorOf(parts?.[1]);
  const [above, below] = parts ? [parts[2], parts[3]] : ['m', 's'];
  if (factor === null || !Object.hasOwn(LENGTHS, above) || !Object.hasOwn(TIMES, below)) {
    refuse(
      'velocity',
      `found ${JSON.stringify(found)}; expected ${expected}`,
      offerOf('velocity', above, LENGTHS) ?? offerOf('velocity', below, TIMES) ?? KNOWN,
    );
  }
  return sized(
    'velocity',
    factor,
    LENGTHS[above] / TIMES[below],
    `${above}/${below}`,
    found,
    expected,
    refuse,
  );
}

function sizeOf(
  key: Key,
  found: number | string,
  known: Readonly<Record<string, number>>,
  si: string,
  refuse: RefuseUnits,
): Size {
  const example = Object.keys(known).at(-1) ?? si;
  const expected = `a number above 0 in ${si}, or a text such as "${example}" or "0.5 ${example}"`;
  const parts = typeof found === 'string' ? /^(.*?)([A-Za-z]+)$/.exec(found.trim()) : null;
  const factor = typeof found === 'number' ? found : factorOf(parts?.[1]);
  const name = typeof found === 'number' ? si : (parts?.[2] ?? '');
  if (factor === null || !Object.hasOwn(known, name)) {
    refuse(
      key,
      `found ${JSON.stringify(found)}; expected ${expected}`,
      offerOf(key, name, known) ?? KNOWN,
    );
  }
  return sized(key, factor, known[name], name, found, expected, refuse);
}

function sized(
  key: Key,
  factor: number,
  unit: number,
  name: string,
  found: unknown,
  expected: string,
  refuse: RefuseUnits,
): Size {
  const value = factor * unit;
  if (!(value > 0 && Number.isFinite(value))) {
    refuse(
      key,
      `found ${JSON.stringify(found)}; expected ${expected}`,
      'A unit has a size above 0.',
    );
  }
  const plain = factor === 1;
  return { value, symbol: plain ? name : `${digits(factor)} ${name}`, plain };
}

const KNOWN = `Known units: ${[LENGTHS, MASSES, TIMES].map((units) => Object.keys(units).join(' ')).join(', ')}; a velocity is a length over a time.`;

/** `1e10 `, `1e10 * `, or nothing, which is 1; null for what is not a number. */
function factorOf(text: string | undefined): number | null {
  if (text === undefined) return null;
  const number = text.trim().replace(/\s*[*×]$/, '');
  if (number === '') return 1;
  return Number.isFinite(Number(number)) ? Number(number) : null;
}

function offerOf(key: Key, name: string, known: Readonly<Record<string, number>>): string | null {
  if (Object.hasOwn(known, name) || name === '') return null;
  const nearest = nearestName(name, Object.keys(known));
  return nearest === null ? null : `Did you mean "${nearest}" in ${key}?`;
}

function digits(value: number): string {
  const rounded = Number(value.toPrecision(6));
  const isPlain = rounded >= 1e-3 && rounded < 1e5;
  return isPlain ? String(rounded) : rounded.toExponential().replace('+', '');
}

const bracketed = ({ symbol }: Size): string => (/[/ ]/.test(symbol) ? `(${symbol})` : symbol);

/** How units may be given: the name of a built-in system, a file that ends in `.json`, or sizes. */
export type Units = string | UnitsDefinition;

/** The system of a name or a definition. @throws UsageError `usage.units` */
export function unitSystemOf(units: Units): UnitSystem {
  if (typeof units === 'string') return unitSystemNamed(units);
  const refuse: RefuseUnits = (key, text, remedy) => {
    throw new UsageError('usage.units', `units${key === null ? '' : `.${key}`}: ${text}`, remedy);
  };
  return ownUnits(checkUnits(units, refuse), refuse);
}

/** Whether units are given as a file. */
export function isUnitsFile(units: Units): units is string {
  return typeof units === 'string' && units.toLowerCase().endsWith('.json');
}

/** Reads units that are given as a file; others are returned as they are. Errors as {@link readUnits}. */
export async function loadUnits(units: Units): Promise<Units> {
  return isUnitsFile(units) ? readUnits(units) : units;
}

/**
 * Reads a file of units and checks it.
 * @throws InputError `input.units`, and those of opening a file
 */
export async function readUnits(path: string): Promise<UnitsDefinition> {
  const text = await readTextFile(path, 'units');
  const refuse: RefuseUnits = (key, found, remedy) => {
    throw new InputError(
      'input.units',
      `${path}: ${key === null ? '' : `${key}: `}${found}`,
      remedy,
    );
  };
  const value = parseJson(text, ({ line, column, found }, cause) => {
    throw new InputError(
      'input.units',
      `${path}, line ${line}, column ${column}: expected JSON, found ${found}`,
      'Units of your own are a file such as {"length": "1 kpc", "mass": "1e10 Msun", "velocity": "1 km/s"}.',
      { cause },
    );
  });
  const definition = checkUnits(value, refuse);
  ownUnits(definition, refuse);
  return definition;
}

/** Checks keys and kinds of values. */
export function checkUnits(value: unknown, refuse: RefuseUnits): UnitsDefinition {
  if (typeof value !== 'object' || value === null || Array.isArray(value)) {
    return refuse(
      null,
      `found ${JSON.stringify(value)}; expected an object with length, mass and velocity`,
      'For instance {"length": "1 kpc", "mass": "1e10 Msun", "velocity": "1 km/s"}.',
    );
  }
  for (const key of Object.keys(value)) {
    if ((UNITS_KEYS as readonly string[]).includes(key)) continue;
    const nearest = nearestName(key, UNITS_KEYS);
    refuse(
      null,
      `found the unknown key "${key}"; expected only ${UNITS_KEYS.join(', ')}`,
      nearest === null ? 'Remove it.' : `Did you mean "${nearest}"?`,
    );
  }
  const given = value as Record<Key, unknown>;
  for (const key of UNITS_KEYS) {
    const found = given[key];
    const isNeeded = key === 'length' || key === 'mass';
    if (found === undefined && !isNeeded) continue;
    if (typeof found === 'number' || (typeof found === 'string' && key !== 'gravity')) continue;
    refuse(
      key,
      `found ${found === undefined ? 'nothing' : JSON.stringify(found)}; expected a number${key === 'gravity' ? '' : ' in SI, or a text such as "2 kpc"'}`,
      KNOWN,
    );
  }
  return value as UnitsDefinition;
}
