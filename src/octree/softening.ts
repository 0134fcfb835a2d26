/**
 * Softened pair forces.
 *
 * The length everywhere is the Plummer-equivalent ε. Plummer: potential −G m/√(r²+ε²). Spline: the
 * cubic kernel of Monaghan & Lattanzio (1985, A&A 149, 135) with support h = 2.8 ε, which has the
 * same central depth −G m/ε and is exactly Newtonian beyond h.
 *
 * Two bodies with lengths of their own take ε² = e_i² + e_j² with Plummer's kernel, and the longer of
 * both with the spline (common practice, no source).
 */
import { takeDoubles } from '../numerics/reuse.ts';

export type SofteningKernel = 'none' | 'plummer' | 'spline';

export interface Softening {
  readonly kernel: SofteningKernel;
  /** Plummer-equivalent length ε [length]; 0 with kernel `none`. */
  readonly length: number;
  /**
   * Plummer-equivalent length of each body, in input order, 0 or more [length]. If they are given,
   * the pairs are softened by them and `length` only stands for them where one number is wanted.
   */
  readonly lengths?: Float64Array | Float32Array;
}

export const NO_SOFTENING: Softening = { kernel: 'none', length: 0 };

/** Support of the spline over its Plummer-equivalent length. */
export const SPLINE_SUPPORT = 2.8;

/** Whether pairs are softened by lengths of the single bodies. */
export function isOfEach({ kernel, lengths }: Softening): boolean {
  return kernel !== 'none' && lengths !== undefined;
}

/** The softening of two bodies, by index: one length, their own if they have any. */
export function softeningOfPair(softening: Softening, i: number, j: number): Softening {
  const { kernel, lengths } = softening;
  if (kernel === 'none' || lengths === undefined) return softening;
  const length = lengthOfPair(kernel, lengths[i], lengths[j]);
  return length > 0 ? { kernel, length } : NO_SOFTENING;
}

/** The length of two bodies with lengths of their own [length]. */
export function lengthOfPair(kernel: SofteningKernel, a: number, b: number): number {
  return kernel === 'spline' ? Math.max(a, b) : Math.sqrt(a * a + b * b);
}

/** Squared lengths of the bodies, for {@link Softening.lengths} in their order. */
export function squared(lengths: Float64Array | Float32Array): Float64Array {
  const squares = takeDoubles(lengths.length);
  for (let i = 0; i < lengths.length; i++) squares[i] = lengths[i] * lengths[i];
  return squares;
}

/** Radius beyond which the force is exactly Newtonian [length]; Infinity for Plummer, 0 without softening. */
export function supportOf(softening: Softening): number {
  if (softening.kernel === 'none') return 0;
  return softening.kernel === 'plummer' ? Infinity : SPLINE_SUPPORT * softening.length;
}

/** ε² where the kernel is Plummer's with one length, whose expansions carry it; else 0 [length²]. */
export function plummerSquare({ kernel, length }: Softening): number {
  return kernel === 'plummer' ? length * length : 0;
}

/** Distance inside which a spline's force is not Newtonian, so that cells must open; else 0 [length]. */
export function splineSupport(softening: Softening): number {
  return softening.kernel === 'spline' ? supportOf(softening) : 0;
}

/** The same for two bodies or cells, of which the longer length has this square. */
export function splineSupportOf(square: number): number {
  return SPLINE_SUPPORT * Math.sqrt(square);
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
