/** Local densities from nearest neighbours, leaf by leaf: work of the crew. */
import type { TakeJob } from '../parallel/crew.ts';
import {
  GEOMETRY,
  longerStack,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_END,
  NODE_MASS,
  NODE_RADIUS,
  TOPOLOGY,
  type Octree,
} from './tree.ts';

/** Moments of a density: Σρ, Σρ x y z, Σρ², Σρ² x y z, Σρ² r². */
export const MOMENTS = 9;
/** Bins of coarse density, a factor √2 each, that groups below {@link DensityRound.all} fall into. */
export const BINS = 24;
/** Numbers a bin: Σρ, Σρ², Σρ²r² measured, the same of the same groups coarse, and moments of groups not measured, coarse. */
export const BIN_SUMS = 6 + MOMENTS;
/** Sums a branch gives: moments of what was measured, then the bins. */
export const DENSITY_SUMS = MOMENTS + BINS * BIN_SUMS;
/** One in so many groups below {@link DensityRound.all} is measured. */
const MEASURED_ONE_IN = 4;

export interface DensityRound {
  readonly tree: Octree;
  /** The j of the estimator: distance to the j-th neighbour. */
  readonly neighbours: number;
  /** Groups of at least this coarse density are all measured; 0 for every group. */
  readonly all: number;
  /** Groups below this are not measured, those between only one in some. */
  readonly none: number;
  /** Positions in the sums are about this point. */
  readonly origin: Float64Array;
  readonly sums: Float64Array;
  /** Density of each body in input order, or empty if not wanted. */
  readonly density: Float64Array;
}

/** A sphere's bodies, collected from the tree: positions and masses. */
class Candidates {
  count = 0;
  x = new Float64Array(1024);
  y = new Float64Array(1024);
  z = new Float64Array(1024);
  mass = new Float64Array(1024);

  hold(count: number): void {
    if (count <= this.x.length) return;
    const size = count * 2;
    const longer = (old: Float64Array) => {
      const array = new Float64Array(size);
      array.set(old);
      return array;
    };
    this.x = longer(this.x);
    this.y = longer(this.y);
    this.z = longer(this.z);
    this.mass = longer(this.mass);
  }
}

const candidates = new Candidates();
let stack: Int32Array = new Int32Array(4096);

/** A group whose sphere holds more bodies than this is searched body by body instead. */
const MOST_CANDIDATES = 768;

/** Collects all bodies within `radius` of a point; false if they are more than {@link MOST_CANDIDATES}. */
function collect(tree: Octree, px: number, py: number, pz: number, radius: number): boolean {
  const { geometry: G, topology: T, bodies } = tree;
  const { x, y, z, mass } = bodies;
  const radius2 = radius * radius;
  let count = 0;
  let depth = 1;
  stack[0] = 0;
  while (depth > 0) {
    const slot = stack[--depth];
    const g = slot * GEOMETRY;
    const t = slot * TOPOLOGY;
    const dx = G[g] - px;
    const dy = G[g + 1] - py;
    const dz = G[g + 2] - pz;
    const reach = radius + G[g + NODE_RADIUS];
    if (dx * dx + dy * dy + dz * dz > reach * reach) continue;
    const children = T[t + NODE_CHILDREN];
    if (children > 0) {
      if (depth + 8 > stack.length) {
        stack = longerStack(stack);
      }
      const first = T[t + NODE_CHILD];
      for (let child = first + children - 1; child >= first; child--) stack[depth++] = child;
      continue;
    }
    const end = T[t + NODE_END];
    if (count > MOST_CANDIDATES) return false;
    candidates.hold(count + end - T[t + NODE_BEGIN]);
    const { x: cx, y: cy, z: cz, mass: cm } = candidates;
    for (let i = T[t + NODE_BEGIN]; i < end; i++) {
      const ex = x[i] - px;
      const ey = y[i] - py;
      const ez = z[i] - pz;
      if (ex * ex + ey * ey + ez * ez > radius2) continue;
      cx[count] = x[i];
      cy[count] = y[i];
      cz[count] = z[i];
      cm[count] = mass[i];
      count++;
    }
  }
  candidates.count = count;
  return true;
}

/** Squared distances and masses of the nearest bodies so far, nearest first; the body itself is one. */
const nearest2 = new Float64Array(64);
const nearestMass = new Float64Array(64);

/**
 * Finds the `wanted` nearest candidates of a point, itself included, among those nearer than √bound2;
 * returns how many were found.
 */
