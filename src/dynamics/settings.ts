/** Options of a measurement, and which of option, run file, snapshot and default decides each. */
import { InputError, UsageError } from '../errors.ts';
import type { ExternalField } from '../models/external.ts';
import { lengthOfPair, SPLINE_SUPPORT, type SofteningKernel } from '../octree/softening.ts';
import type { Particles } from '../snapshot/particles.ts';
import { unitSystemOf, type Units } from '../snapshot/ownUnits.ts';
import { UNIT_SYSTEMS, type UnitSystem } from '../snapshot/units.ts';
import { extrasNamed } from './extras.ts';
import type {
  CentreMethod,
  ForcesOrigin,
  RecordSettings,
  Setting,
  SettingOrigin,
  SofteningSetting,
  TimeSetting,
  UnitsSetting,
} from './record.ts';

/** What the user may set; everything is optional. */
export interface MeasureOptions {
  /** Name of a unit system, or sizes of your own; sets G unless `gravity` is given at the same level. */
  readonly units?: Units;
  readonly gravity?: number;
  /** Plummer-equivalent softening length [length], or `column` for those of the single bodies in the snapshot. */
  readonly softening?: number | 'column';
  /** Kernel; `plummer` if a length is given without a kernel. */
  readonly softeningKernel?: SofteningKernel;
  readonly coulombFactor?: number;
  /** Relative error wanted of U. */
  readonly error?: number;
  readonly exact?: boolean;
  readonly centre?: CentreMethod;
  /** Mass fractions of Lagrangian radii; 0.1 and 0.5 are always measured. */
  readonly fractions?: readonly number[];
  /** What to do with bodies at one point without softening. */
  readonly coincident?: 'leave-out' | 'refuse';
  /** Where U and W come from: our own sums (`own`), or the columns of the file. */
  readonly forces?: ForcesOrigin;
  /** Names of what to measure besides: see `EXTRAS`; `all` for all. */
  readonly with?: readonly string[];
  /** Number of shells of equal number that `shells` and `profiles` use. */
  readonly shells?: number;
  /** External fields, or a file of them (`.json`); without them the bodies are taken to be alone. */
  readonly external?: string | readonly ExternalField[];
  /** Which of these options a run file decided; all others count as stated by the caller. */
  readonly fromRunFile?: readonly (keyof MeasureOptions)[];
}

export const DEFAULT_ERROR = 1e-5;
/** Source: Giersz & Heggie 1994, MNRAS 268, 257 (equal masses). */
export const DEFAULT_COULOMB_FACTOR = 0.11;
export const DEFAULT_FRACTIONS: readonly number[] = [0.01, 0.05, 0.1, 0.25, 0.5, 0.75, 0.9, 0.99];
export const DEFAULT_SHELLS = 16;
export const MOST_SHELLS = 200;

/** Disagreement of G and units above which a pair of options is refused. */
const GRAVITY_CLASH = 1e-4;

/**
 * Decides every setting.
 * @throws UsageError if an option is out of its domain, or units and G contradict each other; InputError
 * `input.missingSoftening` if lengths of the single bodies are asked for and there are none
 */
export function settle(options: MeasureOptions, particles: Particles): RecordSettings {
  const { gravity, units } = settleGravity(options, particles);
  const fractions = settleFractions(options);
  return {
    time: timeOfSnapshot(particles.time),
    gravity,
    units,
    softening: settleSoftening(options, particles),
    coulombFactor: decide(
      options,
      'coulombFactor',
      positive('--coulomb-factor', options.coulombFactor),
      DEFAULT_COULOMB_FACTOR,
    ),
    error: decide(options, 'error', inRange('--error', options.error, 1e-15, 1), DEFAULT_ERROR),
    centre: decide(options, 'centre', options.centre, 'density'),
    fractions,
    exact: decide(options, 'exact', options.exact, false),
    forces: decide(options, 'forces', options.forces, 'own'),
    with: decide(options, 'with', options.with && extrasNamed(options.with), []),
    shells: decide(
      options,
      'shells',
      inRange('--shells', options.shells, 1, MOST_SHELLS, true),
      DEFAULT_SHELLS,
    ),
  };
}

function timeOfSnapshot(time: number | null): TimeSetting {
  return time === null
    ? { value: null, from: 'default', source: null }
    : { value: time, from: 'snapshot', source: 'snapshot' };
}

function decide<T>(
  options: MeasureOptions,
  key: keyof MeasureOptions,
  value: T | undefined,
  fallback: T,
): Setting<T> {
  return value === undefined
    ? { value: fallback, from: 'default' }
    : { value, from: originOf(options, key) };
}

/** Who stated an option that is there. */
function originOf(options: MeasureOptions, key: keyof MeasureOptions): SettingOrigin {
  return options.fromRunFile?.includes(key) === true ? 'run file' : 'option';
}

function settleGravity(
  options: MeasureOptions,
  particles: Particles,
): { gravity: Setting<number>; units: UnitsSetting } {
  const gravity = positive('--gravity', options.gravity) ?? null;
  const units = options.units === undefined ? null : unitSystemOf(options.units);
  const stated = (from: SettingOrigin) => ({
    units: units !== null && originOf(options, 'units') === from ? units : null,
    gravity: gravity !== null && originOf(options, 'gravity') === from ? gravity : null,
    from,
  });
  const levels: { units: UnitSystem | null; gravity: number | null; from: SettingOrigin }[] = [
    stated('option'),
    stated('run file'),
    { units: particles.units, gravity: particles.gravity, from: 'snapshot' },
  ];
  for (const level of levels) {
    const place = level.from === 'snapshot' ? particles.origin.file : level.from;
    refuseClash(level.from === 'option' ? '' : `${place}: `, level.units, level.gravity);
  }
  const unitsLevel = levels.find((level) => level.units !== null);
  // Units given at a higher level than a number for G speak last: they set G.
  const gravityLevel = levels.find((level) => level.gravity !== null || level.units !== null);
  const system = unitsLevel?.units ?? UNIT_SYSTEMS.natural;
  const { name, ...own } = system;
  return {
    units: {
      value: name,
      from: unitsLevel?.from ?? 'default',
      ...(name === 'own' && { system: own }),
    },
    gravity: {
      value: gravityLevel?.gravity ?? gravityLevel?.units?.gravity ?? system.gravity,
      from: gravityLevel?.from ?? 'default',
    },
  };
}

