/**
 * Particles → Forces: potential, Clausius share and, if asked, acceleration of every body, with
 * measured errors, by direct sums where those are cheaper and by the cell–cell walk elsewhere.
 */
import { takeDoubles } from '../numerics/reuse.ts';
import type * as DirectTask from './direct.task.ts';
import type * as ForcesTask from './forces.task.ts';
import { crewOfOne, type Crew, type TaskModule } from '../parallel/crew.ts';
import { buildOctree, type BodyColumns } from './build.ts';
import { CompensatedSum } from '../numerics/compensated.ts';
import {
  leastError,
  makeReference,
  sampleAccelerationError,
  sampleError,
  servesLevel,
  type ErrorSample,
  type Reference,
  type SampledError,
} from './errorSample.ts';
import { expansionsFor } from './expansions.ts';
import type { FieldColumns } from './forces.task.ts';
import { DIRECT_TARGETS, pairJobs, type DirectRound } from './direct.task.ts';
import { gatherSlot, leastOfChildren } from './multipoles.ts';
import { firstLevel, nextLevel, treeCost, type Level } from './levels.ts';
import { isOfEach, plummerSquare, splineSupport, squared, type Softening } from './softening.ts';
import { spreadLimits } from './spread.ts';
import { NODE_CHILDREN, TOPOLOGY, type Octree } from './tree.ts';
import type { Acceptance, SourceTree, WalkCounts } from './walk.ts';

const TASK: TaskModule<typeof ForcesTask> = {
  url: new URL('./forces.task.js', import.meta.url),
  load: () => import('./forces.task.ts'),
};

const DIRECT_TASK: TaskModule<typeof DirectTask> = {
  url: new URL('./direct.task.js', import.meta.url),
  load: () => import('./direct.task.ts'),
};

/** Up to this many bodies sums are always direct. */
export const DIRECT_COUNT = 4096;
/** The promise `--error E` is kept if this many σ of the measured error stay below E |U|. */
export const PROMISED_SIGMAS = 2.6;

/** Parts of the work, in order; `forces` and `error` come again when a level missed the error wanted. */
export type ForceStage = 'tree' | 'forces' | 'error';

export interface ForceOptions {
  /** G [length · velocity² / mass]. */
  readonly gravity: number;
  readonly softening: Softening;
  /** Relative error wanted of U; {@link PROMISED_SIGMAS} σ of the measured error stay below it. */
  readonly errorWanted: number;
  /** Direct sums for any number of bodies. */
  readonly exact?: boolean;
  readonly accelerations?: boolean;
  /** Called when a part of the work begins. */
  readonly onStage?: (stage: ForceStage) => void;
  /** Fixed level of the walk instead of one chosen by the error wanted: for benchmarks and tests. */
  readonly level?: Level;
}

export interface ForceCosts {
  readonly cellInteractions: number;
  /** Pairs of bodies summed, each direction counted. */
  readonly pairInteractions: number;
  readonly sampleInteractions: number;
  /** Wall-clock seconds. */
  readonly seconds: { readonly tree: number; readonly forces: number; readonly error: number };
}

export interface Forces {
  readonly origin: 'tree' | 'direct' | 'file';
  readonly gravity: number;
  readonly softening: Softening;
  /** φ_i without the self term, in input order [velocity²]. */
  readonly potential: Float64Array;
  /** w_i with W = ½ Σ m_i w_i, in input order [velocity²]; the same array as `potential` if unsoftened. */
  readonly clausiusShare: Float64Array;
  readonly acceleration: {
    readonly x: Float64Array;
    readonly y: Float64Array;
    readonly z: Float64Array;
  } | null;
  /** U = ½ Σ m φ and W = ½ Σ m w [mass · velocity²]. */
  readonly potentialEnergy: number;
  readonly clausius: number;
  /** 1σ absolute errors of U and W, measured in this run [mass · velocity²]. */
  readonly potentialError: number;
  readonly clausiusError: number;
  /** Rms error of single φ_i over the mean |φ|; 0 for direct sums. */
  readonly potentialRms: number;
  /** Rms of |δa|/|a| over a sample; 0 for direct sums, null if accelerations were not asked for. */
  readonly accelerationError: number | null;
  readonly level: Level | null;
  /** Pairs of bodies at one point, left out of unsoftened sums. */
  readonly coincidentPairs: number;
  readonly costs: ForceCosts;
  /** The tree, for neighbours and further sums; null where sums were direct and no tree was needed. */
  readonly tree: SourceTree | null;
}

