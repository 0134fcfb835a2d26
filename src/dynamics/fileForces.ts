/**
 * Potentials and accelerations that a simulation wrote, held against our own sums.
 *
 * Column = scale · own + share · self term (softened) or a constant (unsoftened), by least squares
 * without bodies far off. The scale is the file's G over ours; its sign is the convention of the file.
 * The self term of a body is what its own softened mass gives at its own place, −G m f(0): −G m/ε for
 * both kernels. Accelerations have no self term; rows are weighted by 1/|a|.
 */
import { robustFit, type RobustFit } from '../numerics/robustFit.ts';
import { takeDoubles } from '../numerics/reuse.ts';
import type { Forces } from '../octree/forces.ts';
import { softeningOfPair } from '../octree/softening.ts';
import type { FloatColumn, Particles } from '../snapshot/particles.ts';

/** What a column of the file is, in terms of our own sums. */
export interface ColumnFit {
  /** File over ours, without its sign; and its 1σ. */
  readonly scale: number;
  readonly scaleError: number;
  /** True if the file has the other sign: potentials above 0, accelerations that point outwards. */
  readonly flipped: boolean;
  /** Rms of what the fit leaves, over the mean size of the column: 1 says that they have nothing in common. */
  readonly misfit: number;
}

export interface PotentialFit extends ColumnFit {
  /** True if the potentials hold the self term of each body. */
  readonly selfTerm: boolean;
  /** A constant, over the mean |φ|, that no self term explains; 0 if there is none worth a word. */
  readonly offset: number;
  /** The softening length whose self term that constant would be, for bodies of one mass; null if none. */
  readonly offsetSoftening: number | null;
  /** Potentials of the file with our sign, without self term, as the file scales them; input order. */
  readonly corrected: Float64Array;
}

export interface AccelerationFit extends ColumnFit {
  /** Accelerations of the file with our sign, as the file scales them; input order. */
  readonly corrected: Vectors;
}

export interface Vectors {
  readonly x: Float64Array;
  readonly y: Float64Array;
  readonly z: Float64Array;
}

export interface FileForces {
  readonly potential: PotentialFit | null;
  readonly acceleration: AccelerationFit | null;
}

/** From this many bodies on a constant can be told from the potentials themselves. */
const FEWEST_FOR_OFFSET = 5;
/** A share of 1 may be off by this, or by so many of its σ. */
const SELF_TERM_OFF = 0.05;
const SELF_TERM_SIGMAS = 3;
/** A constant is there if it is so many of its σ … */
const OFFSET_SIGMAS = 5;
/** … and worth a word from this share of the mean |φ|; a self term is taken out whatever its size. */
const OFFSET_SHARE = 1e-3;

/** The columns of the file that there are, fitted by our own forces. */
export function fitFileForces(particles: Particles, own: Forces): FileForces {
  const { potential, acceleration } = particles.columns;
  const usable = particles.count > 1;
  return {
    potential: potential && usable ? fitPotential(particles.mass, potential, own) : null,
    acceleration:
      acceleration && own.acceleration && usable
        ? fitAcceleration(acceleration, own.acceleration)
        : null,
  };
}

function fitPotential(mass: FloatColumn, column: FloatColumn, own: Forces): PotentialFit {
  const count = column.length;
  const softened = own.softening.kernel !== 'none';
  const selfOf = (i: number): number => {
    if (!softened) return -1;
    // A body with itself; one without a length of its own has no self term that could be written.
    const { length } = softeningOfPair(own.softening, i, i);
    return length > 0 ? (-own.gravity * mass[i]) / length : 0;
  };
  const terms = count >= FEWEST_FOR_OFFSET ? 2 : 1;
  const fit = robustFit({
    count,
    width: 1,
    terms,
    load: (i, into) => {
      into[0] = column[i];
      into[1] = own.potential[i];
      if (terms > 1) into[2] = selfOf(i);
    },
  });
  const size = meanSize(own.potential);
  const base = columnFit(fit, meanSize(column));
  const sign = base.flipped ? -1 : 1;
  // In units of our own sums: 1 is a self term, softened.
  const constant = terms > 1 ? (sign * fit.coefficients[1]) / base.scale : 0;
  const sigma = terms > 1 ? fit.errors[1] / base.scale : 0;
  const isThere = base.scale > 0 && Math.abs(constant) > OFFSET_SIGMAS * sigma;
  const off = Math.max(SELF_TERM_OFF, SELF_TERM_SIGMAS * sigma);
  const selfTerm = isThere && softened && Math.abs(constant - 1) < off;
  const share = (constant * meanSize({ length: count, at: selfOf })) / size;
  const offset = isThere && !selfTerm && Math.abs(share) > OFFSET_SHARE ? -share : 0;
  const corrected = takeDoubles(count);
  for (let i = 0; i < count; i++) {
    corrected[i] = sign * column[i] - (selfTerm ? base.scale * selfOf(i) : 0);
  }
  return {
    ...base,
    selfTerm,
    offset,
    offsetSoftening: offset < 0 ? softeningOf(mass, constant, own) : null,
    corrected,
  };
}

/** The length whose self term is the constant found, if all bodies with mass have the same. */
function softeningOf(mass: FloatColumn, constant: number, own: Forces): number | null {
  const { length, kernel, lengths } = own.softening;
  if (lengths !== undefined) return null;
  if (kernel !== 'none') return length / constant;
  const first = mass[0];
  if (!mass.every((m: number) => m === first)) return null;
  return (own.gravity * first) / constant;
}

function fitAcceleration(
  column: { readonly x: FloatColumn; readonly y: FloatColumn; readonly z: FloatColumn },
  own: Vectors,
): AccelerationFit {
  const count = own.x.length;
  const fit = robustFit({
    count,
    width: 3,
    terms: 1,
    load: (i, into) => {
      const size = Math.hypot(own.x[i], own.y[i], own.z[i]);
      const weight = size > 0 ? 1 / size : 0;
      into[0] = column.x[i] * weight;
      into[1] = column.y[i] * weight;
      into[2] = column.z[i] * weight;
      into[3] = own.x[i] * weight;
      into[4] = own.y[i] * weight;
      into[5] = own.z[i] * weight;
    },
  });
  const base = columnFit(fit, Math.abs(fit.coefficients[0]));
  const sign = base.flipped ? -1 : 1;
  const corrected = { x: takeDoubles(count), y: takeDoubles(count), z: takeDoubles(count) };
  for (const axis of ['x', 'y', 'z'] as const) {
    for (let i = 0; i < count; i++) corrected[axis][i] = sign * column[axis][i];
  }
  return { ...base, corrected };
}

function columnFit(fit: RobustFit, size: number): ColumnFit {
  const [scale] = fit.coefficients;
  return {
    scale: Math.abs(scale),
    scaleError: fit.errors[0],
    flipped: scale < 0,
    misfit: size > 0 ? Math.min(1, fit.rms / size) : 1,
  };
}

function meanSize(values: { readonly length: number; at(i: number): number | undefined }): number {
  let sum = 0;
  for (let i = 0; i < values.length; i++) sum += Math.abs(values.at(i) ?? 0);
  return values.length > 0 ? sum / values.length : 0;
}
