/** Local densities from nearest neighbours, leaf by leaf: work of the crew. */
import type { TakeJob } from '../parallel/crew.ts';
import {
  GEOMETRY,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_END,
  NODE_MASS,
  NODE_RADIUS,
  TOPOLOGY,
  type Octree,
} from './tree.ts';

/** Sums a branch gives: Σρ, Σρ x y z, Σρ², Σρ² x y z, Σρ² r², then Σρ and Σρ_coarse of bodies measured near the threshold. */
export const DENSITY_SUMS = 11;

export interface DensityRound {
  readonly tree: Octree;
  /** The j of the estimator: distance to the j-th neighbour. */
  readonly neighbours: number;
  /** Leaves with a lower coarse density are not measured body by body. */
  readonly threshold: number;
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
let stack = new Int32Array(4096);

/** Collects all bodies within `radius` of a point. */
function collect(tree: Octree, px: number, py: number, pz: number, radius: number): void {
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
        const longer = new Int32Array(stack.length * 2);
        longer.set(stack);
        stack = longer;
      }
      const first = T[t + NODE_CHILD];
      for (let child = first + children - 1; child >= first; child--) stack[depth++] = child;
      continue;
    }
    const end = T[t + NODE_END];
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
}

/** Squared distances and masses of the nearest bodies so far, nearest first; the body itself is one. */
const nearest2 = new Float64Array(64);
const nearestMass = new Float64Array(64);

/** Finds the `wanted` nearest candidates of a point, itself included; returns how many were found. */
function findNearest(px: number, py: number, pz: number, wanted: number): number {
  const { x, y, z, mass, count } = candidates;
  let found = 0;
  let worst = Infinity;
  for (let k = 0; k < count; k++) {
    const dx = x[k] - px;
    const dy = y[k] - py;
    const dz = z[k] - pz;
    const d2 = dx * dx + dy * dy + dz * dz;
    if (d2 >= worst) continue;
    let at = found < wanted ? found++ : wanted - 1;
    for (; at > 0 && nearest2[at - 1] > d2; at--) {
      nearest2[at] = nearest2[at - 1];
      nearestMass[at] = nearestMass[at - 1];
    }
    nearest2[at] = d2;
    nearestMass[at] = mass[k];
    if (found === wanted) worst = nearest2[wanted - 1];
  }
  return found;
}

/** Mean density of a leaf seen coarsely: its mass over the sphere of its radius, or its parent's. */
export function coarseDensity(tree: Octree, slot: number, parent: number): number {
  const { geometry: G, topology: T } = tree;
  const few = T[slot * TOPOLOGY + NODE_END] - T[slot * TOPOLOGY + NODE_BEGIN] < 4;
  const g = (few ? parent : slot) * GEOMETRY;
  const radius = G[g + NODE_RADIUS];
  return radius > 0 ? G[g + NODE_MASS] / ((4 / 3) * Math.PI * radius ** 3) : 0;
}

/** Searched about a leaf: its radius plus this many times the expected distance of the j-th neighbour. */
const SEARCH_MARGIN = 1.35;

export function sumDensities(round: DensityRound, takeJob: TakeJob): void {
  const { tree, threshold, neighbours: j, density } = round;
  const { geometry: G, topology: T, bodies } = tree;
  const [ox, oy, oz] = round.origin;
  // A search that starts from nothing (coincident bodies) starts from here and grows.
  const smallest = (1e-3 * G[NODE_RADIUS]) / Math.cbrt(bodies.count);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const sums = round.sums.subarray(job * DENSITY_SUMS, (job + 1) * DENSITY_SUMS);
    const add = (rho: number, px: number, py: number, pz: number) => {
      const dx = px - ox;
      const dy = py - oy;
      const dz = pz - oz;
      sums[0] += rho;
      sums[1] += rho * dx;
      sums[2] += rho * dy;
      sums[3] += rho * dz;
      const q = rho * rho;
      sums[4] += q;
      sums[5] += q * dx;
      sums[6] += q * dy;
      sums[7] += q * dz;
      sums[8] += q * (dx * dx + dy * dy + dz * dz);
    };
    eachLeaf(tree, job, (slot, parent) => {
      const coarse = coarseDensity(tree, slot, parent);
      const t = slot * TOPOLOGY;
      const g = slot * GEOMETRY;
      const begin = T[t + NODE_BEGIN];
      const end = T[t + NODE_END];
      if (coarse < threshold) return;
      const few = end - begin < 4;
      const size = few
        ? T[parent * TOPOLOGY + NODE_END] - T[parent * TOPOLOGY + NODE_BEGIN]
        : end - begin;
      const radius = G[(few ? parent : slot) * GEOMETRY + NODE_RADIUS];
      const margin = radius * SEARCH_MARGIN * Math.cbrt((j + 1) / Math.max(size, 1));
      const searched = G[g + NODE_RADIUS] + margin;
      collect(tree, G[g], G[g + 1], G[g + 2], searched);
      let collectedFor = slot;
      for (let i = begin; i < end; i++) {
        const px = bodies.x[i];
        const py = bodies.y[i];
        const pz = bodies.z[i];
        if (collectedFor !== slot) {
          collect(tree, G[g], G[g + 1], G[g + 2], searched);
          collectedFor = slot;
        }
        const fromCentre = Math.hypot(px - G[g], py - G[g + 1], pz - G[g + 2]);
        let sure = searched - fromCentre;
        let found = findNearest(px, py, pz, j + 1);
        while (found <= j || nearest2[j] > sure * sure) {
          sure = Math.max(sure * 1.6, smallest);
          collect(tree, px, py, pz, sure);
          collectedFor = -1;
          found = findNearest(px, py, pz, j + 1);
        }
        let mass = 0;
        for (let k = 1; k < j; k++) mass += nearestMass[k];
        const r3 = nearest2[j] * Math.sqrt(nearest2[j]);
        const rho = r3 > 0 ? mass / ((4 / 3) * Math.PI * r3) : 0;
        if (density.length > 0) density[bodies.input[i]] = rho;
        add(rho, px, py, pz);
        if (coarse < 4 * threshold) {
          sums[9] += rho;
          sums[10] += coarse;
        }
      }
    });
  }
}

/** Calls `visit` for each leaf of a branch with its slot and its parent's (itself, for a lone root). */
export function eachLeaf(
  tree: Octree,
  branch: number,
  visit: (slot: number, parent: number) => void,
): void {
  const { topology: T, branchRoots, branchSlots } = tree;
  const root = branchRoots[branch];
  const first = branchSlots[2 * branch];
  if (T[root * TOPOLOGY + NODE_CHILDREN] === 0) visit(root, root);
  for (let k = first - 1; k < branchSlots[2 * branch + 1]; k++) {
    const parent = k < first ? root : k;
    const child = T[parent * TOPOLOGY + NODE_CHILD];
    for (let c = child; c < child + T[parent * TOPOLOGY + NODE_CHILDREN]; c++) {
      if (T[c * TOPOLOGY + NODE_CHILDREN] === 0) visit(c, parent);
    }
  }
}
