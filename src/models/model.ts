/** What a spherical model gives: closed forms or quadratures, and what an inversion needs of them. */

/** A spherical model with G = M = 1 and scale radius 1; lengths and velocities in those units. */
export interface SphericalModel {
  readonly name: string;
  /** Radius of its outer edge, Infinity without one. */
  readonly edge: number;
  /** Total potential energy U (negative; −Infinity if the integral diverges at the centre). */
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

/**
 * The potential ψ = −φ of a spherical mass, in a form that keeps its digits: differences near each
 * other and near the centre are given as such.
 */
export interface Well {
  /** Radius of its outer edge, Infinity without one. */
  readonly edge: number;
  /** Radii about which it bends. */
  readonly scales: readonly number[];
  enclosedMass(r: number): number;
  /** d ln M/d ln r. */
  massSlope(r: number): number;
  /** φ(r), 0 at infinity. */
  potential(r: number): number;
  /** ψ(r) − ψ(r eˣ) for x ≥ 0. */
  potentialDrop(r: number, x: number): number;
  /** ψ(0) − ψ(r); Infinity if the well has no bottom. */
  depthBelow(r: number): number;
}

/** A density profile in its own well: what the inversion for the distribution function needs. */
export interface Profile extends Well {
  radiusOfMass(f: number): number;
  density(r: number): number;
  /** ln ρ, −Infinity beyond the edge. */
  logDensity(r: number): number;
  /** d ln ρ/d ln r. */
  logSlope(r: number): number;
  /** d² ln ρ/(d ln r)². */
  logCurvature(r: number): number;
}
