/** Work of the crew while forces are summed: each function does numbered jobs on shared arrays. */
import type { TakeJob } from '../parallel/crew.ts';
import { sumAtPoint } from './classical.ts';
import { expansionsFor } from './expansions.ts';
import { estimateDepths, gatherBranch } from './multipoles.ts';
import { pairKernelsOf, pairSofteningOf } from './pairs.ts';
import { sumTowards } from './pathWalk.ts';
import { isOfEach, plummerSquare, splineSupport, type Softening } from './softening.ts';
import { NODE_BEGIN, NODE_END, TOPOLOGY, type Octree } from './tree.ts';
import {
  descendBranch,
  walkBranch,
  WalkScratch,
  type Acceptance,
  type SourceTree,
  type WalkCounts,
} from './walk.ts';

export interface GatherRound {
  readonly tree: Octree;
  readonly order: number;
  readonly softening: Softening;
  readonly multipoles: Float64Array;
}

export function gatherBranches(round: GatherRound, takeJob: TakeJob): void {
  const expansions = expansionsFor(round.order, round.softening);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    gatherBranch(round.tree, job, expansions, round.multipoles);
  }
}

export interface DepthRound {
  readonly tree: Octree;
  /** See {@link estimateDepths}. */
  readonly soft2: number | null;
}

export function estimateBranches(round: DepthRound, takeJob: TakeJob): void {
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    estimateDepths(round.tree, job, round.soft2);
  }
}

/** Results in input order; shared memory. Sums are positive and without G, see pairs.ts. */
export interface FieldColumns {
  readonly phi: Float64Array;
  /** Empty if the softening has no Clausius part. */
  readonly psi: Float64Array;
  /** Empty unless accelerations are wanted. */
  readonly ax: Float64Array;
  readonly ay: Float64Array;
  readonly az: Float64Array;
}

export interface WalkRound {
  readonly target: Octree;
  readonly source: SourceTree;
  readonly same: boolean;
  readonly order: number;
  readonly softening: Softening;
  readonly acceptance: Acceptance;
  readonly field: FieldColumns;
}

const scratch = new WalkScratch();

/** Walks branches and writes the field at their bodies; returns what was counted. */
export function walkBranches(round: WalkRound, takeJob: TakeJob): WalkCounts {
  const { target, source, softening, field } = round;
  const soft = softening.kernel !== 'none';
  const force = field.ax.length > 0;
  const expansions = expansionsFor(round.order, softening);
  const softenedByEach = isOfEach(softening);
  const tools = {
    expansions,
    pairs: pairKernelsOf(softening.kernel, force, softenedByEach),
    pairSoftening: pairSofteningOf(softening.kernel, softening.length),
    softenedByEach,
    acceptance: round.acceptance,
  };
  const counts: WalkCounts = { cellInteractions: 0, pairInteractions: 0, coincidentPairs: 0 };
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const root = target.branchRoots[job] * TOPOLOGY;
    const begin = target.topology[root + NODE_BEGIN];
    const size = target.topology[root + NODE_END] - begin;
    const nodes = target.branchSlots[2 * job + 1] - target.branchSlots[2 * job] + 1;
    scratch.prepare(size, nodes * expansions.locals, soft, force);
    walkBranch(target, job, source, round.same, tools, scratch, counts);
    descendBranch(target, job, expansions, softening.kernel === 'plummer', force, scratch);
    const input = target.bodies.input;
    for (let k = 0; k < size; k++) {
      const i = input[begin + k];
      field.phi[i] = scratch.phi[k];
      if (soft) field.psi[i] = scratch.psi[k];
      if (force) {
        field.ax[i] = scratch.ax[k];
        field.ay[i] = scratch.ay[k];
        field.az[i] = scratch.az[k];
      }
    }
  }
  return counts;
}

export interface PointRound {
  readonly source: SourceTree;
  readonly points: {
    readonly x: Float64Array;
    readonly y: Float64Array;
    readonly z: Float64Array;
    /** e² of each point, where bodies have softening lengths of their own. */
    readonly squares: Float64Array;
  };
  /** Places in tree order of the bodies at the points, left out of their own sums; null for none. */
  readonly places: Uint32Array | null;
  readonly order: number;
  readonly softening: Softening;
  readonly openingAngle: number;
  /** Points a job. */
  readonly perJob: number;
  /** Two numbers a point: its sums phi and psi. */
  readonly sums: Float64Array;
}

