/** Dispersions and energies of a density in a well, by quadrature. */
import type { Profile, Well } from './model.ts';
import { integratePanel, integratePanels } from './quadrature.ts';

/** Panels in ln r over which the profiles are smooth. */
const PANEL_LENGTH = 1;

/**
 * σ_r² at r, with β = r²/(r² + r_a²): ρ_Q σ_r² = ∫ ρ_Q M/r² dr from r outwards, ρ_Q = (1 + r²/r_a²) ρ; the
 * tangential dispersion of one dimension is σ_r²/(1 + r²/r_a²).
 * Source: Jeans equation; its integrating factor for this β in Merritt 1985, AJ 90, 1027.
 */
export function radialDispersionSquared(
  profile: Profile,
  well: Well,
  anisotropyRadius: number,
  r: number,
): number {
  if (r >= profile.edge) return 0;
  const inverse2 = anisotropyRadius ** -2;
  const logHere = profile.logDensity(r) + Math.log1p(r * r * inverse2);
  const integrand = (x: number): number => {
    const at = r * Math.exp(x);
    const density = Math.exp(profile.logDensity(at) + Math.log1p(at * at * inverse2) - logHere);
    return (density * well.enclosedMass(at)) / at;
  };
  const reach = Math.log(profile.edge / r);
  if (reach < Infinity) return integratePanels(integrand, 0, reach, PANEL_LENGTH);
  const bends = Math.max(0, Math.log(Math.max(...well.scales, ...profile.scales) / r) + 2);
  return (
    (bends > 0 ? integratePanels(integrand, 0, bends, PANEL_LENGTH) : 0) +
    integratePanels(integrand, bends, Infinity, PANEL_LENGTH)
  );
}

/** Innermost mass fraction that the integrals over the density begin with. */
const FIRST_FRACTION = 1e-14;

/**
 * W = −∫ (M/r) ρ 4πr² dr of the profile's mass inside `end`, with M the mass of the whole well: the virial
 * of the forces on it. For a profile in its own well this is U.
 * @returns −Infinity if it diverges at the centre
 */
export function clausiusInside(profile: Profile, well: Well, end: number): number {
  const integrand = (x: number): number => {
    const r = Math.exp(x);
    return 4 * Math.PI * r * r * profile.density(r) * well.enclosedMass(r);
  };
  const limit = Math.log(Math.min(end, profile.edge));
  const begin = Math.min(Math.log(profile.radiusOfMass(FIRST_FRACTION)), limit - 2 * PANEL_LENGTH);
  // A power law at the centre: its part inside `begin` is that of a geometric series.
  const power = Math.log(integrand(begin + 1e-3) / integrand(begin)) / 1e-3;
  if (!(power > 1e-6)) return -Infinity;
  const inner = integrand(begin) / power;
  const bends = Math.log(Math.max(...well.scales, ...profile.scales)) + 2;
  const middle = Math.min(Math.max(bends, begin), limit - PANEL_LENGTH);
  const outer =
    limit === Infinity
      ? integratePanels(integrand, middle, Infinity, PANEL_LENGTH)
      : integratePanels(integrand, middle, limit - PANEL_LENGTH, PANEL_LENGTH) +
        // ln r = limit − w² serves a density that ends like a root of the distance from its edge.
        integratePanel((w) => 2 * w * integrand(limit - w * w), 0, Math.sqrt(PANEL_LENGTH));
  return -(inner + integratePanels(integrand, begin, middle, PANEL_LENGTH) + outer);
}