function nearestCandidates(
  px: number,
  py: number,
  pz: number,
  wanted: number,
  bound2: number,
): number {
  const { x, y, z, mass, count } = candidates;
  let found = 0;
  let worst = bound2;
  for (let k = 0; k < count; k++) {
    const dx = x[k] - px;
    const dy = y[k] - py;
    const dz = z[k] - pz;
    const d2 = dx * dx + dy * dy + dz * dz;
    if (d2 >= worst) continue;
    found = insertNearest(d2, mass[k], found, wanted);
    if (found === wanted) worst = nearest2[wanted - 1];
  }
  return found;
}

/** Puts a body into the list of the nearest, which grows up to `wanted`; returns its length. */
function insertNearest(d2: number, mass: number, found: number, wanted: number): number {
  let at = found < wanted ? found : wanted - 1;
  for (; at > 0 && nearest2[at - 1] > d2; at--) {
    nearest2[at] = nearest2[at - 1];
    nearestMass[at] = nearestMass[at - 1];
  }
  nearest2[at] = d2;
  nearestMass[at] = mass;
  return Math.min(found + 1, wanted);
}

const childOrder = new Int32Array(8);
const childDistance2 = new Float64Array(8);

/** The same among all bodies of the tree, nearest cells first. */
function nearestInTree(
  tree: Octree,
  px: number,
  py: number,
  pz: number,
  wanted: number,
  bound2: number,
): number {
  const { geometry: G, topology: T, bodies } = tree;
  const { x, y, z, mass } = bodies;
  let found = 0;
  let worst = bound2;
  let depth = 1;
  stack[0] = 0;
  while (depth > 0) {
    const slot = stack[--depth];
    const t = slot * TOPOLOGY;
    const children = T[t + NODE_CHILDREN];
    if (children === 0) {
      for (let i = T[t + NODE_BEGIN]; i < T[t + NODE_END]; i++) {
        const dx = x[i] - px;
        const dy = y[i] - py;
        const dz = z[i] - pz;
        const d2 = dx * dx + dy * dy + dz * dz;
        if (d2 >= worst) continue;
        found = insertNearest(d2, mass[i], found, wanted);
        if (found === wanted) worst = nearest2[wanted - 1];
      }
      continue;
    }
    if (depth + 8 > stack.length) stack = longerStack(stack);
    const reachWorst = Math.sqrt(worst);
    const first = T[t + NODE_CHILD];
    let open = 0;
    for (let child = first; child < first + children; child++) {
      const g = child * GEOMETRY;
      const dx = G[g] - px;
      const dy = G[g + 1] - py;
      const dz = G[g + 2] - pz;
      const d2 = dx * dx + dy * dy + dz * dz;
      const reach = G[g + NODE_RADIUS] + reachWorst;
      if (d2 > reach * reach) continue;
      let at = open++;
      for (; at > 0 && childDistance2[at - 1] < d2; at--) {
        childDistance2[at] = childDistance2[at - 1];
        childOrder[at] = childOrder[at - 1];
      }
      childDistance2[at] = d2;
      childOrder[at] = child;
    }
    for (let k = 0; k < open; k++) stack[depth++] = childOrder[k];
  }
  return found;
}

/** Bodies are measured group by group: the largest nodes with at most this many. */
const GROUP = 64;
/** Squared distances are guessed to grow at most by this from body to body, and bounds widened by this. */
const GUESS_SLACK = 2.25;
const BOUND_SLACK = 1 + 1e-9;
/** Searched about a group: its radius plus this many times the expected distance of the j-th neighbour. */
const SEARCH_MARGIN = 1.05;

