/**
 * The models of Dehnen (1993) with G = M = a = 1: density ∝ r^−γ (1+r)^(γ−4), 0 ≤ γ < 3. γ = 1 is the
 * model of Hernquist (1990), γ = 2 that of Jaffe (1983).
 *
 * Sources: Dehnen 1993, MNRAS 265, 250; Tremaine et al. 1994, AJ 107, 634 (η = 3 − γ): mass,
 * potential, U, and the dispersion as an integral.
 */
import { DistributionFunction } from './distribution.ts';
import type { Profile } from './model.ts';
import { integratePanels } from './quadrature.ts';
import { requireMassFraction, type SampledModel } from './sampling.ts';

/** ln of r/(1+r), to full precision at both ends. */
const logRatio = (r: number): number => -Math.log1p(1 / r);

/** (e^(kt) − 1)/k, which is t for k = 0. */
const growth = (k: number, t: number): number => (k === 0 ? t : Math.expm1(k * t) / k);

/** @param slope - γ, 0 ≤ γ < 3 */
export function dehnenProfile(slope: number): Profile {
  const massPower = 3 - slope;
  const wellPower = 2 - slope;
  const logFactor = Math.log(massPower / (4 * Math.PI));
  const logDensity = (r: number): number =>
    logFactor - slope * Math.log(r) - (4 - slope) * Math.log1p(r);
  return {
    edge: Infinity,
    scales: [1],
    enclosedMass: (r) => (r === 0 ? 0 : Math.exp(massPower * logRatio(r))),
    massSlope: (r) => massPower / (1 + r),
    radiusOfMass(f) {
      requireMassFraction(f);
      const logarithm = Math.log(f) / massPower;
      // y/(1 − y) of y = f^(1/(3−γ)), without loss of digits as f goes to 1.
      return Math.exp(logarithm) / -Math.expm1(logarithm);
    },
    density: (r) => Math.exp(logDensity(r)),
    logDensity,
    logSlope: (r) => -slope - ((4 - slope) * r) / (1 + r),
    logCurvature: (r) => (-(4 - slope) * (r / (1 + r))) / (1 + r),
    // At r = 0 growth(k, −∞) is −1/k for k > 0 and −Infinity else.
    potential: (r) => growth(wellPower, r === 0 ? -Infinity : logRatio(r)),
    potentialDrop(r, x) {
      // The change of ln r/(1+r) from r to r eˣ, then of its power.
      const change =
        x < 0.5 ? -Math.log1p(Math.expm1(-x) / (1 + r)) : logRatio(r * Math.exp(x)) - logRatio(r);
      return Math.exp(wellPower * logRatio(r)) * growth(wellPower, change);
    },
    depthBelow: (r) => (wellPower > 0 ? Math.exp(wellPower * logRatio(r)) / wellPower : Infinity),
  };
}

/**
 * σ² of the isotropic model: Jeans equation with y = r/(1+r), σ² = r^γ (1+r)^(4−γ) ∫ y^(1−2γ) (1−y)⁴ dy
 * from y(r) to 1, here over ln y.
 */
function dispersionSquared(slope: number, r: number): number {
  if (r === 0) return slope === 0 ? 1 / 30 : slope < 2 ? 0 : slope === 2 ? 1 / 2 : Infinity;
  const start = logRatio(r);
  // Relative to the integrand's power at the start, which may be beyond the range of doubles.
  const integral = integratePanels(
    (t) => Math.exp((2 - 2 * slope) * (t - start)) * Math.expm1(t) ** 4,
    start,
    0,
    2,
  );
  return Math.exp((2 - slope) * start + 4 * Math.log1p(r)) * integral;
}

/** @param slope - γ, 0 ≤ γ < 3 */
export function dehnen(slope: number, name = 'dehnen'): SampledModel {
  const profile = dehnenProfile(slope);
  let distribution: DistributionFunction | undefined;
  return {
    ...profile,
    name,
    profile,
    potentialEnergy: slope < 2.5 ? -1 / (2 * (5 - 2 * slope)) : -Infinity,
    radialDispersionSquared: (r) => dispersionSquared(slope, r),
    drawSpeed(r, random) {
      distribution ??= new DistributionFunction(profile, profile);
      return distribution.drawSpeed(r, random);
    },
  };
}
