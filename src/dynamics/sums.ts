/** Sums over a set of bodies, run by the crew and added in one order. */
import type * as SumsTask from './sums.task.ts';
import { CompensatedSum } from '../numerics/compensated.ts';
import { crewOfOne, type Crew, type TaskModule } from '../parallel/crew.ts';
import { FIRST_SUMS, SECOND_SUMS, SUM_CHUNK, type Bodies } from './sums.task.ts';

const TASK: TaskModule<typeof SumsTask> = {
  url: new URL('./sums.task.js', import.meta.url),
  load: () => import('./sums.task.ts'),
};

/** A set of bodies: all, or those whose `member` is 1. */
export interface BodySet {
  readonly bodies: Bodies;
  readonly member: Uint8Array | null;
}

/** Number, mass and frame of a set. */
export interface SetFrame {
  readonly particles: number;
  /** Bodies with mass above 0. */
  readonly heavy: number;
  readonly mass: number;
  readonly squaredMass: number;
  /** Centre of mass and mean velocity, six numbers; 0 for a set without mass. */
  readonly frame: Float64Array;
}

/** Energies and moments of a set about its own frame. */
export interface SetSums {
  readonly kinetic: number;
  /** Σ m φ and Σ m w, twice the energies. */
  readonly potentialTwice: number;
  readonly clausiusTwice: number;
  readonly angularMomentum: readonly [number, number, number];
  readonly momentOfInertia: number;
  readonly momentOfInertiaRate: number;
}

/** Below this many bodies threads cost more than they save. */
const IN_PLACE = 100_000;

const crewFor = (set: BodySet, crew: Crew): Crew =>
  set.bodies.count < IN_PLACE ? crewOfOne() : crew;
const chunksOf = (set: BodySet): number => Math.ceil(set.bodies.count / SUM_CHUNK);

/** Number, mass, centre of mass and mean velocity. */
export async function frameOf(set: BodySet, crew: Crew): Promise<SetFrame> {
  const { bodies } = set;
  const chunks = chunksOf(set);
  // A rough frame first, from one body in some, so that no digits are lost far from the origin.
  const reference = roughFrame(set);
  const partial = shared(chunks * FIRST_SUMS);
  await crewFor(set, crew).run(
    TASK,
    'sumFirst',
    { bodies, member: set.member, partial, reference },
    chunks,
  );
  const sums = addRows(partial, FIRST_SUMS);
  const mass = sums[2];
  const frame = new Float64Array(6);
  for (let k = 0; k < 6; k++) frame[k] = mass > 0 ? reference[k] + sums[4 + k] / mass : 0;
  return { particles: sums[0], heavy: sums[1], mass, squaredMass: sums[3], frame };
}

function roughFrame({ bodies, member }: BodySet): Float64Array {
  const columns = [bodies.x, bodies.y, bodies.z, bodies.vx, bodies.vy, bodies.vz];
  const sums = new Float64Array(6);
  const step = Math.max(1, Math.floor(bodies.count / 256));
  let mass = 0;
  for (let i = 0; i < bodies.count; i += step) {
    if (member !== null && member[i] === 0) continue;
    const m = bodies.mass[i];
    mass += m;
    for (let k = 0; k < 6; k++) sums[k] += m * columns[k][i];
  }
  return mass > 0 ? sums.map((s) => s / mass) : sums;
}

/** Energies, angular momentum and moment of inertia about the set's own frame. */
export async function sumsOf(
  set: BodySet,
  { frame }: SetFrame,
  potential: Float64Array,
  clausiusShare: Float64Array,
  crew: Crew,
): Promise<SetSums> {
  const chunks = chunksOf(set);
  const partial = shared(chunks * SECOND_SUMS);
  await crewFor(set, crew).run(
    TASK,
    'sumSecond',
    { ...set, partial, frame, potential, clausiusShare },
    chunks,
  );
  const s = addRows(partial, SECOND_SUMS);
  return {
    kinetic: s[0] / 2,
    potentialTwice: s[1],
    clausiusTwice: s[2],
    angularMomentum: [s[3], s[4], s[5]],
    momentOfInertia: s[6],
    momentOfInertiaRate: 2 * s[7],
  };
}

/** Σ m² [v²/⟨v²⟩ − 2φ/⟨φ⟩ + 1]², from which the noise of the ratio follows. */
export async function noiseSum(
  set: BodySet,
  { frame, mass }: SetFrame,
  kinetic: number,
  depth: Float64Array,
  depthTwice: number,
  crew: Crew,
): Promise<number> {
  const chunks = chunksOf(set);
  const partial = shared(chunks);
  const meanSquare = (2 * kinetic) / mass;
  const meanDepth = depthTwice / mass;
  await crewFor(set, crew).run(
    TASK,
    'sumNoise',
    { ...set, partial, frame, depth, meanSquare, meanDepth },
    chunks,
  );
  return addRows(partial, 1)[0];
}

/** Σ m² (v² + w − ⟨v² + w⟩)², from which the noise of 2T + W follows. */
export async function virialNoiseSum(
  set: BodySet,
  { frame }: SetFrame,
  clausiusShare: Float64Array,
  mean: number,
  crew: Crew,
): Promise<number> {
  const chunks = chunksOf(set);
  const partial = shared(chunks);
  const round = { ...set, partial, frame, clausiusShare, mean };
  await crewFor(set, crew).run(TASK, 'sumVirialNoise', round, chunks);
  return addRows(partial, 1)[0];
}

/** Writes each member's specific energy, and counts those that are not bound. */
export async function countUnbound(
  set: BodySet,
  { frame }: SetFrame,
  potential: Float64Array,
  specificEnergy: Float64Array,
  crew: Crew,
): Promise<number> {
  const chunks = chunksOf(set);
  const partial = shared(chunks);
  await crewFor(set, crew).run(
    TASK,
    'sumUnbound',
    { ...set, partial, frame, potential, specificEnergy },
    chunks,
  );
  return addRows(partial, 1)[0];
}

/** Sums of the columns of all rows, in the order of the rows. */
export function addRows(partial: Float64Array, width: number): Float64Array {
  const sums = Array.from({ length: width }, () => new CompensatedSum());
  for (let k = 0; k < partial.length; k++) sums[k % width].add(partial[k]);
  return Float64Array.from(sums, (sum) => sum.value());
}

function shared(count: number): Float64Array {
  return new Float64Array(new SharedArrayBuffer(count * 8));
}
