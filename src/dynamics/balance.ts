/** The balance of energies of a set of bodies. */
import type { Forces } from '../octree/forces.ts';
import type { Crew } from '../parallel/crew.ts';
import type { Balance } from './record.ts';
import { frameOf, noiseSum, sumsOf, type BodySet, type SetFrame, type SetSums } from './sums.ts';

/** A set's own field: φ and w of its members from its members alone, and relative errors of U and W. */
export interface SetField {
  readonly potential: Float64Array;
  readonly clausiusShare: Float64Array;
  readonly relativeError: number;
  readonly relativeClausiusError: number;
  readonly softened: boolean;
}

/** The field of all bodies as forces give it. */
export function fieldOf(forces: Forces): SetField {
  const relative = (error: number, value: number) => (value === 0 ? 0 : error / Math.abs(value));
  return {
    potential: forces.potential,
    clausiusShare: forces.clausiusShare,
    relativeError: relative(forces.potentialError, forces.potentialEnergy),
    relativeClausiusError: relative(forces.clausiusError, forces.clausius),
    softened: forces.softening.kernel !== 'none',
  };
}

/** Effective bodies, (Σm)²/Σm², below which an expansion for large N says nothing. */
export const FEWEST_FOR_NOISE = 10;

export interface BalanceResult {
  readonly balance: Balance;
  readonly frame: SetFrame;
  readonly sums: SetSums;
}

/**
 * Balance of a set: T about its own mean velocity, U and W of its own field, ratios and noise.
 *
 * The noise is σ = Q √(Σ m² [v²/⟨v²⟩ − 2φ/⟨φ⟩ + 1]²)/M with mass-weighted means; with softening Q is
 * 2T/|W| and w stands for φ. Source: first-order expansion, docs/methods.md; 0.804/√N for a Plummer sphere.
 */
export async function balanceOf(set: BodySet, field: SetField, crew: Crew): Promise<BalanceResult> {
  const frame = await frameOf(set, crew);
  const sums = await sumsOf(set, frame, field.potential, field.clausiusShare, crew);
  const potential = sums.potentialTwice / 2;
  const clausius = sums.clausiusTwice / 2;
  const ratio = (energy: number) => (energy < 0 ? (2 * sums.kinetic) / -energy : null);
  const virialRatio = ratio(potential);
  const clausiusRatio = ratio(clausius);
  const depthTwice = field.softened ? sums.clausiusTwice : sums.potentialTwice;
  const leading = field.softened ? clausiusRatio : virialRatio;
  let noise: number | null = null;
  const effective = (frame.mass * frame.mass) / frame.squaredMass;
  if (leading !== null && leading > 0 && effective >= FEWEST_FOR_NOISE) {
    const depth = field.softened ? field.clausiusShare : field.potential;
    const sum = await noiseSum(set, frame, sums.kinetic, depth, depthTwice, crew);
    noise = (leading * Math.sqrt(sum)) / frame.mass;
  }
  return {
    frame,
    sums,
    balance: {
      particles: frame.particles,
      mass: frame.mass,
      kinetic: sums.kinetic,
      potential,
      potentialError: field.relativeError * Math.abs(potential),
      clausius,
      clausiusError: field.relativeClausiusError * Math.abs(clausius),
      energy: sums.kinetic + potential,
      virialRatio,
      clausiusRatio,
      noise,
    },
  };
}
