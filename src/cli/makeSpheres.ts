/** From the command line of `make` to spheres and their encounter as the library takes them. */
import {
  UsageError,
  type ComponentOptions,
  type EncounterOptions,
  type ModelName,
  type SphereOptions,
} from '../index.ts';
import type { MakeCommandOptions } from './make.ts';
import type { GivenComponent } from './makeOptions.ts';

export type Sphere = SphereOptions;

/** Those of the keys that have a value. */
export function given<T extends object, K extends keyof T>(
  options: T,
  keys: readonly K[],
): { [key in K]?: Exclude<T[key], undefined> } {
  const found = keys.filter((key) => options[key] !== undefined);
  return Object.fromEntries(found.map((key) => [key, options[key]])) as never;
}

const OF_FIRST = [
  'scaleRadius',
  'mass',
  'masses',
  'cut',
  'name',
  'innerSlope',
  'centralPotential',
  'anisotropyRadius',
  'rotation',
] as const;

/**
 * The first sphere.
 * @throws UsageError `usage.missingOption`, `usage.value` if options that belong together do not come
 * together
 */
export function sphereOf(
  options: MakeCommandOptions & { readonly count: number; readonly model: ModelName },
): Sphere {
  const { model, count, second, binaries, semiMajorAxis, escapers, escaperSpeed } = options;
  requireOther('--semi-major-axis', semiMajorAxis, '--binaries SHARE', binaries);
  requireOther('--binaries', binaries, '--semi-major-axis LEAST,GREATEST', semiMajorAxis);
  requireOther('--escaper-speed', escaperSpeed, '--escapers SHARE', escapers);
  return {
    model,
    count,
    ...given(options, OF_FIRST),
    ...(second !== undefined && { second: secondOf(second) }),
    ...(binaries !== undefined &&
      semiMajorAxis !== undefined && {
        binaries: { share: binaries, semiMajorAxis: rangeOf(semiMajorAxis) },
      }),
    ...(escapers !== undefined && {
      escapers: { share: escapers, ...(escaperSpeed !== undefined && { speed: escaperSpeed }) },
    }),
  };
}

function rangeOf(lengths: readonly number[]): readonly [number, number] {
  if (lengths.length === 2) return [lengths[0], lengths[1]];
  throw new UsageError(
    'usage.value',
    `--semi-major-axis "${lengths.join(',')}" is not two lengths separated by a comma`,
    'Write it as 1e-5,1e-3.',
  );
}

function secondOf(component: GivenComponent): ComponentOptions {
  const { model, count } = component;
  if (model !== undefined && count !== undefined) return { ...component, model, count };
  throw new UsageError(
    'usage.missingOption',
    `--second lacks ${model === undefined ? 'model' : 'count'}`,
    'For instance: --second model=dehnen,inner-slope=0.5,count=20000,mass=9,scale-radius=4',
  );
}

/**
 * The second sphere and the orbit. What the companion is not given it has from the first sphere; its
 * bodies have the same mean mass as there unless their number is given.
 */
export function meetingOf(
  options: MakeCommandOptions,
  sphere: Sphere,
): { readonly companion?: SphereOptions; readonly encounter?: EncounterOptions } {
  const orbit = given(options, [
    'separation',
    'pericentre',
    'impactParameter',
    'relativeVelocity',
  ] as const);
  // The library tells what is missing of the two.
  const encounter = Object.keys(orbit).length > 0 ? { encounter: orbit as EncounterOptions } : {};
  const { companion: asked } = options;
  if (asked === undefined) return encounter;
  const own = asked === true ? {} : asked;
  const { innerSlope, centralPotential, name, second, mass = 1, count, ...rest } = sphere;
  const isLike = own.model === undefined || own.model === sphere.model;
  const companion = {
    ...rest,
    ...(isLike && given({ innerSlope, centralPotential }, ['innerSlope', 'centralPotential'])),
    ...(second !== undefined && { second: withoutName(second) }),
    mass,
    count: Math.max(1, Math.round((count * (own.mass ?? mass)) / mass)),
    ...own,
  };
  void name; // Names belong to one sphere.
  return { ...encounter, companion };
}

function withoutName({ name, ...rest }: ComponentOptions): ComponentOptions {
  void name;
  return rest;
}

function requireOther(option: string, value: unknown, other: string, otherValue: unknown): void {
  if (value === undefined || otherValue !== undefined) return;
  throw new UsageError('usage.missingOption', `${option} needs ${other}`, `Add ${other}.`);
}