/** The classical walk at points; returns interactions. */
export function walkPoints(round: PointRound, takeJob: TakeJob): number {
  const { source, softening, points, places, perJob, sums } = round;
  const softenedByEach = isOfEach(softening);
  const tools = {
    expansions: expansionsFor(round.order, softening),
    pairs: pairKernelsOf(softening.kernel, false, softenedByEach),
    softenedByEach,
    pairSoftening: pairSofteningOf(softening.kernel, softening.length),
    openingAngle: round.openingAngle,
    soft2: plummerSquare(softening),
    support: splineSupport(softening),
  };
  const { x, y, z, squares } = points;
  let interactions = 0;
  const out = new Float64Array(5);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    for (let k = job * perJob; k < Math.min(x.length, (job + 1) * perJob); k++) {
      out.fill(0);
      const skip = places === null ? -1 : places[k];
      const own2 = softenedByEach ? squares[k] : 0;
      interactions += sumAtPoint(source, x[k], y[k], z[k], own2, skip, tools, out);
      sums[2 * k] = out[0];
      sums[2 * k + 1] = out[1];
    }
  }
  return interactions;
}

export interface PathRound {
  readonly source: SourceTree;
  /** Places in tree order of the bodies that are walked towards. */
  readonly places: Uint32Array;
  readonly order: number;
  readonly softening: Softening;
  readonly acceptance: Acceptance;
  /** Two numbers a body: its sums phi and psi. */
  readonly sums: Float64Array;
}

/** Bodies a job of {@link walkPaths} handles. */
export const PATHS_PER_JOB = 8;

/** The sums that a walk of all would give the bodies at some places. */
export function walkPaths(round: PathRound, takeJob: TakeJob): void {
  const { source, places, sums, softening } = round;
  const softenedByEach = isOfEach(softening);
  const tools = {
    expansions: expansionsFor(round.order, softening),
    pairs: pairKernelsOf(softening.kernel, false, softenedByEach),
    softenedByEach,
    pairSoftening: pairSofteningOf(softening.kernel, softening.length),
    acceptance: round.acceptance,
  };
  const out = new Float64Array(5);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const end = Math.min(places.length, (job + 1) * PATHS_PER_JOB);
    for (let k = job * PATHS_PER_JOB; k < end; k++) {
      out.fill(0);
      sumTowards(source, places[k], tools, out);
      sums[2 * k] = out[0];
      sums[2 * k + 1] = out[1];
    }
  }
}

export interface DirectSampleRound {
  readonly source: SourceTree;
  readonly softening: Softening;
  /** Places in tree order of the sampled bodies. */
  readonly places: Uint32Array;
  /** Also sum accelerations. */
  readonly force: boolean;
  /** {@link DIRECT_SUMS} numbers a body and slice of the sources: phi, psi, ax, ay, az. */
  readonly sums: Float64Array;
}

/** Numbers that a direct sum at a sampled body gives. */
export const DIRECT_SUMS = 5;

/** Bodies that a job of a direct sum at a sampled body runs over, to keep jobs short. */
export const DIRECT_SLICE = 262144;

/** Direct sums at sampled bodies, sliced over the sources. */
export function sampleDirectly(round: DirectSampleRound, takeJob: TakeJob): void {
  const { source, softening, places, force, sums } = round;
  const { x, y, z, mass, squares, count } = source.tree.bodies;
  const each = isOfEach(softening);
  const { onto, atPoint } = pairKernelsOf(softening.kernel, force, each);
  const soft = pairSofteningOf(softening.kernel, softening.length);
  const slices = Math.ceil(count / DIRECT_SLICE);
  const [phi, psi, ax, ay, az] = Array.from({ length: DIRECT_SUMS }, () => new Float64Array(1));
  const one = { phi, psi, ax, ay, az };
  const out = new Float64Array(DIRECT_SUMS);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const place = places[Math.floor(job / slices)];
    const begin = (job % slices) * DIRECT_SLICE;
    const end = Math.min(count, begin + DIRECT_SLICE);
    const split = Math.min(end, Math.max(begin, place));
    const after = place >= begin && place < end ? place + 1 : split;
    for (const sum of [phi, psi, ax, ay, az]) sum[0] = 0;
    const to = place + 1;
    onto(x, y, z, place, to, x, y, z, mass, begin, split, place, one, soft, squares, squares);
    onto(x, y, z, place, to, x, y, z, mass, after, end, place, one, soft, squares, squares);
    if (!Number.isFinite(phi[0])) {
      // Another body at the same point: the slower kernel leaves it out, as the engine does.
      out.fill(0);
      const own = each ? squares[place] : soft;
      const [px, py, pz] = [x[place], y[place], z[place]];
      atPoint(px, py, pz, x, y, z, mass, begin, split, out, own, squares);
      atPoint(px, py, pz, x, y, z, mass, after, end, out, own, squares);
      sums.set(out, job * DIRECT_SUMS);
      continue;
    }
    sums.set([phi[0], psi[0], ax[0], ay[0], az[0]], job * DIRECT_SUMS);
  }
}
