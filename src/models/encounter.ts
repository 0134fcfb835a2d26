/** Two spheres on the Kepler orbit of two points with their masses. */
import { UsageError } from '../errors.ts';
import {
  optionError,
  requireNotNegative,
  requirePositive,
  type EncounterOptions,
} from './options.ts';

/** The second sphere from the first: apart along x, coming nearer along −x and passing along +y. */
export interface RelativeMotion {
  readonly separation: number;
  readonly approach: number;
  readonly sideways: number;
}

/** Room for a start that is itself the pericentre. */
const ROUNDING = 1e-12;

/**
 * @param gm - G times the mass of both spheres [length · velocity²]
 * @throws UsageError `usage.modelOption`; `usage.encounter` if no orbit has what is wanted
 */
export function startOfEncounter(options: EncounterOptions, gm: number): RelativeMotion {
  const { separation, pericentre, impactParameter, relativeVelocity = 'parabolic' } = options;
  requirePositive('encounter.separation', separation);
  if ((separation as number | undefined) === undefined) {
    throw optionError('encounter.separation', undefined, 'given for two spheres');
  }
  requireNotNegative('encounter.pericentre', pericentre);
  requireNotNegative('encounter.impactParameter', impactParameter);
  if (pericentre !== undefined && impactParameter !== undefined) {
    throw new UsageError(
      'usage.encounter',
      'Both pericentre (--pericentre) and impactParameter (--impact-parameter) are given, but either fixes the orbit.',
      'Leave one of them out.',
    );
  }
  if (relativeVelocity !== 'parabolic') {
    if (!(relativeVelocity >= 0 && Number.isFinite(relativeVelocity))) {
      const expected = 'parabolic, or a finite number of at least 0';
      throw optionError('encounter.relativeVelocity', relativeVelocity, expected);
    }
  }
  const escape2 = (2 * gm) / separation;
  const speed2 = relativeVelocity === 'parabolic' ? escape2 : relativeVelocity ** 2;
  let sideways2: number;
  if (pericentre === undefined) {
    const sine = (impactParameter ?? 0) / separation;
    if (sine > 1) {
      throw optionError(
        'encounter.impactParameter',
        impactParameter,
        `at most the separation, ${separation}`,
      );
    }
    sideways2 = speed2 * sine * sine;
  } else {
    // L² = 2p² (E + GM/p) with E = v²/2 − GM/d, over d².
    const ratio = pericentre / separation;
    sideways2 = ratio * (ratio * speed2 + escape2 * (1 - ratio));
    // The start lies no nearer than p and on an orbit that has this L, and p is not the apocentre, where
    // gravity is stronger than the centrifugal force.
    const isOnOrbit = ratio <= 1 && sideways2 <= speed2 * (1 + ROUNDING);
    if (!isOnOrbit || sideways2 * (1 + ROUNDING) < (escape2 / 2) * ratio) {
      throw unreachable(options, speed2, escape2);
    }
  }
  return {
    separation,
    approach: Math.sqrt(Math.max(0, speed2 - sideways2)),
    sideways: Math.sqrt(sideways2),
  };
}

function unreachable(
  { separation, pericentre }: EncounterOptions,
  speed2: number,
  escape2: number,
): UsageError {
  // p (2GM/d − v²) ≤ v² d below the parabolic speed, and p ≤ d.
  const most = separation * (speed2 < escape2 ? Math.min(1, speed2 / (escape2 - speed2)) : 1);
  return new UsageError(
    'usage.encounter',
    `No orbit that comes nearer from a separation of ${separation} with a speed of ${Number(Math.sqrt(speed2).toPrecision(6))} has a pericentre (--pericentre) of ${pericentre}: it is at most ${Number(most.toPrecision(6))}.`,
    'Give a smaller pericentre, or a larger separation or relative velocity.',
  );
}
