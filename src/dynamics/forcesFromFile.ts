/** Forces whose U and W are those of the file: with `--forces file`. */
import { CompensatedSum } from '../numerics/compensated.ts';
import { takeDoubles } from '../numerics/reuse.ts';
import { InputError } from '../errors.ts';
import type { Forces } from '../octree/forces.ts';
import type { Particles } from '../snapshot/particles.ts';
import type { FileForces } from './fileForces.ts';

/** Scales nearer to 1 than this are errors of the forces; beyond it the file has another G or unit. */
export const SAME_GRAVITY = 0.01;
/** Columns that fit worse than this are not the forces of these bodies on each other. */
const WORST_MISFIT = 0.3;
/** A constant in the potentials up to this share of them is left to the error of U. */
const WORST_OFFSET = 0.01;

/** A scale as it is used: 1 where file and ours have one G. */
export function usedScale(scale: number): number {
  return Math.abs(scale - 1) <= SAME_GRAVITY ? 1 : scale;
}

/**
 * Refuses columns that U and W cannot be had from.
 * @throws InputError `input.missingForces`, `input.fileForces`
 */
export function requireFileForces(particles: Particles, fit: FileForces): void {
  const { file } = particles.origin;
  const { columns } = particles;
  requireForceColumns(particles, '--forces file');
  if (columns.potential && fit.potential) {
    const { scale, misfit, offset, offsetSoftening } = fit.potential;
    if (!(misfit < WORST_MISFIT && scale > 0)) throw unrelated(file, 'potential', misfit);
    if (Math.abs(offset) > WORST_OFFSET) {
      throw new InputError(
        'input.fileForces',
        `${file}: the potentials differ from our own sums by a constant of ${short(offset)} times their mean size, which is no self term at the softening stated`,
        offsetSoftening === null
          ? 'State the softening of the run with --softening, write potentials that vanish far away, or leave out --forces file.'
          : `A self term at a softening length of ${short(offsetSoftening)} would explain it: state the softening with --softening, or leave out --forces file.`,
      );
    }
  }
  if (columns.acceleration && fit.acceleration) {
    const { scale, misfit } = fit.acceleration;
    if (!(misfit < 1 && scale > 0)) throw unrelated(file, 'acceleration', misfit);
  }
}

/**
 * @throws InputError `input.missingForces` if the file has neither potentials nor accelerations;
 * `input.fileForces` if its coordinates are comoving
 */
export function requireForceColumns({ origin, columns, frame }: Particles, option: string): void {
  if (frame.kind === 'comoving') {
    throw new InputError(
      'input.fileForces',
      `${origin.file}: coordinates are comoving, and the file does not say in which its potentials and accelerations are, so that ${option} cannot use them`,
      `Leave out ${option}, or write physical coordinates.`,
    );
  }
  if (columns.potential || columns.acceleration) return;
  if (origin.selection) {
    throw new InputError(
      'input.missingForces',
      `${origin.file}: only some bodies are selected, and the forces in the file are those of all, so that ${option} has none to use`,
      `Leave out ${option}, or the selection.`,
    );
  }
  throw new InputError(
    'input.missingForces',
    `${origin.file}: no column for potential or acceleration, which ${option} needs`,
    `If the file has them under other names: --columns potential=NAME or acceleration=NAME; else leave out ${option}.`,
  );
}

function unrelated(file: string, column: string, misfit: number): InputError {
  return new InputError(
    'input.fileForces',
    `${file}: the column ${column} has little in common with the forces of these bodies on each other (${short(100 * misfit)} % of it is left over)`,
    `Check which column is meant (--columns ${column}=NAME), the softening and the units, or leave out --forces file.`,
  );
}

/**
 * Our forces with U, φ and W of the file in their place, as far as the file has them; the shares of
 * single bodies in W are ours, scaled to its sum. Errors are the differences from our own sums with
 * these sums' own errors.
 * @param centre - centre of mass, which W is about
 */
export function forcesFromFile(
  particles: Particles,
  own: Forces,
  fit: FileForces,
  centre: ArrayLike<number>,
): Forces {
  const { mass } = particles;
  const potential = fit.potential?.corrected ?? own.potential;
  const scale = usedScale(fit.potential?.scale ?? 1);
  const potentialEnergy = fit.potential ? halfSum(mass, potential) : own.potentialEnergy;
  const softened = own.softening.kernel !== 'none';
  const clausius = fit.acceleration
    ? clausiusAbout(particles, fit.acceleration.corrected, centre)
    : softened
      ? scale * own.clausius
      : potentialEnergy;
  const isOne = fit.acceleration === null && !softened;
  const off = (value: number, ours: number, error: number, factor: number) =>
    Math.hypot(value - factor * ours, factor * error);
  const ofAcceleration = fit.acceleration ? usedScale(fit.acceleration.scale) : scale;
  const potentialError = fit.potential
    ? off(potentialEnergy, own.potentialEnergy, own.potentialError, scale)
    : own.potentialError;
  return {
    ...own,
    origin: 'file',
    // What the bound set subtracts must be of the same G as what it subtracts from.
    gravity: own.gravity * scale,
    potential,
    potentialEnergy,
    potentialError,
    clausius,
    clausiusShare: isOne ? potential : scaled(own.clausiusShare, own.clausius, clausius),
    clausiusError: isOne
      ? potentialError
      : off(clausius, own.clausius, own.clausiusError, ofAcceleration),
    acceleration: fit.acceleration?.corrected ?? own.acceleration,
  };
}

function halfSum(mass: ArrayLike<number>, values: Float64Array): number {
  const sum = new CompensatedSum();
  for (let i = 0; i < values.length; i++) sum.add(mass[i] * values[i]);
  return sum.value() / 2;
}

/** Σ m (x − x_c)·a. */
function clausiusAbout(
  { mass, x, y, z, count }: Particles,
  acceleration: NonNullable<FileForces['acceleration']>['corrected'],
  centre: ArrayLike<number>,
): number {
  const sum = new CompensatedSum();
  for (let i = 0; i < count; i++) {
    sum.add(
      mass[i] *
        ((x[i] - centre[0]) * acceleration.x[i] +
          (y[i] - centre[1]) * acceleration.y[i] +
          (z[i] - centre[2]) * acceleration.z[i]),
    );
  }
  return sum.value();
}

/** Values that sum up to `from`, scaled so that they sum up to `to`. */
function scaled(values: Float64Array, from: number, to: number): Float64Array {
  const result = takeDoubles(values.length);
  const factor = from === 0 ? 1 : to / from;
  for (let i = 0; i < values.length; i++) result[i] = factor * values[i];
  return result;
}

function short(value: number): string {
  return String(Number(value.toPrecision(3)));
}
