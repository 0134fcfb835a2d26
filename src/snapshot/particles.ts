/**
 * The one in-memory form of a snapshot: a structure of arrays in shared memory.
 *
 * All readers make it, all physics takes it, and nobody reorders it: index i means the same body
 * in the file, here, and in every result.
 */
import { takeBuffer, takeDoubles } from '../numerics/reuse.ts';
import type { UnitSystem } from './units.ts';

/** A column of reals as it lies in shared memory: the precision of the file is kept. */
export type FloatColumn = Float64Array | Float32Array;

/** Identifiers keep the width of the file, so that 64-bit ids stay exact. */
export type IdColumn =
  | BigInt64Array
  | BigUint64Array
  | Float64Array
  | Float32Array
  | Int32Array
  | Uint32Array
  | Int16Array
  | Uint16Array
  | Int8Array
  | Uint8Array;

/** Columns beyond mass, position and velocity; each is present only if the file holds it. */
export interface OptionalColumns {
  readonly id?: IdColumn;
  /** Index into {@link Particles.componentNames}. */
  readonly component?: Uint16Array;
  /** Plummer-equivalent softening length of each body [length]. */
  readonly softening?: FloatColumn;
  /** Potential written by the simulation, sign and self term as written [velocity²]. */
  readonly potential?: FloatColumn;
  /** Accelerations written by the simulation [velocity² / length]. */
  readonly acceleration?: {
    readonly x: FloatColumn;
    readonly y: FloatColumn;
    readonly z: FloatColumn;
  };
  readonly specificEnergy?: FloatColumn;
  readonly density?: FloatColumn;
  readonly group?: IdColumn;
  readonly subgroup?: IdColumn;
}

/**
 * What a column of velocities can hold, by formula: x is the comoving position, a the scale factor.
 * The first is the peculiar velocity, the last the whole physical velocity.
 */
export const VELOCITY_FORMS = [
  'a dx/dt',
  'dx/dt',
  'a^2 dx/dt',
  'sqrt(a) dx/dt',
  'd(ax)/dt',
] as const;

export type VelocityForm = (typeof VELOCITY_FORMS)[number];

/** Coordinates are physical, or comoving with all that is needed to make them physical. */
export type Frame =
  | { readonly kind: 'physical' }
  | {
      readonly kind: 'comoving';
      /** a = 1/(1 + z), above 0. */
      readonly scaleFactor: number;
      /** H = (da/dt)/a at this a [velocity / physical length]. */
      readonly hubbleRate: number;
      readonly velocity: VelocityForm;
      /** Edge of the periodic box [comoving length], or null if not periodic. */
      readonly boxSize: number | null;
    };

/** Bodies chosen from a snapshot. */
export interface Selection {
  /** Name of their component. */
  readonly only: string | null;
  /** Their number in the column `group`, as text. */
  readonly group: string | null;
  /** They lie within this radius about `about`, both in the coordinates of the file. */
  readonly within: number | null;
  readonly about: readonly [number, number, number] | null;
  /** Bodies in the snapshot. */
  readonly of: number;
}

/** What a reader knows about where the bytes came from, for messages and for the record. */
export interface ParticleOrigin {
  /** Path as the user gave it, `-` for standard input, or a model's name. */
  readonly file: string;
  readonly format: 'raw' | 'arrow-file' | 'arrow-stream' | 'made';
  /** Significant binary digits of the coarsest of mass, position, velocity in the file: 53, 24 or 11. */
  readonly mantissaBits: number;
  /** True if the file has softening lengths of single bodies that were not asked for, and left on disk. */
  readonly hasMoreSoftening?: true;
  /** Which bodies of the file these are; absent or null if they are all. */
  readonly selection?: Selection | null;
  /** Findings of the reader that a user should see with the result (for instance a layout found by itself). */
  readonly remarks: readonly Remark[];
  /** What the file holds and the reader did not load. */
  readonly unread?: readonly Unread[];
}

/** Something in a file that particles have no place for, or that was not asked for. */
export interface Unread {
  readonly name: string;
  readonly what: 'column' | 'field' | 'item of the header' | 'key of the metadata';
}

/** A finding with a stable code, one sentence, and what to do about it. */
export interface Remark {
  readonly code: string;
  readonly text: string;
  readonly remedy: string;
}

export interface Particles {
  readonly count: number;
  readonly mass: FloatColumn;
  readonly x: FloatColumn;
  readonly y: FloatColumn;
  readonly z: FloatColumn;
  readonly vx: FloatColumn;
  readonly vy: FloatColumn;
  readonly vz: FloatColumn;
  readonly columns: OptionalColumns;
  readonly componentNames: readonly string[];
  /** Time of the snapshot in its own units, or null if the file does not say. */
  readonly time: number | null;
  /** Units and G as the file states them, or null; command line and run file may overrule. */
  readonly units: UnitSystem | null;
  readonly gravity: number | null;
  /** Plummer-equivalent softening length as the file states it, or null. */
  readonly softening: number | null;
  readonly frame: Frame;
  readonly origin: ParticleOrigin;
}

/** Allocates a column of `count` reals in shared memory; every one must be written. */
export function allocateColumn(
  count: number,
  type: 'float64' | 'float32' = 'float64',
): FloatColumn {
  return type === 'float64'
    ? takeDoubles(count)
    : new Float32Array(takeBuffer(count * 4), 0, count);
}
