/**
 * The Hernquist (1990) model with G = M = a = 1: closed forms and an exact isotropic sampler.
 *
 * Source: Hernquist 1990, ApJ 356, 359 (mass, potential, dispersion, distribution function).
 */
import { dehnenProfile } from './dehnen.ts';
import { requireMassFraction, type SampledModel } from './sampling.ts';

/**
 * Sum of τⁿ/n from n = 5 for τ = 1/(1+r), which is −ln(1−τ) − τ − τ²/2 − τ³/3 − τ⁴/4. The closed form loses
 * digits as τ⁵, so the outskirts (small τ) take the series itself; 1 − τ would lose them at the centre.
 */
function logarithmTail(r: number): number {
  const tau = 1 / (1 + r);
  if (tau > 0.25) {
    return Math.log1p(1 / r) - tau * (1 + tau * (1 / 2 + tau * (1 / 3 + tau / 4)));
  }
  let power = tau ** 5;
  let sum = 0;
  for (let n = 5; power > 1e-18 * sum; n++) {
    sum += power / n;
    power *= tau;
  }
  return sum;
}

/**
 * B(θ) for 0 ≤ θ ≤ π/2, to a relative 1e-12. The distribution function is f(E) ∝ (1 − q²)^(−5/2) B with q²
 * = −E = sin²θ and B = 3 asin q + q (1−q²)^½ (1−2q²) (8q⁴−8q²−3) = 3θ − sin 4θ + (sin 8θ)/8 = 8 ∫ sin⁴ 2θ
 * dθ, which grows with θ all the way, from (128/5) θ⁵ to 3π/2.
 */
export function energyBracket(theta: number): number {
  if (theta > 0.05) return 3 * theta - Math.sin(4 * theta) + Math.sin(8 * theta) / 8;
  // Down here the closed form loses nine digits and more; the first term left out is 1e-14 of the sum.
  const s = theta * theta;
  const series =
    128 / 5 - s * (1024 / 21 - s * (2048 / 45 - s * (278528 / 10395 - (s * 2031616) / 184275)));
  return s * s * theta * series;
}

export const hernquist: SampledModel = {
  name: 'hernquist',
  edge: Infinity,
  profile: dehnenProfile(1),
  potentialEnergy: -1 / 6,

  enclosedMass(r) {
    const ratio = r / (1 + r);
    return ratio * ratio;
  },

  radiusOfMass(f) {
    requireMassFraction(f);
    const root = Math.sqrt(f);
    // √f / (1 − √f), without loss of digits as f goes to 1.
    return (root * (1 + root)) / (1 - f);
  },

  density(r) {
    return 1 / (2 * Math.PI * r * (1 + r) ** 3);
  },

  potential(r) {
    return -1 / (1 + r);
  },

  /** r (1+r)³ times the sum of τⁿ/n from n = 5, τ = 1/(1+r): equation 10 of the paper, rearranged. */
  radialDispersionSquared(r) {
    return r === 0 ? 0 : r * (1 + r) ** 3 * logarithmTail(r);
  },

  /**
   * Rejection against v² (s + v²/2)^(−5/2), s = r/(1+r), which has a closed inverse and follows the
   * distribution down to the innermost body; what is left to reject is B, between 0 and B at v = 0.
   */
  drawSpeed(r, random) {
    const psi = 1 / (1 + r);
    const s = r * psi;
    const bound = energyBracket(Math.atan2(Math.sqrt(psi), Math.sqrt(s)));
    for (;;) {
      const c = Math.cbrt(random.uniform());
      // q² = below / (s + below) and 1 − q² = s / (s + below): no difference of nearly equal numbers.
      const below = psi * (1 - c * c);
      const theta = Math.atan2(Math.sqrt(below), Math.sqrt(s));
      if (bound * random.uniform() < energyBracket(theta)) {
        return c * Math.sqrt((2 * s * psi) / (s + below));
      }
    }
  },
};
