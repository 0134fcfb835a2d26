/**
 * The Plummer (1911) sphere with G = M = a = 1: closed forms and an exact isotropic sampler.
 *
 * Sources: Plummer 1911, MNRAS 71, 460; isotropic dispersion and distribution function in Binney &
 * Tremaine 2008, Galactic Dynamics, section 4.3; sampler of Aarseth, Hénon & Wielen 1974, A&A 37, 183.
 */
import { requireMassFraction, type SampledModel } from './sampling.ts';

/** Greatest value of q² (1 − q²)^3.5, at q² = 2/9. */
const REJECTION_BOUND = (2 / 9) * (7 / 9) ** 3.5;

export const plummer: SampledModel = {
  name: 'plummer',
  potentialEnergy: (-3 * Math.PI) / 32,

  enclosedMass(r) {
    // In this form neither a small nor a great radius over- or underflows early.
    const ratio = r / Math.hypot(1, r);
    return ratio * ratio * ratio;
  },

  radiusOfMass(f) {
    requireMassFraction(f);
    // f^(-2/3) − 1 without loss of digits as f goes to 1.
    return f === 0 ? 0 : 1 / Math.sqrt(Math.expm1((-2 / 3) * Math.log(f)));
  },

  density(r) {
    return (3 / (4 * Math.PI)) * (1 + r * r) ** -2.5;
  },

  potential(r) {
    return -1 / Math.hypot(1, r);
  },

  radialDispersionSquared(r) {
    return 1 / (6 * Math.hypot(1, r));
  },

  /** Rejection of q² (1 − q²)^3.5, q = speed over escape speed: exact, because f(E) goes as E^3.5. */
  drawSpeed(r, random) {
    for (;;) {
      const q = random.uniform();
      const rest = 1 - q * q;
      if (REJECTION_BOUND * random.uniform() < q * q * rest * rest * rest * Math.sqrt(rest)) {
        return q * Math.sqrt(2 / Math.sqrt(1 + r * r));
      }
    }
  },
};
