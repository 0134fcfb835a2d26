/** From options to spheres that can be drawn: models, wells, counts, with all checks done. */
import { UsageError } from '../errors.ts';
import type { Random } from '../numerics/random.ts';
import { scaledProfile, wellOf } from './composite.ts';
import { dehnen } from './dehnen.ts';
import { DistributionFunction, LEAST_RADIUS } from './distribution.ts';
import { hernquist } from './hernquist.ts';
import { leastAnisotropyRadius, NegativeDistribution } from './inversion.ts';
import { king } from './king.ts';
import type { Profile, Well } from './model.ts';
import {
  optionError,
  optionName,
  requireComponent,
  requireNotNegative,
  requirePositive,
  requireShare,
  type ComponentOptions,
  type SphereOptions,
} from './options.ts';
import { plummer } from './plummer.ts';
import type { BodySource, SampledModel } from './sampling.ts';
import { uniform } from './uniform.ts';

/** The models that have no parameter besides mass and scale, in units of G = M = a = 1. */
export const MODELS = { plummer, hernquist, jaffe: dehnen(2, 'jaffe'), uniform } as const;

export interface ComponentPlan {
  readonly options: ComponentOptions;
  readonly name: string;
  readonly model: SampledModel;
  readonly scaleRadius: number;
  /** Mass before the cut, and the fraction of it inside. */
  readonly wholeMass: number;
  readonly massFraction: number;
  /**
   * Radii and speeds in units of this component alone: G = M = a = 1. The first call inverts for the
   * distribution function, where that is needed. @throws UsageError `usage.distributionFunction`
   */
  source(): BodySource;
}

export interface SpherePlan {
  readonly components: readonly ComponentPlan[];
  /** Radius beyond which nothing is drawn [length]; Infinity without a cut. */
  readonly cut: number;
  /** Bodies of all components. */
  readonly count: number;
  readonly mass: number;
  /** Binaries of the first component, two bodies each; they are its first bodies. */
  readonly pairs: number;
  /** Range of semi-major axes of the pairs [length]. */
  readonly semiMajorAxis: readonly [number, number];
  /** Escapers of the first component: its last bodies. */
  readonly escapers: number;
  /** Their speed at infinity [velocity]. */
  readonly escaperSpeed: number | undefined;
}

/** Names of components that have none of their own: of the first sphere, of its companion. */
const DEFAULT_NAMES = [
  ['first', 'second'],
  ['companion', 'companion second'],
] as const;

/** @param options - checked already; @returns the model in units of G = M = a = 1 */
export function modelOf({ model, innerSlope, centralPotential }: ComponentOptions): SampledModel {
  if (model === 'dehnen') return dehnen(innerSlope ?? 1);
  if (model === 'king') return king(centralPotential ?? 6);
  return MODELS[model];
}

/**
 * @param owner - `companion.` for the second of two spheres
 * @throws UsageError `usage.model`, `usage.modelOption`, `usage.massRange`
 */
export function planSphere(options: SphereOptions, owner = ''): SpherePlan {
  const given = [options, ...(options.second === undefined ? [] : [options.second])];
  const prefixes = [owner, `${owner}second.`];
  given.forEach((component, k) => {
    requireComponent(component, prefixes[k]);
  });
  const cut = options.cut ?? Infinity;
  requirePositive(`${owner}cut`, options.cut);
  requireRatios(options, owner);
  const models = given.map(modelOf);
  const components = given.map((component, k): ComponentPlan => {
    const { scaleRadius = 1, mass = 1, name } = component;
    let source: BodySource | undefined;
    return {
      options: component,
      name: name ?? DEFAULT_NAMES[owner === '' ? 0 : 1][k],
      model: models[k],
      scaleRadius,
      wholeMass: mass,
      massFraction: cut === Infinity ? 1 : models[k].enclosedMass(cut / scaleRadius),
      source: () => (source ??= sourceOf(given, models, k, { prefix: prefixes[k], owner, cut })),
    };
  });
  return {
    components,
    cut,
    count: given.reduce((sum, { count }) => sum + count, 0),
    mass: components.reduce((sum, part) => sum + part.wholeMass * part.massFraction, 0),
    ...planExtras(options, owner),
  };
}

