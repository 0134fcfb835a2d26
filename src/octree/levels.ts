/** The ladder of accuracies that the engine climbs to keep its promise, and what each costs. */

/** Number of bodies that {@link Level.reaches} is stated for. */
const REACHES_AT = 1e5;

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
  /** Measured error of U over |U| that is usual at {@link REACHES_AT} bodies: to choose the first level. */
  readonly reaches: number;
}

export const LEVELS: readonly Level[] = [
  { order: 2, openingAngle: 1, tolerance: 6e-3, narrowAngle: 0.5, cost: 1500, reaches: 1.5e-4 },
  { order: 3, openingAngle: 0.95, tolerance: 2e-3, narrowAngle: 0.45, cost: 1700, reaches: 2e-5 },
  { order: 4, openingAngle: 0.95, tolerance: 1e-3, narrowAngle: 0.4, cost: 2100, reaches: 7e-6 },
  { order: 5, openingAngle: 0.9, tolerance: 2e-4, narrowAngle: 0.4, cost: 4000, reaches: 1.5e-6 },
  {
    order: 6,
    openingAngle: 0.85,
    tolerance: 2e-5,
    narrowAngle: 0.35,
    cost: 12000,
    reaches: 2.5e-7,
  },
  { order: 6, openingAngle: 0.75, tolerance: 1e-6, narrowAngle: 0.3, cost: 30000, reaches: 3e-8 },
];

/** The cheapest level that usually meets an error of U at this number of bodies. */
export function firstLevel(errorWanted: number, count: number): Level {
  // Cells shrink as bodies grow in number, and single errors with them.
  const scaled = errorWanted * Math.cbrt(count / REACHES_AT);
  return LEVELS.find((level) => level.reaches <= scaled) ?? LEVELS[LEVELS.length - 1];
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
