/**
 * Hard pairs: two bodies bound to each other by more than kT of the bodies around them.
 *
 * A pair are two bodies each of which is bound most tightly to the other among its nearest neighbours.
 * Its binding energy, with the softening of the run, is compared with kT, a third of ⟨m v²⟩ of the 32
 * nearest others about their mean. Source: Heggie 1975, MNRAS 173, 729 (hard if above kT; from memory);
 * the choice of neighbours has no source.
 */
import { takeBuffer, takeDoubles } from '../numerics/reuse.ts';
import { sumForces, type Forces } from '../octree/forces.ts';
import { softeningOfPair, type Softening } from '../octree/softening.ts';
import type { Octree } from '../octree/tree.ts';
import { crewOfOne, type Crew, type TaskModule } from '../parallel/crew.ts';
import type { FloatColumn, IdColumn, Particles } from '../snapshot/particles.ts';
import { balanceOf, fieldOf } from './balance.ts';
import { orbitOf, pairPotential } from './pairOrbit.ts';
import { JUDGED, NOBODY, PAIRS_A_JOB } from './pairs.task.ts';
import type * as PairsTask from './pairs.task.ts';
import type { Balance } from './record.ts';
import type { Bodies } from './sums.task.ts';

const TASK: TaskModule<typeof PairsTask> = {
  url: new URL('./pairs.task.js', import.meta.url),
  load: () => import('./pairs.task.ts'),
};

/** Pairs that the record lists. */
const LISTED = 8;
/** From fewer bodies around a pair kT is not told. */
const FEWEST_AROUND = 8;
/** Below this many bodies threads cost more than they save. */
const IN_PLACE = 20_000;

export interface HardestPairs {
  /** Input indices: the heavier body (of equals the first) and the other one. */
  readonly first: readonly number[];
  readonly second: readonly number[];
  /** Ids of the same bodies, as text where a number would not hold them; empty without ids. */
  readonly firstIds: readonly (number | string)[];
  readonly secondIds: readonly (number | string)[];
  readonly separations: readonly number[];
  readonly semiMajorAxes: readonly number[];
  readonly eccentricities: readonly number[];
  /** Binding energies, and these over kT. */
  readonly energies: readonly number[];
  readonly hardness: readonly number[];
  readonly hardnessErrors: readonly number[];
}

export interface PairFigures {
  /** Null where there is no kT to compare with. */
  readonly hardPairs: number | null;
  readonly hardPairsEnergy: number | null;
  readonly hardestPairs: HardestPairs;
  readonly pairsMerged: Balance;
}

export interface PairInput {
  readonly particles: Particles;
  readonly tree: Octree;
  readonly forces: Forces;
  readonly whole: Balance;
  readonly errorWanted: number;
  readonly exact: boolean;
}

/** A bound pair with the temperature around it. */
export interface BoundPair {
  readonly first: number;
  readonly second: number;
  readonly energy: number;
  readonly temperature: number;
  /** Bodies that the temperature is from. */
  readonly around: number;
}

/** Finds the hard pairs, and the balance with each of them as one body. */
export async function pairFigures(input: PairInput, crew: Crew): Promise<PairFigures> {
  const { particles, whole } = input;
  const pairs = await boundPairs(input, crew);
  // Bodies that do not move have no temperature, and too few no meaningful one.
  const known = whole.kinetic > 0 && particles.count >= FEWEST_AROUND + 2;
  const hard = pairs
    .filter(({ around, temperature, energy }) => {
      return known && around >= FEWEST_AROUND && temperature > 0 && energy > temperature;
    })
    .sort((a, b) => b.energy / b.temperature - a.energy / a.temperature || a.first - b.first);
  return {
    hardPairs: known ? hard.length : null,
    hardPairsEnergy: known ? hard.reduce((sum, { energy }) => sum + energy, 0) : null,
    hardestPairs: listed(hard.slice(0, LISTED), input),
    pairsMerged: hard.length === 0 ? whole : await mergedBalance(hard, input, crew),
  };
}

/** All mutually bound pairs, in the order of the tree. */
export async function boundPairs(
  { particles, tree, forces }: Pick<PairInput, 'particles' | 'tree' | 'forces'>,
  crew: Crew,
): Promise<BoundPair[]> {
  const { gravity, softening } = forces;
  const { count, input } = tree.bodies;
  const workers = count < IN_PLACE ? crewOfOne() : crew;
  const bodies = columnsOf(particles);
  const partner = new Uint32Array(takeBuffer(count * 4), 0, count);
  const round = { tree, bodies, gravity, softening, partner };
  await workers.run(TASK, 'findPartners', round, tree.branchRoots.length);
  const found: number[] = [];
  for (let i = 0; i < count; i++) {
    const j = partner[i];
    if (j !== NOBODY && i < j && partner[j] === i) found.push(i);
  }
  const pairs = Uint32Array.from(found);
  const judged = new Float64Array(new SharedArrayBuffer(pairs.length * JUDGED * 8));
  const jobs = Math.ceil(pairs.length / PAIRS_A_JOB);
  if (jobs > 0) {
    await workers.run(TASK, 'judgePairs', { tree, bodies, partner, pairs, judged }, jobs);
  }
  return found.map((place, k) => {
    const [a, b] = [input[place], input[partner[place]]];
    const isFirst = bodies.mass[a] > bodies.mass[b] || (bodies.mass[a] === bodies.mass[b] && a < b);
    const [first, second] = isFirst ? [a, b] : [b, a];
    return {
      first,
      second,
      energy: bindingEnergy(bodies, first, second, forces),
      temperature: judged[k * JUDGED],
      around: judged[k * JUDGED + 1],
    };
  });
}