/** How far apart two lengths of one sphere may be: the inversion resolves all that lies between. */
const MOST_RATIO = 1e10;
/** The same for masses: their powers must stay far inside the range of doubles. */
const MOST_MASS_RATIO = 1e30;

/** @throws UsageError `usage.modelOption` if lengths or masses of a sphere are too far apart */
function requireRatios(options: SphereOptions, owner: string): void {
  const { scaleRadius: first = 1, mass: firstMass = 1, second } = options;
  const components = second === undefined ? [options] : [options, second];
  const massRatio = (second?.mass ?? 1) / (second === undefined ? 1 : firstMass);
  if (!(massRatio >= 1 / MOST_MASS_RATIO && massRatio <= MOST_MASS_RATIO)) {
    const expected = `within a factor of ${MOST_MASS_RATIO} of ${firstMass}, the mass of the first component`;
    throw optionError(`${owner}second.mass`, second?.mass ?? 1, expected);
  }
  components.forEach(({ scaleRadius = 1, anisotropyRadius = Infinity }, k) => {
    const prefix = k === 0 ? owner : `${owner}second.`;
    const ratio = scaleRadius / first;
    if (!(ratio >= 1 / MOST_RATIO && ratio <= MOST_RATIO)) {
      const expected = `within a factor of ${MOST_RATIO} of ${first}, the scale radius of the first component`;
      throw optionError(`${prefix}scaleRadius`, scaleRadius, expected);
    }
    if (!(anisotropyRadius >= scaleRadius / MOST_RATIO)) {
      const expected = `at least ${scaleRadius / MOST_RATIO}, the scale radius over ${MOST_RATIO}`;
      throw optionError(`${prefix}anisotropyRadius`, anisotropyRadius, expected);
    }
  });
}

function planExtras(
  { count, binaries, escapers }: SphereOptions,
  owner: string,
): Pick<SpherePlan, 'pairs' | 'semiMajorAxis' | 'escapers' | 'escaperSpeed'> {
  const pairShare = binaries?.share ?? 0;
  requireShare(`${owner}binaries.share`, pairShare);
  const pairs = Math.min(Math.round((pairShare * count) / 2), Math.floor(count / 2));
  const [least, greatest] = binaries?.semiMajorAxis ?? [1, 1];
  if (!(least > 0 && greatest >= least && Number.isFinite(greatest))) {
    throw optionError(
      `${owner}binaries.semiMajorAxis`,
      `${least} to ${greatest}`,
      'two finite lengths above 0, the smaller first',
    );
  }
  const escaperShare = escapers?.share ?? 0;
  requireShare(`${owner}escapers.share`, escaperShare);
  requireNotNegative(`${owner}escapers.speed`, escapers?.speed);
  const leaving = Math.round(escaperShare * count);
  requireSome(`${owner}binaries.share`, pairShare, pairs, 'one pair', count);
  requireSome(`${owner}escapers.share`, escaperShare, leaving, 'one body', count);
  if (2 * pairs + leaving > count) {
    throw optionError(
      `${owner}escapers.share`,
      escaperShare,
      `at most what binaries leave, ${(count - 2 * pairs) / count}`,
      'Lower the share of binaries or of escapers: they are different bodies.',
    );
  }
  return {
    pairs,
    semiMajorAxis: [least, greatest],
    escapers: leaving,
    escaperSpeed: escapers?.speed,
  };
}

/** Refuses a share so small that nothing comes of it. */
function requireSome(path: string, share: number, some: number, one: string, count: number): void {
  if (share === 0 || some > 0) return;
  const remedy = 'Give a larger share or more bodies, or leave it out.';
  throw optionError(path, share, `a share that is at least ${one}; the count is ${count}`, remedy);
}

