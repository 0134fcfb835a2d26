/** What a model has by its formulas, for comparison with what is measured on drawn bodies. */
import { wellOf } from './composite.ts';
import { clausiusInside, radialDispersionSquared } from './jeans.ts';
import { requirePositive, type SphereOptions } from './options.ts';
import { planSphere, profilesInUnitsOf, type SpherePlan } from './plan.ts';

/** Figures of a sphere in the limit of many bodies, without binaries, escapers and companion. */
export interface ModelFigures {
  /** Mass inside the cut [mass]. */
  readonly mass: number;
  /** U of this mass, which is W; null if it diverges at the centre [mass · velocity²]. */
  readonly potential: number | null;
  /** T, from the virial theorem with the pressure at the cut; null as U [mass · velocity²]. */
  readonly kinetic: number | null;
  /** 2T/|U|: 1 without a cut. */
  readonly virialRatio: number | null;
  /** [length] */
  readonly halfMassRadius: number;
  /** G M²/(2|U|) [length]. */
  readonly virialRadius: number | null;
  /** Radius that holds all bodies: the cut or the edge of the model; null without either [length]. */
  readonly edge: number | null;
}

/**
 * @param options - of a sphere; `count`, binaries, escapers and the masses of bodies play no part
 * @param gravity - G in the units of the options
 * @throws UsageError as `makeModel`
 */
export function modelFigures(options: SphereOptions, gravity = 1): ModelFigures {
  requirePositive('gravity', gravity);
  return figuresOf(planSphere(options), gravity);
}

export function figuresOf(plan: SpherePlan, gravity: number): ModelFigures {
  const { components, mass } = plan;
  const edges = components.map(({ model, scaleRadius }) => model.edge * scaleRadius);
  const edge = Math.min(plan.cut, Math.max(...edges));
  const enclosed = (r: number): number =>
    components.reduce(
      (sum, { model, scaleRadius, wholeMass }) =>
        sum + wholeMass * model.enclosedMass(r / scaleRadius),
      0,
    );
  const { clausius, surface } = balanceOf(plan, edge);
  const isFinite = clausius > -Infinity;
  const potential = gravity * clausius;
  return {
    mass,
    potential: isFinite ? potential : null,
    kinetic: isFinite ? (gravity * (surface - clausius)) / 2 : null,
    virialRatio: isFinite ? 1 - surface / clausius : null,
    halfMassRadius: radiusWith(enclosed, mass / 2, components[0].scaleRadius),
    virialRadius: isFinite ? (mass * mass) / (-2 * clausius) : null,
    edge: edge < Infinity ? edge : null,
  };
}

/**
 * W and the surface term S = 4πR³ρσ_r² of the mass inside R, in units of G = 1, from 2T + W − S = 0.
 * Source: Binney & Tremaine 2008, section 4.8.3 (from memory); S is 0 without a cut.
 */
function balanceOf(
  { components, cut }: SpherePlan,
  end: number,
): { readonly clausius: number; readonly surface: number } {
  const { scaleRadius: length, wholeMass: unit, model } = components[0];
  const energy = (unit * unit) / length;
  const R = end / length;
  const shell = (density: number, dispersion: number): number =>
    cut === Infinity || density === 0 ? 0 : 4 * Math.PI * R ** 3 * density * dispersion;
  if (model.profile === null) {
    return {
      clausius: energy * model.potentialEnergy * Math.min(1, R) ** 5,
      surface: energy * shell(model.density(R), model.radialDispersionSquared(R)),
    };
  }
  const profiles = profilesInUnitsOf(
    0,
    components.map(({ options }) => options),
    components.map((component) => component.model),
  );
  const well = wellOf(profiles);
  let clausius = 0;
  let surface = 0;
  profiles.forEach((profile, k) => {
    const ra = (components[k].options.anisotropyRadius ?? Infinity) / length;
    clausius += clausiusInside(profile, well, R);
    if (cut < profile.edge * length) {
      surface += shell(profile.density(R), radialDispersionSquared(profile, well, ra, R));
    }
  });
  return { clausius: energy * clausius, surface: energy * surface };
}

/** The radius that holds `wanted`, by bisection of ln r to the last digit. */
function radiusWith(enclosed: (r: number) => number, wanted: number, start: number): number {
  let low = Math.log(start);
  let high = low;
  while (enclosed(Math.exp(low)) > wanted) low -= 4;
  while (enclosed(Math.exp(high)) < wanted) high += 4;
  for (let round = 0; round < 60; round++) {
    const middle = (low + high) / 2;
    if (enclosed(Math.exp(middle)) < wanted) low = middle;
    else high = middle;
  }
  return Math.exp((low + high) / 2);
}
