/** The ladder of accuracies that the engine climbs to keep its promise, and what each costs. */

/** One setting of the cell–cell walk. */
export interface Level {
  readonly order: number;
  /** Cells interact if their radii sum to less than this times their distance … */
  readonly openingAngle: number;
  /** … and if the interaction's error relative to the target's potential is estimated below this. */
  readonly tolerance: number;
  /** Opening angle of the classical walk that measures this level's error. */
  readonly narrowAngle: number;
  /** Nanoseconds of one thread a body takes, roughly: to choose between levels and direct sums. */
  readonly cost: number;
  /** Relative error of U that is usually met at a million bodies: to choose the first level. */
  readonly reaches: number;
}

export const LEVELS: readonly Level[] = [
  { order: 3, openingAngle: 0.95, tolerance: 2e-3, narrowAngle: 0.4, cost: 1400, reaches: 1e-5 },
  { order: 4, openingAngle: 0.9, tolerance: 5e-4, narrowAngle: 0.35, cost: 2000, reaches: 1.5e-6 },
  { order: 5, openingAngle: 0.85, tolerance: 5e-5, narrowAngle: 0.3, cost: 4000, reaches: 2e-7 },
  { order: 6, openingAngle: 0.8, tolerance: 3e-6, narrowAngle: 0.25, cost: 9000, reaches: 2e-8 },
  { order: 8, openingAngle: 0.7, tolerance: 1e-7, narrowAngle: 0.25, cost: 25000, reaches: 1e-9 },
];

/** The cheapest level that usually meets an error of U at this number of bodies. */
export function firstLevel(errorWanted: number, count: number): Level {
  // The mean of N independent errors: fewer bodies, larger error.
  const scaled = errorWanted * Math.min(1, Math.sqrt(count / 1e6) * 3);
  return LEVELS.find((level) => level.reaches <= scaled * 1.001) ?? LEVELS[LEVELS.length - 1];
}

/** The level to try after one that missed the error wanted by a factor, or null at the top. */
export function nextLevel(level: Level, missed: number): Level | null {
  const at = LEVELS.indexOf(level);
  const wanted = level.reaches / missed;
  const rest = LEVELS.slice(at + 1);
  return rest.find((next) => next.reaches <= wanted) ?? rest[rest.length - 1] ?? null;
}

/** Rough cost of a level [ns of one thread]. */
export function treeCost(level: Level, count: number): number {
  return level.cost * count;
}