/** Profiles of all components in the units of component k. */
export function profilesInUnitsOf(
  k: number,
  given: readonly ComponentOptions[],
  models: readonly SampledModel[],
): readonly Profile[] {
  const { scaleRadius: length = 1, mass: unit = 1 } = given[k];
  return models.map(({ profile }, j) => {
    if (profile === null) throw withoutDistribution();
    const { scaleRadius = 1, mass = 1 } = given[j];
    return j === k
      ? profile
      : scaledProfile({ profile, mass: mass / unit, scaleRadius: scaleRadius / length });
  });
}

function withoutDistribution(): UsageError {
  return new UsageError(
    'usage.modelOption',
    'The model uniform has no distribution function and cannot share its potential with a second component.',
    'Take another model, or leave the second component out.',
  );
}

/** Where radii and speeds of component k come from. */
function sourceOf(
  given: readonly ComponentOptions[],
  models: readonly SampledModel[],
  k: number,
  { prefix, owner, cut }: { readonly prefix: string; readonly owner: string; readonly cut: number },
): BodySource {
  const model = models[k];
  const { scaleRadius = 1, anisotropyRadius: length = Infinity } = given[k];
  const anisotropyRadius = length / scaleRadius;
  const radiusOfMass = (f: number): number => {
    const r = model.radiusOfMass(f);
    if (r >= LEAST_RADIUS) return r;
    if (given[k].innerSlope !== undefined && cut === Infinity) {
      throw optionError(
        `${prefix}innerSlope`,
        given[k].innerSlope,
        `less steep: the model has bodies inside ${LEAST_RADIUS} scale radii`,
        'Give a smaller γ or fewer bodies.',
      );
    }
    throw optionError(
      `${owner}cut`,
      cut,
      `larger: there are bodies inside ${LEAST_RADIUS} scale radii`,
      'Give a larger cut.',
    );
  };
  const isPlain = models.length === 1 && anisotropyRadius === Infinity;
  if (isPlain) {
    return {
      radiusOfMass,
      drawSpeed: (r, random) => model.drawSpeed(r, random),
      anisotropyRadius,
    };
  }
  const profiles = profilesInUnitsOf(k, given, models);
  const distribution = invert(profiles[k], wellOf(profiles), anisotropyRadius, {
    path: `${prefix}anisotropyRadius`,
    scaleRadius,
  });
  return {
    radiusOfMass,
    drawSpeed: (r: number, random: Random) => distribution.drawSpeed(r, random),
    anisotropyRadius,
  };
}

function invert(
  profile: Profile,
  well: Well,
  anisotropyRadius: number,
  told: { readonly path: string; readonly scaleRadius: number },
): DistributionFunction {
  try {
    return new DistributionFunction(profile, well, anisotropyRadius);
  } catch (error) {
    if (!(error instanceof NegativeDistribution)) throw error;
    const at = short(error.radius * told.scaleRadius);
    const least = leastAnisotropyRadius(profile, well);
    if (least === null) {
      throw new UsageError(
        'usage.distributionFunction',
        `No equilibrium with isotropic velocities has the density of ${told.path.includes('second') ? 'the second' : 'the first'} component in the potential of both: its distribution function would be below 0 at the energy of rest at r = ${at}.`,
        'Take a model that is steeper at its centre for it, or a shallower or lighter one for the other.',
        { cause: error },
      );
    }
    throw new UsageError(
      'usage.distributionFunction',
      `The option ${optionName(told.path)} is ${short(anisotropyRadius * told.scaleRadius)}, for which the distribution function would be below 0 at the energy of rest at r = ${at}: there is no such equilibrium.`,
      `Give at least ${short(least * 1.005 * told.scaleRadius)}.`,
      { cause: error },
    );
  }
}

const short = (value: number): string => String(Number(value.toPrecision(3)));