/**
 * Sums the forces of all bodies on all bodies.
 * @param columns - positions and masses in input order, finite, masses ≥ 0
 * @returns forces in input order
 */
export async function sumForces(
  columns: BodyColumns,
  options: ForceOptions,
  crew: Crew = crewOfOne(),
): Promise<Forces> {
  const count = columns.mass.length;
  const first = options.level ?? firstLevel(options.errorWanted, count);
  const direct =
    options.exact === true ||
    (options.level === undefined &&
      (count <= DIRECT_COUNT || treeCost(first, count) >= directCost(count)));
  return direct ? sumAllDirectly(columns, options, crew) : sumByTree(columns, options, first, crew);
}

/** Times the last level's cost that direct sums may take once that level has missed the error wanted. */
const DIRECT_PAST_LAST = 3;

/** Nanoseconds of one thread that direct sums take, roughly; only ratios to {@link treeCost} matter. */
const directCost = (count: number): number => 1.8 * count * count;

async function sumAllDirectly(
  columns: BodyColumns,
  options: ForceOptions,
  crew: Crew,
): Promise<Forces> {
  const start = performance.now();
  options.onStage?.('forces');
  const count = columns.mass.length;
  const field = allocateField(count, options);
  const round = {
    x: asDoubles(columns.x),
    y: asDoubles(columns.y),
    z: asDoubles(columns.z),
    mass: asDoubles(columns.mass),
    squares: squaresOf(options.softening),
    softening: options.softening,
    field,
  };
  const coincidentPairs = await sumPairs(round, crew);
  const seconds = { tree: 0, forces: (performance.now() - start) / 1000, error: 0 };
  const costs = {
    cellInteractions: 0,
    pairInteractions: count * (count - 1),
    sampleInteractions: 0,
    seconds,
  };
  return finish(columns, options, field, {
    origin: 'direct',
    error: null,
    accelerationError: options.accelerations === true ? 0 : null,
    level: null,
    coincidentPairs,
    costs,
    tree: null,
  });
}

/** Bodies that are worth a block of their own, and the most blocks. */
const BLOCK = 256;
const BLOCKS = 64;

/** Sums all pairs into the round's field; returns the pairs at one point, left out of unsoftened sums. */
async function sumPairs(round: DirectRound, crew: Crew): Promise<number> {
  const count = round.mass.length;
  const wanted = 2 * Math.floor(Math.min(BLOCKS, count / BLOCK) / 2);
  const blocks = Math.max(1, wanted);
  const done = new Int32Array(new SharedArrayBuffer(4));
  const workers = blocks === 1 ? crewOfOne() : crew;
  const total = (list: readonly number[]) => list.reduce((sum, n) => sum + n, 0);
  const pairs = { ...round, blocks, done };
  const left = total(await workers.run(DIRECT_TASK, 'sumAllPairs', pairs, pairJobs(blocks)));
  if (blocks === 1 || round.field.phi.every(Number.isFinite)) return left;
  // Bodies at one point in two blocks: the slower sums that leave such pairs out.
  const jobs = Math.ceil(count / DIRECT_TARGETS);
  return total(await crew.run(DIRECT_TASK, 'sumDirectly', round, jobs)) / 2;
}

