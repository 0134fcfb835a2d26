/**
 * The homogeneous sphere with G = M = R = 1, and bodies in it with isotropic velocities.
 *
 * No distribution function of the energy alone gives a homogeneous sphere with a sharp edge. The
 * velocities here are isotropic and satisfy the Jeans equation at every radius, σ² = (1 − r²)/2, so
 * that 2T + W = 0 and the shape is at rest at first; later the edge softens. It is in equilibrium in
 * the virial sense only. At each radius the velocities fill a ball of radius √5 σ evenly: a Gaussian of
 * the same dispersion would unbind 2 % of the bodies at the start, whereas 5σ² = (5 − 5r²)/2 never
 * exceeds the escape speed squared, 3 − r².
 *
 * Source: closed forms by Newton's theorems; Jeans equation in Binney & Tremaine 2008, section 4.8.
 */
import { requireMassFraction, type SampledModel } from './sampling.ts';

export const uniform: SampledModel = {
  name: 'uniform',
  edge: 1,
  profile: null,
  potentialEnergy: -3 / 5,

  enclosedMass(r) {
    return r < 1 ? r * r * r : 1;
  },

  radiusOfMass(f) {
    requireMassFraction(f);
    return Math.cbrt(f);
  },

  density(r) {
    return r <= 1 ? 3 / (4 * Math.PI) : 0;
  },

  potential(r) {
    return r < 1 ? (r * r - 3) / 2 : -1 / r;
  },

  radialDispersionSquared(r) {
    return r < 1 ? (1 - r * r) / 2 : 0;
  },

  drawSpeed(r, random) {
    return Math.sqrt(2.5 * Math.max(0, 1 - r * r)) * Math.cbrt(random.uniform());
  },
};
