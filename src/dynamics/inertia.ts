/**
 * d²I/dt² = 4T + 2W of the moment of inertia I = Σ m |x − x_c|², by the forces between the bodies alone.
 *
 * Source: identity of Lagrange and Jacobi, exact for any softening with its own W (Binney & Tremaine
 * 2008, section 4.8).
 */
import type { Crew } from '../parallel/crew.ts';
import { FEWEST_FOR_NOISE, type BalanceResult, type SetField } from './balance.ts';
import { virialNoiseSum, type BodySet } from './sums.ts';

export interface InertiaFigures {
  readonly momentOfInertiaAcceleration: number;
  /** 1σ, from the measured error of W. */
  readonly momentOfInertiaAccelerationError: number;
  /** Rms that finite N alone gives it; null for a few bodies. */
  readonly momentOfInertiaAccelerationNoise: number | null;
}

/**
 * d²I/dt² of a set with its error and its noise.
 *
 * To first order a draw of bodies moves 2T + W by Σ m (v² + w − ⟨v² + w⟩), since each body enters W
 * twice, so the noise is 2 √(Σ m² (v² + w − ⟨v² + w⟩)²). Source: docs/methods.md.
 */
export async function inertiaFigures(
  set: BodySet,
  { balance, frame, sums }: BalanceResult,
  field: SetField,
  crew: Crew,
): Promise<InertiaFigures> {
  const { kinetic, clausius, clausiusError } = balance;
  const effective = (frame.mass * frame.mass) / frame.squaredMass;
  const mean = (2 * sums.kinetic + sums.clausiusTwice) / frame.mass;
  const noise =
    effective >= FEWEST_FOR_NOISE
      ? 2 * Math.sqrt(await virialNoiseSum(set, frame, field.clausiusShare, mean, crew))
      : null;
  return {
    momentOfInertiaAcceleration: 4 * kinetic + 2 * clausius,
    momentOfInertiaAccelerationError: 2 * clausiusError,
    momentOfInertiaAccelerationNoise: noise,
  };
}
