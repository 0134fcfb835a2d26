/**
 * The error of a tree sum, measured in the same run in two steps.
 *
 * Some thousand bodies, drawn by mass along the tree's order, are summed again by the classical walk
 * under a narrow angle; some tens of them also directly. The mean of (engine − narrow walk) plus the
 * mean of (narrow walk − direct) estimates the mean error of Σ m/r per unit mass, and so the error of
 * the total; the two sampling variances add.
 */
import { drawByMass, someOf } from './draw.ts';
import type * as ForcesTask from './forces.task.ts';
import type { Crew, TaskModule } from '../parallel/crew.ts';
import { DIRECT_SLICE, DIRECT_SUMS } from './forces.task.ts';
import type { FieldColumns } from './forces.task.ts';
import { sumsAtBodies } from './pointWalk.ts';
import type { Softening } from './softening.ts';
import type { Octree } from './tree.ts';
import type { SourceTree } from './walk.ts';

const TASK: TaskModule<typeof ForcesTask> = {
  url: new URL('./forces.task.js', import.meta.url),
  load: () => import('./forces.task.ts'),
};

/** Up to this many bodies the whole sample is summed directly: that is cheaper than the narrow walk. */
const DIRECT_UP_TO = 131_072;
const DIRECT_SAMPLE = 256;
const WALK_SAMPLE = 512;
const DIRECT_OF_WALK = 32;

/** Error of the mass-weighted mean of one sum, as a mean offset and the 1σ of its estimate. */
export interface SampledError {
  readonly offset: number;
  readonly sigma: number;
  /** Rms of the error of single bodies' sums. */
  readonly rms: number;
}

export interface ErrorSample {
  readonly phi: SampledError;
  readonly psi: SampledError;
  readonly bodies: number;
  readonly interactions: number;
}

/**
 * Measures the error of the engine's sums on a sample.
 * @param field - the engine's sums, in input order
 * @param narrowAngle - opening angle of the second walk, well below the engine's; null: direct sums only
 */
export async function sampleError(
  source: SourceTree,
  field: FieldColumns,
  order: number,
  softening: Softening,
  narrowAngle: number | null,
  crew: Crew,
): Promise<ErrorSample> {
  const count = source.tree.bodies.count;
  const openingAngle = count <= DIRECT_UP_TO ? null : narrowAngle;
  const draws = drawByMass(source.tree, openingAngle === null ? DIRECT_SAMPLE : WALK_SAMPLE);
  const { places, of } = draws;
  if (of.length === 0) {
    const none = { offset: 0, sigma: 0, rms: 0 };
    return { phi: none, psi: none, bodies: 0, interactions: 0 };
  }
  const engine = eachDraw(engineSums(source.tree, field, places), of);
  if (openingAngle === null) {
    const exact = eachDraw(await directSums(source, softening, places, crew), of);
    return {
      phi: compare(engine, exact, 0),
      psi: compare(engine, exact, 1),
      bodies: places.length,
      interactions: places.length * count,
    };
  }
  const options = { order, softening, openingAngle };
  const { sums, interactions } = await sumsAtBodies(source, places, options, crew);
  const narrow = eachDraw(sums, of);
  const some = someOf(draws, DIRECT_OF_WALK);
  const exact = eachDraw(
    await directSums(source, softening, some.draws.places, crew),
    some.draws.of,
  );
  const narrowSome = eachDraw(narrow, some.chosen);
  return {
    phi: together(compare(engine, narrow, 0), compare(narrowSome, exact, 0)),
    psi: together(compare(engine, narrow, 1), compare(narrowSome, exact, 1)),
    bodies: places.length,
    interactions: interactions + some.draws.places.length * count,
  };
}

/** Two sums a body → two a draw. */
function eachDraw(sums: Float64Array, of: Uint32Array): Float64Array {
  return Float64Array.from({ length: of.length * 2 }, (_, k) => sums[2 * of[k >> 1] + (k & 1)]);
}

function engineSums(tree: Octree, field: FieldColumns, places: Uint32Array): Float64Array {
  const sums = new Float64Array(places.length * 2);
  places.forEach((place, k) => {
    const i = tree.bodies.input[place];
    sums[2 * k] = field.phi[i];
    sums[2 * k + 1] = field.psi.length > 0 ? field.psi[i] : 0;
  });
  return sums;
}

/** Direct sums at bodies, {@link DIRECT_SUMS} numbers each. */
async function sumDirectly(
  source: SourceTree,
  softening: Softening,
  places: Uint32Array,
  force: boolean,
  crew: Crew,
): Promise<Float64Array> {
  const slices = Math.ceil(source.tree.bodies.count / DIRECT_SLICE);
  const partial = shared(places.length * slices * DIRECT_SUMS);
  const round = { source, softening, places, force, sums: partial };
  await crew.run(TASK, 'sampleDirectly', round, places.length * slices);
  const sums = new Float64Array(places.length * DIRECT_SUMS);
  for (let k = 0; k < partial.length; k++) {
    sums[DIRECT_SUMS * Math.floor(k / (DIRECT_SUMS * slices)) + (k % DIRECT_SUMS)] += partial[k];
  }
  return sums;
}

async function directSums(
  source: SourceTree,
  softening: Softening,
  places: Uint32Array,
  crew: Crew,
): Promise<Float64Array> {
  const sums = await sumDirectly(source, softening, places, false, crew);
  const two = { length: places.length * 2 };
  return Float64Array.from(two, (_, k) => sums[DIRECT_SUMS * (k >> 1) + (k & 1)]);
}

const ACCELERATION_SAMPLE = 64;

/**
 * Rms over a sample of bodies of |a − a_direct|/|a_direct|, the usual measure of force errors.
 * @param field - the engine's sums with accelerations, in input order and without G
 */
export async function sampleAccelerationError(
  source: SourceTree,
  field: FieldColumns,
  softening: Softening,
  crew: Crew,
): Promise<number> {
  const { places, of } = drawByMass(source.tree, ACCELERATION_SAMPLE);
  if (of.length === 0) return 0;
  const exact = await sumDirectly(source, softening, places, true, crew);
  const squares = Array.from(places, (place, k) => {
    const i = source.tree.bodies.input[place];
    const [ax, ay, az] = exact.subarray(DIRECT_SUMS * k + 2, DIRECT_SUMS * (k + 1));
    const size = Math.hypot(ax, ay, az);
    const error = Math.hypot(field.ax[i] - ax, field.ay[i] - ay, field.az[i] - az);
    return size > 0 ? (error / size) ** 2 : 0;
  });
  return Math.sqrt(of.reduce((sum, k) => sum + squares[k], 0) / of.length);
}

/** Mean and scatter of a − b in the given one of the two sums a body. */
function compare(a: Float64Array, b: Float64Array, which: 0 | 1): SampledError {
  const n = a.length / 2;
  let sum = 0;
  let squares = 0;
  for (let k = which; k < a.length; k += 2) {
    const d = a[k] - b[k];
    sum += d;
    squares += d * d;
  }
  const offset = sum / n;
  const variance = Math.max(0, squares / n - offset * offset) * (n / Math.max(1, n - 1));
  return { offset, sigma: Math.sqrt(variance / n), rms: Math.sqrt(squares / n) };
}

function together(first: SampledError, second: SampledError): SampledError {
  return {
    offset: first.offset + second.offset,
    sigma: Math.hypot(first.sigma, second.sigma),
    rms: first.rms,
  };
}

function shared(count: number): Float64Array {
  return new Float64Array(new SharedArrayBuffer(count * 8));
}
