/**
 * Softened pair forces.
 *
 * The length everywhere is the Plummer-equivalent ε. Plummer: potential −G m/√(r²+ε²). Spline: the
 * cubic kernel of Monaghan & Lattanzio (1985, A&A 149, 135) with support h = 2.8 ε, which has the
 * same central depth −G m/ε and is exactly Newtonian beyond h.
 */
export type SofteningKernel = 'none' | 'plummer' | 'spline';

export interface Softening {
  readonly kernel: SofteningKernel;
  /** Plummer-equivalent length ε [length]; 0 with kernel `none`. */
  readonly length: number;
}

export const NO_SOFTENING: Softening = { kernel: 'none', length: 0 };

/** Support of the spline over its Plummer-equivalent length. */
export const SPLINE_SUPPORT = 2.8;

/** Radius beyond which the force is exactly Newtonian [length]; Infinity for Plummer, 0 without softening. */
export function supportOf(softening: Softening): number {
  if (softening.kernel === 'none') return 0;
  return softening.kernel === 'plummer' ? Infinity : SPLINE_SUPPORT * softening.length;
}

/** ε² where the kernel is Plummer's, whose expansions carry it; else 0 [length²]. */
export function plummerSquare({ kernel, length }: Softening): number {
  return kernel === 'plummer' ? length * length : 0;
}

/** Distance inside which a spline's force is not Newtonian, so that cells must open; else 0 [length]. */
export function splineSupport(softening: Softening): number {
  return softening.kernel === 'spline' ? supportOf(softening) : 0;
}

/**
 * The spline's A(u): potential is G m A(u)/h at r = u h.
 * Source: the kernel of Monaghan & Lattanzio 1985, integrated; A(0) = −14/5.
 */
export function splinePotential(u: number): number {
  if (u >= 1) return -1 / u;
  const u2 = u * u;
  if (u < 0.5) return -2.8 + u2 * (16 / 3 + u2 * (-48 / 5 + u * (32 / 5)));
  return 1 / (15 * u) - 3.2 + u2 * (32 / 3 + u * (-16 + u * (48 / 5 - u * (32 / 15))));
}

/** The spline's g(u): force per unit mass is G m r g(u)/h³ at r = u h. Source as {@link splinePotential}. */
export function splineForce(u: number): number {
  if (u >= 1) return 1 / (u * u * u);
  if (u < 0.5) return 32 / 3 + u * u * (-192 / 5 + 32 * u);
  return 64 / 3 + u * (-48 + u * (192 / 5 - u * (32 / 3))) - 1 / (15 * u * u * u);
}