/** The columns that workers need, and no others. */
function columnsOf({ count, mass, x, y, z, vx, vy, vz }: Particles): Bodies {
  return { count, mass, x, y, z, vx, vy, vz };
}

function relative({ x, y, z, vx, vy, vz }: Bodies, a: number, b: number) {
  return {
    position: [x[b] - x[a], y[b] - y[a], z[b] - z[a]] as const,
    velocity: [vx[b] - vx[a], vy[b] - vy[a], vz[b] - vz[a]] as const,
  };
}

const square = ([x, y, z]: readonly [number, number, number]) => x * x + y * y + z * z;

/** −½ μ v² + G m m′ f(r). */
function bindingEnergy(bodies: Bodies, a: number, b: number, { gravity, softening }: Forces) {
  const { position, velocity } = relative(bodies, a, b);
  const [m, n] = [bodies.mass[a], bodies.mass[b]];
  const depth = gravity * pairPotential(softeningOfPair(softening, a, b), square(position));
  return m * n * depth - ((m * n) / (m + n)) * 0.5 * square(velocity);
}

function listed(pairs: readonly BoundPair[], { particles, forces }: PairInput): HardestPairs {
  const { gravity, softening } = forces;
  const ids = particles.columns.id;
  const states = pairs.map(({ first, second }) => ({
    attraction: gravity * (particles.mass[first] + particles.mass[second]),
    ...relative(particles, first, second),
  }));
  const orbits = pairs.map(({ first, second }, k) =>
    orbitOf(states[k], softeningOfPair(softening, first, second)),
  );
  const hardness = pairs.map(({ energy, temperature }) => energy / temperature);
  return {
    first: pairs.map(({ first }) => first),
    second: pairs.map(({ second }) => second),
    firstIds: ids === undefined ? [] : pairs.map(({ first }) => idOf(ids, first)),
    secondIds: ids === undefined ? [] : pairs.map(({ second }) => idOf(ids, second)),
    separations: states.map(({ position }) => Math.sqrt(square(position))),
    semiMajorAxes: orbits.map(({ semiMajorAxis }) => semiMajorAxis),
    eccentricities: orbits.map(({ eccentricity }) => eccentricity),
    energies: pairs.map(({ energy }) => energy),
    hardness,
    // kT is a mean of squares with 3 (n − 1) degrees of freedom.
    hardnessErrors: pairs.map(({ around }, k) => hardness[k] * Math.sqrt(2 / (3 * (around - 1)))),
  };
}

function idOf(ids: IdColumn, i: number): number | string {
  const id = Number(ids[i]);
  return Number.isSafeInteger(id) ? id : String(ids[i]);
}

/** The balance of all bodies with each pair at its centre of mass, summed anew. */
async function mergedBalance(
  pairs: readonly BoundPair[],
  { particles, forces, errorWanted, exact }: PairInput,
  crew: Crew,
): Promise<Balance> {
  const merged = mergedBodies(pairs, particles);
  const { gravity } = forces;
  const softening = mergedSoftening(pairs, particles.mass, forces.softening);
  const again = await sumForces(merged, { gravity, softening, errorWanted, exact }, crew);
  const set = { bodies: merged, member: null };
  return (await balanceOf(set, fieldOf(again), crew)).balance;
}

/** The softening with the lengths of {@link mergedBodies}: a pair has the mean of its two e² by mass. */
export function mergedSoftening(
  pairs: readonly Pick<BoundPair, 'first' | 'second'>[],
  mass: FloatColumn,
  softening: Softening,
): Softening {
  const { lengths } = softening;
  if (lengths === undefined) return softening;
  const other = new Map(pairs.map(({ first, second }) => [first, second]));
  const gone = new Set(pairs.map(({ second }) => second));
  const merged = takeDoubles(lengths.length - pairs.length);
  for (let i = 0, k = 0; i < lengths.length; i++) {
    if (gone.has(i)) continue;
    const j = other.get(i);
    merged[k++] =
      j === undefined
        ? lengths[i]
        : Math.sqrt((mass[i] * lengths[i] ** 2 + mass[j] * lengths[j] ** 2) / (mass[i] + mass[j]));
  }
  return { ...softening, lengths: merged };
}

/** Bodies with each pair as one, at the place in the input of its first body. */
export function mergedBodies(
  pairs: readonly Pick<BoundPair, 'first' | 'second'>[],
  bodies: Bodies,
): Bodies {
  const other = new Map(pairs.map(({ first, second }) => [first, second]));
  const gone = new Set(pairs.map(({ second }) => second));
  const count = bodies.count - pairs.length;
  const mass = takeDoubles(count);
  const columns = [bodies.x, bodies.y, bodies.z, bodies.vx, bodies.vy, bodies.vz];
  const to = columns.map(() => takeDoubles(count));
  for (let i = 0, k = 0; i < bodies.count; i++) {
    if (gone.has(i)) continue;
    const j = other.get(i);
    const [m, n] = [bodies.mass[i], j === undefined ? 0 : bodies.mass[j]];
    mass[k] = m + n;
    columns.forEach((column, c) => {
      // From one body on, so that a close pair far from the origin keeps its digits.
      to[c][k] = j === undefined ? column[i] : column[i] + (n / (m + n)) * (column[j] - column[i]);
    });
    k++;
  }
  const [x, y, z, vx, vy, vz] = to;
  return { count, mass, x, y, z, vx, vy, vz };
}
