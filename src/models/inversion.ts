/**
 * The distribution function of a density in a spherical well, by quadrature.
 *
 * Velocities are isotropic (Eddington 1916, MNRAS 76, 572) or become radial outwards (Osipkov 1979,
 * Sov. Astron. Lett. 5, 42; Merritt 1985, AJ 90, 1027): f depends on Q = ψ(r) − v²/2 − L²/(2 r_a²)
 * alone, where ψ = −φ, and the anisotropy is β = r²/(r² + r_a²). With ρ_Q = (1 + r²/r_a²) ρ,
 *
 *   f(Q) = 1/(√8 π²) ∫ d²ρ_Q/dψ² dψ/√(Q − ψ)    from ψ at the edge to Q
 *
 * (the boundary term vanishes for the profiles here). Everything is told by radius instead of energy:
 * Q stands for the radius r_Q with ψ(r_Q) = Q, beyond which no body of this Q comes. In ln r the
 * profiles are power laws but for their bends, at any depth.
 */
import type { Profile, Well } from './model.ts';
import { gaussLegendre, integratePanel, integratePanels } from './quadrature.ts';

const LOG_FACTOR = -Math.log(Math.sqrt(8) * Math.PI * Math.PI);
const FIRST_PANEL = gaussLegendre(20);
const PANEL_LENGTH = 2;

/**
 * ln f at r_Q = r, for a mass of 1 in all.
 * @param well - the well of all mass, in the units of the profile
 * @param anisotropyRadius - r_a; Infinity for isotropic velocities
 * @returns NaN where f is negative: no such equilibrium exists
 */
export function logDistribution(
  profile: Profile,
  well: Well,
  anisotropyRadius: number,
  r: number,
): number {
  const inverse2 = anisotropyRadius ** -2;
  const logHere = profile.logDensity(r) + Math.log1p(r * r * inverse2);
  const circularHere = well.enclosedMass(r) / r;

  // The integrand over x = ln(r'/r), in units of ρ_Q/v_c³ at r, v_c² = M/r:
  // d²ρ_Q/dψ² = ρ_Q/v_c⁴ (s (s + 1 − d ln M/d ln r) + ds/d ln r), s the slope of ρ_Q.
  const integrand = (x: number): number => {
    const at = r * Math.exp(x);
    const circular = well.enclosedMass(at) / at;
    const k = at * at * inverse2;
    const share = k / (1 + k);
    const slope = profile.logSlope(at) + 2 * share;
    const curvature = profile.logCurvature(at) + 4 * share * (1 - share);
    const growth = well.massSlope(at);
    const density = Math.exp(profile.logDensity(at) + Math.log1p(k) - logHere);
    const root = Math.sqrt(well.potentialDrop(r, x) / circularHere);
    return (density * (slope * (slope + 1 - growth) + curvature) * circularHere) / circular / root;
  };

  const reach = Math.log(profile.edge / r);
  const near = Math.min(1, reach / 2);
  // x = w² takes the root away at x = 0.
  const width = Math.sqrt(near);
  let sum = 0;
  for (let k = 0; k < FIRST_PANEL.points.length; k++) {
    const w = width * FIRST_PANEL.points[k];
    sum += FIRST_PANEL.weights[k] * width * 2 * w * integrand(w * w);
  }
  if (reach === Infinity) {
    const bends = Math.max(near, Math.log(Math.max(...well.scales, ...profile.scales) / r) + 2);
    sum += integratePanels(integrand, near, bends, PANEL_LENGTH);
    sum += integratePanels(integrand, bends, Infinity, PANEL_LENGTH);
  } else {
    // x = reach − w² serves a density that ends like a root of the distance from its edge.
    const end = Math.max(near, reach - 1);
    sum += integratePanels(integrand, near, end, PANEL_LENGTH);
    sum += integratePanel((w) => 2 * w * integrand(reach - w * w), 0, Math.sqrt(reach - end));
  }
  return Math.log(sum) + logHere - 1.5 * Math.log(circularHere) + LOG_FACTOR;
}

/** Radii at which {@link isEquilibrium} looks, as powers of ten about the scale radius. */
const PROBES = { from: -5, to: 5, step: 0.1 };

/** Whether f is positive at all probes. */
function isEquilibrium(profile: Profile, well: Well, anisotropyRadius: number): boolean {
  for (let power = PROBES.from; power <= PROBES.to; power += PROBES.step) {
    const r = profile.scales[0] * 10 ** power;
    if (r >= profile.edge) break;
    if (Number.isNaN(logDistribution(profile, well, anisotropyRadius, r))) return false;
  }
  return true;
}

/**
 * Least r_a that leaves f positive, by bisection to 0.1 %, rounded up; null if even isotropic
 * velocities do not.
 */
export function leastAnisotropyRadius(profile: Profile, well: Well): number | null {
  if (!isEquilibrium(profile, well, Infinity)) return null;
  let low = -4 * Math.LN10;
  let high = 4 * Math.LN10;
  while (high - low > 1e-3) {
    const middle = (low + high) / 2;
    if (isEquilibrium(profile, well, profile.scales[0] * Math.exp(middle))) high = middle;
    else low = middle;
  }
  return profile.scales[0] * Math.exp(high);
}

/** f is negative at the Q of this radius: the density has no such equilibrium. */
export class NegativeDistribution extends Error {
  readonly radius: number;
  constructor(radius: number) {
    super(`the distribution function is negative at the energy of r = ${radius}`);
    this.radius = radius;
  }
}
