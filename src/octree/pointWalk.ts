/** The classical walk over many points, by the crew: potentials where there is no body, or at bodies. */
import type { Crew, TaskModule } from '../parallel/crew.ts';
import type * as ForcesTask from './forces.task.ts';
import type { Softening } from './softening.ts';
import type { SourceTree } from './walk.ts';

const TASK: TaskModule<typeof ForcesTask> = {
  url: new URL('./forces.task.js', import.meta.url),
  load: () => import('./forces.task.ts'),
};

const POINTS_PER_JOB = 16;

export interface PointWalkOptions {
  /** Order of the source's multipoles. */
  readonly order: number;
  readonly softening: Softening;
  /** A cell is used whole if its radius is less than this times its distance. */
  readonly openingAngle: number;
}

/** Positions, and e² of each where bodies have softening lengths of their own. */
export interface Points {
  readonly x: Float64Array;
  readonly y: Float64Array;
  readonly z: Float64Array;
  readonly squares: Float64Array;
}

export interface PointSums {
  /** Two numbers a point: Σ m f(r), and the part by which the Clausius share falls short of it. */
  readonly sums: Float64Array;
  readonly interactions: number;
}

/**
 * Sums at bodies of the tree, each without itself.
 * @param places - places of the bodies in tree order
 */
export async function sumsAtBodies(
  source: SourceTree,
  places: Uint32Array,
  options: PointWalkOptions,
  crew: Crew,
): Promise<PointSums> {
  const { x, y, z, squares } = source.tree.bodies;
  const pick = (column: Float64Array) => Float64Array.from(places, (place) => column[place]);
  const points = { x: pick(x), y: pick(y), z: pick(z), squares: pick(squares) };
  return walk(source, points, places, options, crew);
}

/**
 * Potential −G Σ m f(r) at arbitrary points, which have no softening length of their own [velocity²].
 * @param points - coordinates, in the unit of length of the bodies
 */
export async function potentialAt(
  source: SourceTree,
  points: { readonly x: Float64Array; readonly y: Float64Array; readonly z: Float64Array },
  gravity: number,
  options: PointWalkOptions,
  crew: Crew,
): Promise<Float64Array> {
  const squares = new Float64Array(points.x.length);
  const { sums } = await walk(source, { ...points, squares }, null, options, crew);
  return Float64Array.from(points.x, (_, k) => -gravity * sums[2 * k]);
}

async function walk(
  source: SourceTree,
  points: Points,
  places: Uint32Array | null,
  options: PointWalkOptions,
  crew: Crew,
): Promise<PointSums> {
  const count = points.x.length;
  const sums = new Float64Array(new SharedArrayBuffer(count * 16));
  const round = { source, points, places, ...options, perJob: POINTS_PER_JOB, sums };
  const counts = await crew.run(TASK, 'walkPoints', round, Math.ceil(count / POINTS_PER_JOB));
  return { sums, interactions: counts.reduce((sum, n) => sum + n, 0) };
}
