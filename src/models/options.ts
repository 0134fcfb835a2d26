/** What `make` can be asked for, and the checks of single values. */
import { UsageError } from '../errors.ts';
import { SALPETER_SLOPE, requireMassRange, type MassFunction } from './masses.ts';

export const MODEL_NAMES = ['plummer', 'hernquist', 'jaffe', 'dehnen', 'king', 'uniform'] as const;

export type ModelName = (typeof MODEL_NAMES)[number];

/** Bodies of one kind: a spherical density profile with velocities in equilibrium. */
export interface ComponentOptions {
  readonly model: ModelName;
  readonly count: number;
  /**
   * The model's scale radius a [length]: for `uniform` its radius, for `king` the King radius r₀; 1 if not
   * given.
   */
  readonly scaleRadius?: number;
  /** Mass of the whole component, before `cut` [mass]; 1 if not given. */
  readonly mass?: number;
  /** γ of `dehnen`, density ∝ r^−γ at the centre, at least 0 and less than 3. */
  readonly innerSlope?: number;
  /** W₀ of `king`, from 1e-6 to 20. */
  readonly centralPotential?: number;
  /**
   * r_a of Osipkov and Merritt [length]: β = r²/(r² + r_a²), isotropic inside and radial outside;
   * isotropic if not given. Not for `uniform`.
   */
  readonly anisotropyRadius?: number;
  /**
   * Share, from −1 to 1, of the bodies moving against the sense about +z (below 0: about −z) that are
   * turned to it by changing the sign of v_φ: ⟨v_φ⟩ = rotation · ⟨|v_φ|⟩; 0 if not given.
   */
  readonly rotation?: number;
  /** `salpeter` draws masses from m^−2.35, independent of position; `equal` if not given. */
  readonly masses?: 'equal' | 'salpeter';
  /** Least and greatest mass of `salpeter`, of which only the ratio matters; 0.1 to 10 if not given. */
  readonly massRange?: readonly [number, number];
  /** Name of the component in the snapshot, if it has more than one. */
  readonly name?: string;
}

export interface BinaryOptions {
  /** Share of the bodies of the first component that are members of binaries, from 0 to 1. */
  readonly share: number;
  /** Least and greatest semi-major axis [length]; ln a is uniform between them. */
  readonly semiMajorAxis: readonly [number, number];
}

export interface EscaperOptions {
  /** Share of the bodies of the first component that are on hyperbolic orbits outwards, from 0 to 1. */
  readonly share: number;
  /** Their speed at infinity [velocity]; √(|U|/3M) of the sphere if not given. */
  readonly speed?: number;
}

/** One or two components about one centre, each in equilibrium in the potential of both. */
export interface SphereOptions extends ComponentOptions {
  readonly second?: ComponentOptions;
  /**
   * Nothing is drawn beyond this radius [length]. The bodies inside keep the mass and the velocities
   * they have in the whole model: they add up to mass · M(cut).
   */
  readonly cut?: number;
  readonly binaries?: BinaryOptions;
  readonly escapers?: EscaperOptions;
}

/** The start of two spheres on a Kepler orbit of their masses, coming nearer. */
export interface EncounterOptions {
  /** Distance of the centres, along x [length]. */
  readonly separation: number;
  /** Least distance of the Kepler orbit [length]. */
  readonly pericentre?: number;
  /**
   * Distance at which the straight line of the relative velocity passes [length], instead of `pericentre`;
   * 0, head-on, if neither is given.
   */
  readonly impactParameter?: number;
  /** Relative speed at the start [velocity]; `parabolic`, √(2GM/separation), if not given. */
  readonly relativeVelocity?: number | 'parabolic';
}

export interface MakeOptions extends SphereOptions {
  /** Whole number from 0 to 2^53 − 1; the same seed gives the same bodies, bit for bit. */
  readonly seed: number;
  /** A second sphere, at `encounter` from the first; the centre of mass of the two rests at the origin. */
  readonly companion?: SphereOptions;
  readonly encounter?: EncounterOptions;
  /** Added to all positions [length] and all velocities [velocity] at the end. */
  readonly offset?: readonly [number, number, number];
  readonly velocity?: readonly [number, number, number];
  /** Constant of gravitation in the units wanted; velocities go as √(G M / a). 1 if not given. */
  readonly gravity?: number;
  /** Columns of single precision. */
  readonly float32?: boolean;
}

/** Options whose name on the command line is another. */
const COMMAND_NAMES: Readonly<Record<string, string>> = {
  'binaries.share': '--binaries',
  'binaries.semiMajorAxis': '--semi-major-axis',
  'escapers.share': '--escapers',
  'escapers.speed': '--escaper-speed',
  'encounter.separation': '--separation',
  'encounter.pericentre': '--pericentre',
  'encounter.impactParameter': '--impact-parameter',
  'encounter.relativeVelocity': '--relative-velocity',
};

