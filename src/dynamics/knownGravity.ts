/** Unit systems by their G: which one a value of G looks like. */
import { ownUnits, type UnitsDefinition } from '../snapshot/ownUnits.ts';
import { UNIT_SYSTEMS } from '../snapshot/units.ts';

export interface KnownGravity {
  /** Words for a sentence: `the unit system pc-kms-msun`. */
  readonly words: string;
  readonly gravity: number;
  /** What to write to use it: `--units pc-kms-msun`. */
  readonly remedy: string;
}

/** Units that are in use and have no name here. */
const OTHERS: readonly UnitsDefinition[] = [
  { length: 'kpc', mass: '1e10 Msun', velocity: 'km/s' },
  { length: 'Mpc', mass: '1e10 Msun', velocity: 'km/s' },
  { length: 'pc', mass: 'Msun', time: 'Myr' },
  { length: 'kpc', mass: 'Msun', time: 'Gyr' },
  { length: 'kpc', mass: '1e10 Msun', time: 'Gyr' },
  { length: 'au', mass: 'Msun', time: 'day' },
  { length: 'cm', mass: 'g', velocity: 'cm/s' },
];

const KNOWN: readonly KnownGravity[] = [
  ...Object.values(UNIT_SYSTEMS)
    .filter(({ name }) => name !== 'henon') // The same G as natural, with one choice of scales.
    .map(({ name, gravity }) => ({
      words: `the unit system ${name}`,
      gravity,
      remedy: `--units ${name}`,
    })),
  ...OTHERS.map((definition) => {
    const { length, mass, velocity, time } = definition;
    const { gravity } = ownUnits(definition, (_key, text) => {
      throw new Error(text);
    });
    return {
      words: `units of ${length}, ${mass} and ${velocity ?? time}`,
      gravity,
      remedy: `--units FILE.json with ${JSON.stringify(definition)}`,
    };
  }),
];

/** G in SI and that of solar masses differ in their sources by so much; rounded values of G by more. */
const LEAST_TOLERANCE = 0.005;
const SIGMAS = 3;

/**
 * The known unit system whose G is nearest to a value found, or null if none agrees with it.
 * @param relativeError - 1σ of the value found, relative
 */
export function knownGravityNear(gravity: number, relativeError: number): KnownGravity | null {
  const distance = (known: KnownGravity) => Math.abs(Math.log(gravity / known.gravity));
  const nearest = KNOWN.reduce((best, one) => (distance(one) < distance(best) ? one : best));
  return distance(nearest) < Math.max(LEAST_TOLERANCE, SIGMAS * relativeError) ? nearest : null;
}
