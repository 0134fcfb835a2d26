/** Radii and times that follow from masses and energies in closed form. */

/** r_v = G M²/(2|U|) [length]; null without binding. Source: Heggie & Mathieu 1986 (from memory). */
export function virialRadius(gravity: number, mass: number, potential: number): number | null {
  return potential < 0 ? (gravity * mass * mass) / (2 * -potential) : null;
}

/** Crossing time 2√2 (r_v³/GM)^½ [time]. Source: Heggie & Mathieu 1986 (from memory). */
export function crossingTime(gravity: number, mass: number, virial: number | null): number | null {
  return virial === null ? null : 2 * Math.SQRT2 * Math.sqrt(virial ** 3 / (gravity * mass));
}

export interface CoulombInput {
  readonly particles: number;
  readonly coulombFactor: number;
  readonly gravity: number;
  readonly mass: number;
  readonly halfMassRadius: number;
  /** Mean square velocity about the mean velocity. */
  readonly meanSquareVelocity: number;
  /** Plummer-equivalent softening length. */
  readonly softening: number;
}

/** Least γN for which two-body relaxation by many weak encounters is a meaningful idea. */
export const LEAST_LAMBDA = 3;

/**
 * Coulomb logarithm ln Λ with Λ = γN, or r_h/ε where that is smaller and ε exceeds the impact
 * parameter b_90 = 2Gm/⟨v²⟩ of a right-angle deflection.
 * @returns null if Λ ≤ 3: not a relaxation regime
 * Source: Λ = γN of Giersz & Heggie 1994; the softened form is common practice.
 */
export function coulombLogarithm(input: CoulombInput): number | null {
  const { particles, coulombFactor, gravity, mass, halfMassRadius, softening } = input;
  let lambda = coulombFactor * particles;
  const b90 = (2 * gravity * (mass / particles)) / input.meanSquareVelocity;
  if (softening > b90) lambda = Math.min(lambda, halfMassRadius / softening);
  return lambda > LEAST_LAMBDA ? Math.log(lambda) : null;
}

/**
 * Half-mass relaxation time 0.138 N^½ r_h^{3/2} / (m^½ G^½ ln Λ), m = M/N [time].
 * Source: Spitzer & Hart 1971, ApJ 164, 399 (0.06 with log10); Spitzer 1987, eq. 2-63 (from memory).
 */
export function halfMassRelaxationTime(
  particles: number,
  mass: number,
  gravity: number,
  halfMassRadius: number,
  logarithm: number | null,
): number | null {
  if (logarithm === null || !(mass > 0)) return null;
  const perBody = mass / particles;
  return (
    (0.138 * Math.sqrt(particles) * halfMassRadius ** 1.5) /
    (Math.sqrt(perBody * gravity) * logarithm)
  );
}

/**
 * Local relaxation time 0.34 σ³/(G² m ρ ln Λ) [time], with the one-dimensional dispersion σ and the mass
 * m of the bodies that are met. Source: Binney & Tremaine 2008, eq. 7.106 (from memory).
 */
export function localRelaxationTime(
  dispersion: number,
  perBody: number,
  density: number,
  gravity: number,
  logarithm: number,
): number {
  return (0.34 * dispersion ** 3) / (gravity * gravity * perBody * density * logarithm);
}
