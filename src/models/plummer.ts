/**
 * The Plummer (1911) sphere with G = M = a = 1: closed forms and an exact isotropic sampler.
 *
 * Sources: Plummer 1911, MNRAS 71, 460; isotropic dispersion and distribution function in Binney &
 * Tremaine 2008, Galactic Dynamics, section 4.3; sampler of Aarseth, Hénon & Wielen 1974, A&A 37, 183.
 */
import type { Profile } from './model.ts';
import { requireMassFraction, type SampledModel } from './sampling.ts';

/** Greatest value of q² (1 − q²)^3.5, at q² = 2/9. */
const REJECTION_BOUND = (2 / 9) * (7 / 9) ** 3.5;

const LOG_CENTRAL_DENSITY = Math.log(3 / (4 * Math.PI));

/** The same closed forms as the inversion for other velocities needs them. */
const profile: Profile = {
  edge: Infinity,
  scales: [1],
  enclosedMass: (r) => plummer.enclosedMass(r),
  massSlope: (r) => 3 / (1 + r * r),
  radiusOfMass: (f) => plummer.radiusOfMass(f),
  density: (r) => plummer.density(r),
  potential: (r) => plummer.potential(r),
  logDensity: (r) => LOG_CENTRAL_DENSITY - 2.5 * Math.log1p(r * r),
  logSlope: (r) => (-5 * r * r) / (1 + r * r),
  logCurvature: (r) => (-10 * (r / (1 + r * r)) * r) / (1 + r * r),
  potentialDrop(r, x) {
    // 1/a − 1/b with a² = 1 + r², b² = 1 + r² e^(2x): (b² − a²)/(ab (a + b)).
    const a = Math.hypot(1, r);
    const b = Math.hypot(1, r * Math.exp(x));
    return ((r / a) * (r / b) * Math.expm1(2 * x)) / (a + b);
  },
  depthBelow(r) {
    const a = Math.hypot(1, r);
    return ((r / a) * r) / (1 + a);
  },
};

export const plummer: SampledModel = {
  name: 'plummer',
  edge: Infinity,
  profile,
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