/**
 * Refuses units and a G that contradict each other.
 * @param place - begins the message: file and place, or nothing for the command line
 * @throws UsageError `usage.gravityClash`
 */
export function refuseClash(place: string, units: UnitSystem | null, gravity: number | null): void {
  // `natural` says nothing about G but that it is 1 if nobody states it.
  if (units === null || gravity === null || units.name === 'natural') return;
  if (Math.abs(gravity / units.gravity - 1) <= GRAVITY_CLASH) return;
  throw new UsageError(
    'usage.gravityClash',
    `${place}units ${units.name === 'own' ? 'of your own' : units.name} mean G = ${units.gravity}, but G = ${gravity} is stated with them`,
    'state the one or the other, or a G that agrees with the units',
  );
}

function settleSoftening(
  options: MeasureOptions,
  particles: Particles,
): RecordSettings['softening'] {
  const stated = options.softening !== undefined || options.softeningKernel !== undefined;
  const from: SettingOrigin = stated
    ? originOf(options, options.softening !== undefined ? 'softening' : 'softeningKernel')
    : particles.softening !== null
      ? 'snapshot'
      : 'default';
  if (options.softening === 'column') {
    const kernel = options.softeningKernel ?? 'plummer';
    if (kernel === 'none') return { value: { length: 0, support: 0, kernel }, from };
    return { value: softeningOfBodies(kernel, particles), from };
  }
  const length = options.softening ?? particles.softening ?? 0;
  if (!(length >= 0) || length === Infinity) {
    throw new UsageError(
      'usage.softening',
      `--softening ${length} is not a length of 0 or more`,
      'give the Plummer-equivalent length in the unit of length of the snapshot, or "column" for lengths of the single bodies',
    );
  }
  const kernel = options.softeningKernel ?? (length > 0 ? 'plummer' : 'none');
  if (kernel !== 'none' && length === 0) {
    throw new UsageError(
      'usage.softeningKernel',
      `--softening-kernel ${kernel} needs a length`,
      'add --softening LENGTH',
    );
  }
  if (kernel === 'none') return { value: { length: 0, support: 0, kernel }, from };
  const support = kernel === 'spline' ? SPLINE_SUPPORT * length : null;
  return { value: { length, support, kernel }, from };
}

/**
 * The setting for lengths of the single bodies.
 * @throws InputError `input.missingSoftening` if the snapshot has none
 */
function softeningOfBodies(
  kernel: SofteningKernel,
  { columns, mass, origin }: Particles,
): SofteningSetting {
  const lengths = columns.softening;
  if (lengths === undefined) {
    throw new InputError(
      'input.missingSoftening',
      `${origin.file}: --softening column, but the file has no softening length of each body`,
      'name the column with --columns softening=NAME, add the field softening to the layout, let the layout state the softening of each component, or give one length with --softening LENGTH',
    );
  }
  let least = Infinity;
  let greatest = 0;
  for (let i = 0; i < lengths.length; i++) {
    if (lengths[i] < least) least = lengths[i];
    if (lengths[i] > greatest) greatest = lengths[i];
  }
  // In units of the greatest, so that no square is lost.
  let total = 0;
  let squares = 0;
  for (let i = 0; greatest > 0 && i < lengths.length; i++) {
    total += mass[i];
    squares += mass[i] * (lengths[i] / greatest) ** 2;
  }
  const typical = total > 0 ? greatest * Math.sqrt(squares / total) : greatest;
  return {
    length: lengthOfPair(kernel, typical, typical),
    support: kernel === 'spline' ? SPLINE_SUPPORT * greatest : null,
    kernel,
    ofBodies: { least, greatest },
  };
}

function settleFractions(options: MeasureOptions): RecordSettings['fractions'] {
  const asked = options.fractions;
  for (const f of asked ?? []) {
    if (!(f > 0 && f < 1)) {
      throw new UsageError(
        'usage.fractions',
        `--fractions has ${f}, which is not between 0 and 1`,
        'give mass fractions such as 0.1,0.5,0.9',
      );
    }
  }
  const value = [...new Set([...(asked ?? DEFAULT_FRACTIONS), 0.1, 0.5])].sort((a, b) => a - b);
  return { value, from: asked ? originOf(options, 'fractions') : 'default' };
}

function positive(option: string, value: number | undefined): number | undefined {
  return inRange(option, value, Number.MIN_VALUE, Number.MAX_VALUE);
}

function inRange(
  option: string,
  value: number | undefined,
  low: number,
  high: number,
  whole = false,
): number | undefined {
  const isKind = !whole || Number.isInteger(value);
  if (value === undefined || (isKind && value >= low && value <= high)) return value;
  throw new UsageError(
    'usage.range',
    `${option} ${value} is out of range`,
    low === Number.MIN_VALUE
      ? 'give a number above 0'
      : `give a ${whole ? 'whole ' : ''}number from ${low} to ${high}`,
  );
}
