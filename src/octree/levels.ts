/** The ladder of accuracies that the engine climbs to keep its promise, and what each costs. */

/** Number of bodies that {@link Level.reaches} is stated for. */
const REACHES_AT = 1e5;
const SHRINKS_UP_TO = 1e7;

/** One setting of the cell–cell walk. */
export interface Level {
  readonly order: number;
  /** Cells interact if their radii sum to less than this times their distance … */
  readonly openingAngle: number;
  /** … and if the interaction's error relative to the target's potential is estimated below this. */
  readonly tolerance: number;
  /**
   * Opening angle of the classical walk that measures this level's error where bodies are many; null
   * where no affordable walk is tighter than the level itself, and the error is measured directly.
   */
  readonly narrowAngle: number | null;
  /** Nanoseconds of one thread a body takes, roughly: to choose between levels and direct sums. */
  readonly cost: number;
  /** Measured error of U over |U| that is usual at {@link REACHES_AT} bodies: to choose the first level. */
  readonly reaches: number;
}

export const LEVELS: readonly Level[] = [
  { order: 2, openingAngle: 1, tolerance: 6e-3, narrowAngle: 0.5, cost: 1600, reaches: 1.5e-4 },
  { order: 3, openingAngle: 0.95, tolerance: 2e-3, narrowAngle: 0.45, cost: 2100, reaches: 5e-5 },
  { order: 4, openingAngle: 1, tolerance: 2e-3, narrowAngle: 0.45, cost: 2300, reaches: 2.5e-5 },
  { order: 4, openingAngle: 0.93, tolerance: 1e-3, narrowAngle: 0.45, cost: 2700, reaches: 9e-6 },
  { order: 4, openingAngle: 0.9, tolerance: 3e-4, narrowAngle: 0.4, cost: 3500, reaches: 4.5e-6 },
  { order: 4, openingAngle: 0.85, tolerance: 1e-4, narrowAngle: 0.35, cost: 4500, reaches: 2.5e-6 },
  { order: 4, openingAngle: 0.8, tolerance: 5e-5, narrowAngle: 0.3, cost: 6000, reaches: 1.5e-6 },
  { order: 5, openingAngle: 0.85, tolerance: 5e-5, narrowAngle: null, cost: 9e3, reaches: 1e-6 },
  { order: 5, openingAngle: 0.8, tolerance: 1e-5, narrowAngle: null, cost: 14e3, reaches: 3e-7 },
  { order: 5, openingAngle: 0.75, tolerance: 3e-6, narrowAngle: null, cost: 22e3, reaches: 1e-7 },
  { order: 6, openingAngle: 0.75, tolerance: 1e-6, narrowAngle: null, cost: 50e3, reaches: 2e-8 },
  { order: 6, openingAngle: 0.65, tolerance: 1e-7, narrowAngle: null, cost: 100e3, reaches: 3e-9 },
];

/** The cheapest level that usually meets an error of U at this number of bodies. */
export function firstLevel(errorWanted: number, count: number): Level {
  // Cells shrink as bodies grow in number, and single errors with them; beyond ten million no longer.
  const scaled = errorWanted * Math.cbrt(Math.min(count, SHRINKS_UP_TO) / REACHES_AT);
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