async function sumByTree(
  columns: BodyColumns,
  options: ForceOptions,
  first: Level,
  crew: Crew,
): Promise<Forces> {
  const { softening } = options;
  const start = performance.now();
  options.onStage?.('tree');
  const each = isOfEach(softening);
  const squares = squaresOf(softening);
  const tree = await buildOctree(each ? { ...columns, squares } : columns, crew);
  const soft2 = each && softening.kernel === 'plummer' ? null : plummerSquare(softening);
  await crew.run(TASK, 'estimateBranches', { tree, soft2 }, tree.branchRoots.length);
  for (let slot = tree.topCount - 1; slot >= 0; slot--) leastOfChildren(tree, slot);
  const built = performance.now();
  const { count } = tree.bodies;
  const field = allocateField(columns.mass.length, options);
  const counts: WalkCounts = { cellInteractions: 0, pairInteractions: 0, coincidentPairs: 0 };
  const attempt: Attempt = {
    level: first,
    source: null,
    order: 0,
    reference: null,
    sampled: 0,
    seconds: 0,
  };
  for (;;) {
    const ready = await prepareLevel(attempt, tree, options, crew);
    if (ready === null) return sumAllDirectly(columns, options, crew);
    const { source, reference, acceptance } = ready;
    const { level } = attempt;
    options.onStage?.('forces');
    const done = await walkAll(source, level.order, acceptance, softening, field, crew);
    counts.cellInteractions += done.cellInteractions;
    counts.pairInteractions += done.pairInteractions;
    counts.coincidentPairs = done.coincidentPairs;
    const walked = performance.now();
    options.onStage?.('error');
    const error = sampleError(reference, tree, field);
    const accelerationError =
      options.accelerations === true
        ? await sampleAccelerationError(source, field, softening, crew)
        : null;
    const total = performance.now();
    attempt.seconds += (total - walked) / 1000;
    const result = finish(columns, options, field, {
      origin: 'tree',
      error,
      accelerationError,
      level,
      coincidentPairs: counts.coincidentPairs,
      costs: {
        cellInteractions: counts.cellInteractions,
        pairInteractions: counts.pairInteractions,
        sampleInteractions: attempt.sampled,
        seconds: {
          tree: (built - start) / 1000,
          forces: (total - built) / 1000 - attempt.seconds,
          error: attempt.seconds,
        },
      },
      tree: source,
    });
    const { potentialEnergy, potentialError } = result;
    const missed =
      (PROMISED_SIGMAS * potentialError) / (options.errorWanted * Math.abs(potentialEnergy));
    if (!(missed > 1) || options.level) return result;
    const next = nextLevel(level, missed);
    // Past the last level only direct sums keep the promise; they are worth some times its cost.
    const worth = next ? treeCost(next, count) : DIRECT_PAST_LAST * treeCost(level, count);
    if (worth >= directCost(count)) return sumAllDirectly(columns, options, crew);
    if (!next) return result;
    attempt.level = next;
  }
}

/** The level in hand, and what is kept from one level to the next. */
interface Attempt {
  level: Level;
  /** The tree with multipoles of this order. */
  source: SourceTree | null;
  order: number;
  reference: Reference | null;
  /** Interactions of the error sample so far, and its seconds. */
  sampled: number;
  seconds: number;
}

/**
 * Makes multipoles and error sample for the level in hand, and goes on to finer ones while a trial on
 * few bodies tells that the level would be walked in vain.
 * @returns null if direct sums are cheaper than the level that is needed
 */
async function prepareLevel(
  attempt: Attempt,
  tree: Octree,
  options: ForceOptions,
  crew: Crew,
): Promise<{ source: SourceTree; reference: Reference; acceptance: Acceptance } | null> {
  const { softening, errorWanted } = options;
  const { count } = tree.bodies;
  for (;;) {
    const { level } = attempt;
    options.onStage?.('forces');
    if (attempt.source === null || attempt.order !== level.order) {
      attempt.source = await gatherMultipoles(tree, level.order, softening, crew);
      attempt.order = level.order;
    }
    const { source } = attempt;
    const start = performance.now();
    options.onStage?.('error');
    let { reference } = attempt;
    if (reference === null || !servesLevel(reference, level, count)) {
      reference = await makeReference(source, level, softening, errorWanted, reference, crew);
      attempt.reference = reference;
      attempt.sampled += reference.interactions;
    }
    const acceptance = acceptanceOf(level, softening);
    const ready = { source, reference, acceptance };
    if (options.level) {
      attempt.seconds += (performance.now() - start) / 1000;
      return ready;
    }
    const least = await leastError(reference, source, level, softening, acceptance, crew);
    attempt.seconds += (performance.now() - start) / 1000;
    const missed = (PROMISED_SIGMAS * least) / errorWanted;
    // Half the way on the ladder: another trial is cheap, and errors shrink faster for some systems.
    const next = missed > 1 ? nextLevel(level, Math.sqrt(missed)) : null;
    if (next === null) return ready;
    if (treeCost(next, count) >= directCost(count)) return null;
    attempt.level = next;
  }
}

/** Multipoles of the given order for all nodes. */
export async function gatherMultipoles(
  tree: Octree,
  order: number,
  softening: Softening,
  crew: Crew,
): Promise<SourceTree> {
  const expansions = expansionsFor(order, softening);
  const multipoles = takeDoubles(tree.nodeCount * expansions.multipoles);
  const round = { tree, order, softening, multipoles };
  await crew.run(TASK, 'gatherBranches', round, tree.branchRoots.length);
  const isBranch = new Set(tree.branchRoots);
  for (let slot = tree.topCount - 1; slot >= 0; slot--) {
    const inner = tree.topology[slot * TOPOLOGY + NODE_CHILDREN] > 0 && !isBranch.has(slot);
    if (inner) gatherSlot(tree, slot, expansions, multipoles);
  }
  return { tree, multipoles };
}

