/**
 * The error of a tree sum, measured in the same run in two steps.
 *
 * Some thousand bodies, drawn by mass along the tree's order, are summed again by the classical walk
 * under a narrow angle; some tens of them also directly. The mean of (engine − narrow walk) plus the
 * mean of (narrow walk − direct) estimates the mean error of Σ m/r per unit mass, and so the error of
 * the total; the two sampling variances add.
 */
import { drawByMass, someOf, type Draws } from './draw.ts';
import type * as ForcesTask from './forces.task.ts';
import type { Crew, TaskModule } from '../parallel/crew.ts';
import { DIRECT_SLICE, DIRECT_SUMS, PATHS_PER_JOB } from './forces.task.ts';
import type { FieldColumns } from './forces.task.ts';
import type { Level } from './levels.ts';
import { sumsAtBodies } from './pointWalk.ts';
import type { Softening } from './softening.ts';
import type { Octree } from './tree.ts';
import type { Acceptance, SourceTree } from './walk.ts';

const TASK: TaskModule<typeof ForcesTask> = {
  url: new URL('./forces.task.js', import.meta.url),
  load: () => import('./forces.task.ts'),
};

/** Up to this many bodies the whole sample is summed directly: that is cheaper than the narrow walk. */
const DIRECT_UP_TO = 131_072;
const DIRECT_SAMPLE = 192;
/** From this relative error of U on fewer bodies tell enough. */
const ROUGH = 5e-5;
const ROUGH_SAMPLE = 96;
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
}

const NO_ERROR: SampledError = { offset: 0, sigma: 0, rms: 0 };

/** What the engine's sums are held against; made once, it serves every level that it is good for. */
export interface Reference {
  readonly draws: Draws;
  /** Two sums a draw: by the narrow walk, or exact. */
  readonly sums: Float64Array;
  /** Setting of the narrow walk; null if the sums are exact. */
  readonly narrow: { readonly order: number; readonly openingAngle: number } | null;
  /** Error of the narrow walk, and the direct sums it was found by. */
  readonly own: { readonly phi: SampledError; readonly psi: SampledError };
  readonly exactSome: Float64Array;
  /** Those done for this reference alone. */
  readonly interactions: number;
}

/** The setting of the narrow walk that measures a level at this number of bodies; null for direct sums. */
function narrowWalkFor({ order, narrowAngle }: Level, count: number): Reference['narrow'] {
  return count <= DIRECT_UP_TO || narrowAngle === null
    ? null
    : { order, openingAngle: narrowAngle };
}

/** Whether a level can be measured against a reference that was made for another. */
export function servesLevel(reference: Reference, level: Level, count: number): boolean {
  const wanted = narrowWalkFor(level, count);
  const { narrow } = reference;
  if (narrow === null || wanted === null) return narrow === wanted;
  return narrow.order === wanted.order && narrow.openingAngle <= wanted.openingAngle;
}

/**
 * Sums a sample of the bodies anew, more exactly than the engine will or did.
 * @param source - with multipoles of the level's order
 * @param errorWanted - relative error of U: a rough one is judged by fewer bodies
 * @param previous - made for another level of the same tree: its direct sums are used again
 */
export async function makeReference(
  source: SourceTree,
  level: Level,
  softening: Softening,
  errorWanted: number,
  previous: Reference | null,
  crew: Crew,
): Promise<Reference> {
  const count = source.tree.bodies.count;
  const narrow = narrowWalkFor(level, count);
  if (narrow === null) {
    const draws = drawByMass(source.tree, errorWanted >= ROUGH ? ROUGH_SAMPLE : DIRECT_SAMPLE);
    const { places, of } = draws;
    const sums = eachDraw(await directSums(source, softening, places, crew), of);
    const interactions = places.length * count;
    return {
      draws,
      sums,
      narrow,
      own: { phi: NO_ERROR, psi: NO_ERROR },
      exactSome: sums,
      interactions,
    };
  }
  const draws = drawByMass(source.tree, WALK_SAMPLE);
  const walked = await sumsAtBodies(source, draws.places, { ...narrow, softening }, crew);
  const sums = eachDraw(walked.sums, draws.of);
  const some = someOf(draws, DIRECT_OF_WALK);
  const known = previous?.narrow ? previous.exactSome : null;
  const exactSome =
    known ?? eachDraw(await directSums(source, softening, some.draws.places, crew), some.draws.of);
  const narrowSome = eachDraw(sums, some.chosen);
  return {
    draws,
    sums,
    narrow,
    own: { phi: compare(narrowSome, exactSome, 0), psi: compare(narrowSome, exactSome, 1) },
    exactSome,
    interactions: walked.interactions + (known ? 0 : some.draws.places.length * count),
  };
}