/** `second.scaleRadius (--second scale-radius)`: an option as library and command line know it. */
export function optionName(path: string): string {
  const dashed = (name: string): string =>
    name.replace(/[A-Z]/g, (letter) => `-${letter.toLowerCase()}`);
  const [owner, ...rest] = path.split('.');
  if (rest.length === 0) return `${path} (--${dashed(path)})`;
  return `${path} (${COMMAND_NAMES[path] ?? `--${owner} ${dashed(rest.join('.'))}`})`;
}

export function optionError(
  path: string,
  found: number | string | undefined,
  expected: string,
  remedy?: string,
): UsageError {
  return new UsageError(
    'usage.modelOption',
    `The option ${optionName(path)} is ${found ?? 'not given'}, but must be ${expected}.`,
    remedy ?? `Correct ${path}.`,
  );
}

export function requirePositive(path: string, value: number | undefined): void {
  if (value === undefined || (value > 0 && Number.isFinite(value))) return;
  throw optionError(path, value, 'a finite number above 0');
}

export function requireNotNegative(path: string, value: number | undefined): void {
  if (value === undefined || (value >= 0 && Number.isFinite(value))) return;
  throw optionError(path, value, 'a finite number of at least 0');
}

export function requireShare(path: string, value: number): void {
  if (value >= 0 && value <= 1) return;
  throw optionError(path, value, 'a share from 0 to 1');
}

/** Refuses values of a component that no model takes. @param prefix - such as `second.` */
export function requireComponent(options: ComponentOptions, prefix: string): void {
  const { model, count, innerSlope, centralPotential, rotation = 0, masses = 'equal' } = options;
  if (!(MODEL_NAMES as readonly string[]).includes(model)) {
    throw new UsageError(
      'usage.model',
      `The model is "${model}", but must be one of ${MODEL_NAMES.join(', ')}.`,
      'Give the name of a known model.',
    );
  }
  if (!(Number.isInteger(count) && count >= 1 && count < 2 ** 32)) {
    throw optionError(`${prefix}count`, count, 'a whole number from 1 to 4294967295');
  }
  requirePositive(`${prefix}scaleRadius`, options.scaleRadius);
  requirePositive(`${prefix}mass`, options.mass);
  requireOwn(`${prefix}innerSlope`, innerSlope, model, 'dehnen', 'γ, such as 1.5');
  if (innerSlope !== undefined && !(innerSlope >= 0 && innerSlope < 3)) {
    throw optionError(`${prefix}innerSlope`, innerSlope, 'at least 0 and less than 3');
  }
  requireOwn(`${prefix}centralPotential`, centralPotential, model, 'king', 'W0, such as 6');
  if (centralPotential !== undefined && !(centralPotential >= 1e-6 && centralPotential <= 20)) {
    throw optionError(
      `${prefix}centralPotential`,
      centralPotential,
      'from 1e-6 to 20',
      'Give W0, such as 6.',
    );
  }
  requirePositive(`${prefix}anisotropyRadius`, options.anisotropyRadius);
  if (options.anisotropyRadius !== undefined && model === 'uniform') {
    throw optionError(
      `${prefix}anisotropyRadius`,
      options.anisotropyRadius,
      'left out for uniform, which has no distribution function',
      'Leave it out, or take another model.',
    );
  }
  if (!(rotation >= -1 && rotation <= 1)) {
    throw optionError(`${prefix}rotation`, rotation, 'a share from -1 to 1');
  }
  if (masses !== 'equal' && masses !== 'salpeter') {
    throw optionError(`${prefix}masses`, masses, 'equal or salpeter');
  }
  requireMassRange(massFunctionOf(options).range);
}

/** A parameter that one model must have and all others may not. */
function requireOwn(
  path: string,
  value: number | undefined,
  model: ModelName,
  owner: ModelName,
  meaning: string,
): void {
  if (model === owner && value === undefined) {
    throw optionError(path, undefined, `given for ${owner}`, `Give ${meaning}.`);
  }
  if (model !== owner && value !== undefined) {
    throw optionError(path, value, `left out for ${model}`, `Leave it out, or take ${owner}.`);
  }
}

export function massFunctionOf({ massRange }: ComponentOptions): MassFunction {
  return { slope: SALPETER_SLOPE, range: massRange ?? [0.1, 10] };
}

export function requireVector(path: string, vector: readonly number[]): void {
  if (vector.length === 3 && vector.every(Number.isFinite)) return;
  throw optionError(path, vector.join(' '), 'three finite numbers');
}