export function sumDensities(round: DensityRound, takeJob: TakeJob): void {
  const { tree, all, none, neighbours: j, density } = round;
  const { geometry: G, topology: T, bodies } = tree;
  const { x, y, z, input } = bodies;
  const [ox, oy, oz] = round.origin;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const sums = round.sums.subarray(job * DENSITY_SUMS, (job + 1) * DENSITY_SUMS);
    let group = 0;
    eachGroup(tree, job, (slot, coarse) => {
      const t = slot * TOPOLOGY;
      const g = slot * GEOMETRY;
      const begin = T[t + NODE_BEGIN];
      const end = T[t + NODE_END];
      const bin = coarse >= all ? -1 : MOMENTS + binOf(all, coarse) * BIN_SUMS;
      if (bin >= 0) {
        const gx = G[g] - ox;
        const gy = G[g + 1] - oy;
        const gz = G[g + 2] - oz;
        const w = (end - begin) * coarse;
        const q = w * coarse;
        const q2 = q * (gx * gx + gy * gy + gz * gz);
        if (coarse < none || group++ % MEASURED_ONE_IN !== 0) {
          const at = bin + 6;
          sums[at] += w;
          sums[at + 1] += w * gx;
          sums[at + 2] += w * gy;
          sums[at + 3] += w * gz;
          sums[at + 4] += q;
          sums[at + 5] += q * gx;
          sums[at + 6] += q * gy;
          sums[at + 7] += q * gz;
          sums[at + 8] += q2;
          return;
        }
        sums[bin + 3] += w;
        sums[bin + 4] += q;
        sums[bin + 5] += q2;
      }
      const radius = G[g + NODE_RADIUS];
      const searched = radius * (1 + SEARCH_MARGIN * Math.cbrt((j + 1) / (end - begin)));
      const together = collect(tree, G[g], G[g + 1], G[g + 2], searched);
      // The next body's neighbours are about as far as this one's: most candidates need no second look.
      let guess2 = Infinity;
      for (let i = begin; i < end; i++) {
        const px = x[i];
        const py = y[i];
        const pz = z[i];
        const sure = searched - Math.hypot(px - G[g], py - G[g + 1], pz - G[g + 2]);
        let found = together ? nearestCandidates(px, py, pz, j + 1, guess2) : 0;
        if (together && found <= j && guess2 < Infinity) {
          found = nearestCandidates(px, py, pz, j + 1, Infinity);
        }
        if (found <= j) nearestInTree(tree, px, py, pz, j + 1, Infinity);
        else if (!(nearest2[j] <= sure * sure)) {
          // What was found bounds what there is; a little more, so that equals are found again.
          nearestInTree(tree, px, py, pz, j + 1, nearest2[j] * BOUND_SLACK);
        }
        guess2 = GUESS_SLACK * nearest2[j];
        let mass = 0;
        for (let k = 1; k < j; k++) mass += nearestMass[k];
        const r3 = nearest2[j] * Math.sqrt(nearest2[j]);
        const rho = r3 > 0 ? mass / ((4 / 3) * Math.PI * r3) : 0;
        if (density.length > 0) density[input[i]] = rho;
        const dx = px - ox;
        const dy = py - oy;
        const dz = pz - oz;
        const q = rho * rho;
        sums[0] += rho;
        sums[1] += rho * dx;
        sums[2] += rho * dy;
        sums[3] += rho * dz;
        sums[4] += q;
        sums[5] += q * dx;
        sums[6] += q * dy;
        sums[7] += q * dz;
        const q2 = q * (dx * dx + dy * dy + dz * dz);
        sums[8] += q2;
        if (bin >= 0) {
          sums[bin] += rho;
          sums[bin + 1] += q;
          sums[bin + 2] += q2;
        }
      }
    });
  }
}

function binOf(all: number, coarse: number): number {
  return coarse > 0 ? Math.min(BINS - 1, Math.floor(2 * Math.log2(all / coarse))) : BINS - 1;
}

/** Mean density of a node: its mass over the sphere of its radius; of a lone body 0. */
function coarseDensity(tree: Octree, slot: number): number {
  const radius = tree.geometry[slot * GEOMETRY + NODE_RADIUS];
  const mass = tree.geometry[slot * GEOMETRY + NODE_MASS];
  return radius > 0 ? mass / ((4 / 3) * Math.PI * radius ** 3) : 0;
}

/**
 * Calls `visit` for each group of a branch (its largest nodes with at most {@link GROUP} bodies, and
 * leaves) with its slot and coarse density; a small group takes the density of the cell above it.
 */
export function eachGroup(
  tree: Octree,
  branch: number,
  visit: (slot: number, coarse: number) => void,
): void {
  const { topology: T, branchRoots, branchSlots } = tree;
  const size = (slot: number) => T[slot * TOPOLOGY + NODE_END] - T[slot * TOPOLOGY + NODE_BEGIN];
  const root = branchRoots[branch];
  const first = branchSlots[2 * branch];
  if (size(root) <= GROUP || T[root * TOPOLOGY + NODE_CHILDREN] === 0) {
    visit(root, coarseDensity(tree, root));
    return;
  }
  for (let k = first - 1; k < branchSlots[2 * branch + 1]; k++) {
    const parent = k < first ? root : k;
    if (size(parent) <= GROUP) continue;
    const child = T[parent * TOPOLOGY + NODE_CHILD];
    for (let c = child; c < child + T[parent * TOPOLOGY + NODE_CHILDREN]; c++) {
      if (size(c) > GROUP && T[c * TOPOLOGY + NODE_CHILDREN] > 0) continue;
      visit(c, coarseDensity(tree, size(c) < 6 ? parent : c));
    }
  }
}
