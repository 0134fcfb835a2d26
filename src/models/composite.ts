/** Several spherical masses about one centre as one well. */
import type { Profile, Well } from './model.ts';

/** A profile with its mass and scale radius in the units of the whole. */
export interface Part {
  readonly profile: Profile;
  readonly mass: number;
  readonly scaleRadius: number;
}

/** The profile of a part in the units of the whole: mass fractions stay fractions of the part. */
export function scaledProfile({ profile, mass, scaleRadius: a }: Part): Profile {
  const depth = mass / a;
  const density = mass / a ** 3;
  const logFactor = Math.log(density);
  return {
    edge: profile.edge * a,
    scales: profile.scales.map((scale) => scale * a),
    enclosedMass: (r) => mass * profile.enclosedMass(r / a),
    massSlope: (r) => profile.massSlope(r / a),
    density: (r) => density * profile.density(r / a),
    potential: (r) => depth * profile.potential(r / a),
    potentialDrop: (r, x) => depth * profile.potentialDrop(r / a, x),
    depthBelow: (r) => depth * profile.depthBelow(r / a),
    radiusOfMass: (f) => a * profile.radiusOfMass(f),
    logDensity: (r) => logFactor + profile.logDensity(r / a),
    logSlope: (r) => profile.logSlope(r / a),
    logCurvature: (r) => profile.logCurvature(r / a),
  };
}

/** The well of all parts together. */
export function wellOf(parts: readonly Profile[]): Well {
  if (parts.length === 1) return parts[0];
  const total = (of: (part: Profile) => number): number =>
    parts.reduce((sum, part) => sum + of(part), 0);
  const enclosedMass = (r: number): number => total((part) => part.enclosedMass(r));
  return {
    edge: Math.max(...parts.map(({ edge }) => edge)),
    scales: parts.flatMap(({ scales }) => scales),
    enclosedMass,
    massSlope: (r) => total((part) => part.enclosedMass(r) * part.massSlope(r)) / enclosedMass(r),
    potential: (r) => total((part) => part.potential(r)),
    potentialDrop: (r, x) => total((part) => part.potentialDrop(r, x)),
    depthBelow: (r) => total((part) => part.depthBelow(r)),
  };
}