async function walkAll(
  source: SourceTree,
  order: number,
  acceptance: Acceptance,
  softening: Softening,
  field: FieldColumns,
  crew: Crew,
): Promise<WalkCounts> {
  const round = {
    target: source.tree,
    source,
    same: true,
    order,
    softening,
    acceptance,
    field,
  };
  const counts = await crew.run(TASK, 'walkBranches', round, source.tree.branchRoots.length);
  return counts.reduce((sum, c) => ({
    cellInteractions: sum.cellInteractions + c.cellInteractions,
    pairInteractions: sum.pairInteractions + c.pairInteractions,
    coincidentPairs: sum.coincidentPairs + c.coincidentPairs,
  }));
}

export function acceptanceOf(level: Level, softening: Softening): Acceptance {
  return {
    openingAngle: level.openingAngle,
    tolerance: level.tolerance,
    order: level.order,
    ...spreadLimits(level.tolerance),
    soft2: plummerSquare(softening),
    support: splineSupport(softening),
  };
}

function allocateField(count: number, options: ForceOptions): FieldColumns {
  const column = (wanted: boolean) => takeDoubles(wanted ? count : 0);
  const force = options.accelerations === true;
  return {
    phi: column(true),
    psi: column(options.softening.kernel !== 'none'),
    ax: column(force),
    ay: column(force),
    az: column(force),
  };
}

interface Outcome {
  readonly origin: 'tree' | 'direct';
  readonly error: ErrorSample | null;
  readonly accelerationError: number | null;
  readonly level: Level | null;
  readonly coincidentPairs: number;
  readonly costs: ForceCosts;
  readonly tree: SourceTree | null;
}

/** Sums → Forces: applies G and sign in place, adds up totals, turns the sample into errors. */
function finish(
  columns: BodyColumns,
  options: ForceOptions,
  field: FieldColumns,
  what: Outcome,
): Forces {
  const { gravity, softening } = options;
  const { mass } = columns;
  const count = mass.length;
  const { phi, psi, ax, ay, az } = field;
  const soft = psi.length > 0;
  const potentialSum = new CompensatedSum();
  const clausiusSum = new CompensatedSum();
  const totalMass = new CompensatedSum();
  for (let i = 0; i < count; i++) {
    const potential = -gravity * phi[i];
    phi[i] = potential;
    potentialSum.add(mass[i] * potential);
    totalMass.add(mass[i]);
    if (soft) {
      psi[i] = potential + gravity * psi[i];
      clausiusSum.add(mass[i] * psi[i]);
    }
  }
  for (let i = 0; i < ax.length; i++) {
    ax[i] *= gravity;
    ay[i] *= gravity;
    az[i] *= gravity;
  }
  const potentialEnergy = potentialSum.value() / 2;
  const clausius = soft ? clausiusSum.value() / 2 : potentialEnergy;
  const scale = (gravity * totalMass.value()) / 2;
  // Direct sums err by rounding alone, which grows as the root of the number of terms.
  const rounding = 2 ** -53 * Math.sqrt(count);
  const phiError = what.error ? scale * errorOf(what.error.phi) : 0;
  const psiError = what.error && soft ? scale * errorOf(what.error.psi) : 0;
  const potentialError = Math.hypot(phiError, rounding * potentialEnergy);
  return {
    origin: what.origin,
    gravity,
    softening,
    potential: phi,
    clausiusShare: soft ? psi : phi,
    acceleration: ax.length > 0 ? { x: ax, y: ay, z: az } : null,
    potentialEnergy,
    clausius,
    potentialError,
    clausiusError: soft ? Math.hypot(potentialError, psiError) : potentialError,
    potentialRms:
      what.error && potentialEnergy < 0
        ? (what.error.phi.rms * scale) / Math.abs(potentialEnergy)
        : 0,
    accelerationError: what.accelerationError,
    level: what.level,
    coincidentPairs: what.coincidentPairs,
    costs: what.costs,
    tree: what.tree,
  };
}

/** 1σ of a mean whose offset is measured but not corrected for. */
const errorOf = ({ offset, sigma }: SampledError): number => Math.hypot(offset, sigma);

/** e² of each body; empty where one length holds for all. */
function squaresOf(softening: Softening): Float64Array {
  const { lengths } = softening;
  return lengths !== undefined && isOfEach(softening) ? squared(lengths) : new Float64Array(0);
}

function asDoubles(column: Float64Array | Float32Array): Float64Array {
  if (column instanceof Float64Array && column.buffer instanceof SharedArrayBuffer) return column;
  const copy = takeDoubles(column.length);
  copy.set(column);
  return copy;
}