/** The error of the engine's sums, in input order. */
export function sampleError(
  { draws, sums, own }: Reference,
  tree: Octree,
  field: FieldColumns,
): ErrorSample {
  const engine = eachDraw(engineSums(tree, field, draws.places), draws.of);
  return {
    phi: together(compare(engine, sums, 0), own.phi),
    psi: together(compare(engine, sums, 1), own.psi),
  };
}

/** Bodies that a level is tried on. */
const TRIED = 96;

/**
 * The error of U over |U| that a level is going to make at least, as 1σ: found by walking it towards a
 * few of the sampled bodies only. A level that is refused for it would have been walked in vain.
 */
export async function leastError(
  reference: Reference,
  source: SourceTree,
  level: Level,
  softening: Softening,
  acceptance: Acceptance,
  crew: Crew,
): Promise<number> {
  const { chosen, draws } = someOf(reference.draws, TRIED);
  const { places, of } = draws;
  if (of.length === 0) return 0;
  const walked = shared(places.length * 2);
  const round = { source, places, order: level.order, softening, acceptance, sums: walked };
  await crew.run(TASK, 'walkPaths', round, Math.ceil(places.length / PATHS_PER_JOB));
  const truth = eachDraw(reference.sums, chosen);
  const found = compare(eachDraw(walked, of), truth, 0);
  const { phi } = reference.own;
  const offset = Math.max(0, Math.abs(found.offset + phi.offset) - found.sigma / 2);
  const sigma = found.sigma * Math.sqrt(of.length / reference.draws.of.length);
  return Math.hypot(offset, sigma, phi.sigma) / meanPhi(truth);
}

/** Mean of the first of the two sums a draw. */
function meanPhi(sums: Float64Array): number {
  let sum = 0;
  for (let k = 0; k < sums.length; k += 2) sum += sums[k];
  return sum / (sums.length / 2);
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
  const errors = await accelerationErrors(source, field, softening, ACCELERATION_SAMPLE, crew);
  if (errors.length === 0) return 0;
  return Math.sqrt(errors.reduce((sum, error) => sum + error * error, 0) / errors.length);
}

/**
 * |a − a_direct|/|a_direct| of a sample of bodies, drawn by mass.
 * @param field - accelerations in input order and without G
 */
export async function accelerationErrors(
  source: SourceTree,
  field: Pick<FieldColumns, 'ax' | 'ay' | 'az'>,
  softening: Softening,
  sample: number,
  crew: Crew,
): Promise<Float64Array> {
  const { places, of } = drawByMass(source.tree, sample);
  if (of.length === 0) return new Float64Array(0);
  const exact = await sumDirectly(source, softening, places, true, crew);
  const errors = Array.from(places, (place, k) => {
    const i = source.tree.bodies.input[place];
    const [ax, ay, az] = exact.subarray(DIRECT_SUMS * k + 2, DIRECT_SUMS * (k + 1));
    const size = Math.hypot(ax, ay, az);
    const error = Math.hypot(field.ax[i] - ax, field.ay[i] - ay, field.az[i] - az);
    return size > 0 ? error / size : 0;
  });
  return Float64Array.from(of, (k) => errors[k]);
}

/** Mean and scatter of a − b in the given one of the two sums a body. */
function compare(a: Float64Array, b: Float64Array, which: 0 | 1): SampledError {
  const n = a.length / 2;
  if (n === 0) return NO_ERROR;
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
