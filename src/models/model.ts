/** What an equilibrium model gives: closed forms for tests and a sampler for `make`. */

/** A spherical model with G = M = 1 and scale radius 1; lengths and velocities in those units. */
export interface SphericalModel {
  readonly name: string;
  /** Total potential energy U (negative). */
  readonly potentialEnergy: number;
  /** Fraction of the mass inside r, for r ≥ 0. */
  enclosedMass(r: number): number;
  /** Radius that holds the fraction f of the mass, 0 ≤ f < 1. */
  radiusOfMass(f: number): number;
  density(r: number): number;
  potential(r: number): number;
  /** One-dimensional dispersion squared of the isotropic model in equilibrium. */
  radialDispersionSquared(r: number): number;
}
