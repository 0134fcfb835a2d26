/** A set of bodies cut into spherical layers of equal number, and the sums over each of them. */
import { takeBuffer } from '../numerics/reuse.ts';
import { crewOfOne, type Crew, type TaskModule } from '../parallel/crew.ts';
import { radiiOfMass } from './lagrangian.ts';
import { SPREAD_SUMS, STREAM_SUMS } from './layers.task.ts';
import type * as LayersTask from './layers.task.ts';
import type { Vector } from './record.ts';
import { addRows, type BodySet, type SetFrame } from './sums.ts';
import { SUM_CHUNK } from './sums.task.ts';

const TASK: TaskModule<typeof LayersTask> = {
  url: new URL('./layers.task.js', import.meta.url),
  load: () => import('./layers.task.ts'),
};

/** Below this many bodies threads cost more than they save. */
const IN_PLACE = 100_000;

/** A set with what its layers are about and made from. */
export interface LayeredSet {
  readonly set: BodySet;
  readonly frame: SetFrame;
  readonly angularMomentum: Vector;
  readonly centre: Vector;
}

/** Layers that a shell is cut into; even, so that one of its inner borders halves the shell. */
export const LAYERS = 4;

/** Sums over the bodies of each layer, from the innermost outward. */
export interface Layers {
  /** Number of shells; all arrays below have {@link LAYERS} entries a shell. */
  readonly shells: number;
  /** Outer radius of each layer; the innermost begins at 0. */
  readonly outer: Float64Array;
  readonly particles: Float64Array;
  readonly mass: Float64Array;
  readonly squaredMass: Float64Array;
  /** Σm v_r and Σm v_φ. */
  readonly radial: Float64Array;
  readonly azimuthal: Float64Array;
  /** Σm/r and Σm/r². */
  readonly inverse: Float64Array;
  readonly inverseSquare: Float64Array;
  /** Unit vector, or three zeros if the set has no angular momentum. */
  readonly axis: Vector;
}

/**
 * Sums of squares of velocities: a radial, b azimuthal, t tangential, all about the streaming of a
 * shell or, for all shells together, with it.
 */
export interface Spread {
  /** Σm a and Σm t. */
  readonly radial: number;
  readonly tangential: number;
  /** Σm²a, Σm²b, Σm²t, and Σm²a², Σm²t², Σm²a t. */
  readonly radial2: number;
  readonly azimuthal2: number;
  readonly tangential2: number;
  readonly radial4: number;
  readonly tangential4: number;
  readonly mixed4: number;
}

/** Sum of a column over the layers of shell k. */
export function ofShell(column: Float64Array, k: number): number {
  let sum = 0;
  for (let layer = LAYERS * k; layer < LAYERS * (k + 1); layer++) sum += column[layer];
  return sum;
}

/**
 * Cuts a set into `shells` shells of equal number, each in layers of equal number, and sums over these.
 * @param scratch - room for one number a body, overwritten
 */
export async function cutLayers(
  layered: LayeredSet,
  shells: number,
  scratch: Float64Array,
  crew: Crew,
): Promise<Layers> {
  const { set, frame, centre } = layered;
  const { bodies, member } = set;
  const layers = LAYERS * shells;
  // Radii of equal number are radii of equal mass if every body counts as one.
  const ones = new Float32Array(takeBuffer(bodies.count * 4), 0, bodies.count);
  for (let i = 0; i < bodies.count; i++) ones[i] = bodies.mass[i] > 0 ? 1 : 0;
  const fractions = Array.from(
    { length: layers },
    (_, k) => Math.round(((k + 1) * frame.heavy) / layers) / frame.heavy,
  );
  const counted = { bodies: { ...bodies, mass: ones }, member };
  const outer = await radiiOfMass(counted, centre, frame.heavy, fractions, scratch, crew);
  const axis = unit(layered.angularMomentum);
  const inner = outer.slice(0, -1);
  const rows = await sumLayers(layered, axis, inner, layers * STREAM_SUMS, (round) =>
    crewFor(bodies.count, crew).run(TASK, 'sumStreams', round, round.chunks),
  );
  const column = (k: number) => rows.filter((_, at) => at % STREAM_SUMS === k);
  return {
    shells,
    outer: Float64Array.from(outer),
    particles: column(0),
    mass: column(1),
    squaredMass: column(2),
    radial: column(3),
    azimuthal: column(4),
    inverse: column(5),
    inverseSquare: column(6),
    axis,
  };
}

/** Spreads of velocities in each shell about its streaming, and of all shells with it. */
export async function spreadsOf(
  layered: LayeredSet,
  layers: Layers,
  crew: Crew,
): Promise<{ shells: Spread[]; all: Spread }> {
  const { shells, outer, axis } = layers;
  const edges = Array.from({ length: shells - 1 }, (_, k) => outer[LAYERS * (k + 1) - 1]);
  const streams = new Float64Array(2 * shells);
  for (let k = 0; k < shells; k++) {
    const mass = ofShell(layers.mass, k);
    if (mass === 0) continue;
    streams[2 * k] = ofShell(layers.radial, k) / mass;
    streams[2 * k + 1] = ofShell(layers.azimuthal, k) / mass;
  }
  const { count } = layered.set.bodies;
  const rowLength = (shells + 1) * SPREAD_SUMS;
  const rows = await sumLayers(layered, axis, edges, rowLength, (round) =>
    crewFor(count, crew).run(TASK, 'sumSpreads', { ...round, streams }, round.chunks),
  );
  const spread = (k: number): Spread => {
    const row = rows.subarray(k * SPREAD_SUMS, (k + 1) * SPREAD_SUMS);
    return {
      radial: row[0],
      tangential: row[1],
      radial2: row[2],
      azimuthal2: row[3],
      tangential2: row[4],
      radial4: row[5],
      tangential4: row[6],
      mixed4: row[7],
    };
  };
  return { shells: Array.from({ length: shells }, (_, k) => spread(k)), all: spread(shells) };
}

/** Runs a round over all chunks and adds what they found in their order. */
async function sumLayers(
  { set, frame, centre }: LayeredSet,
  axis: Vector,
  edges: readonly number[],
  rowLength: number,
  run: (round: LayersTask.LayerRound & { chunks: number }) => Promise<unknown>,
): Promise<Float64Array> {
  const { bodies, member } = set;
  const chunks = Math.ceil(bodies.count / SUM_CHUNK);
  const partial = new Float64Array(new SharedArrayBuffer(chunks * rowLength * 8));
  await run({
    bodies,
    member,
    centre: Float64Array.from(centre),
    velocity: frame.frame.slice(3, 6),
    axis: Float64Array.from(axis),
    edges2: Float64Array.from(edges, (r) => r * r),
    partial,
    chunks,
  });
  return addRows(partial, rowLength);
}

const crewFor = (count: number, crew: Crew): Crew => (count < IN_PLACE ? crewOfOne() : crew);

function unit([x, y, z]: Vector): Vector {
  const length = Math.hypot(x, y, z);
  return length > 0 ? [x / length, y / length, z / length] : [0, 0, 0];
}
