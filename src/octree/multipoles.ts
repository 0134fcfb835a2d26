/** Multipoles of all nodes, and the estimate of the potential's depth that acceptance is judged by. */
import type { Expansions } from './expansions.ts';
import {
  GEOMETRY,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_DEPTH,
  NODE_END,
  NODE_MASS,
  NODE_MEAN,
  NODE_RADIUS,
  SPREAD,
  TOPOLOGY,
  type Octree,
} from './tree.ts';

/** Computes the multipoles of one slot: from its bodies in a leaf, else from its children's. */
export function gatherSlot(
  tree: Octree,
  slot: number,
  { plain: expansion, ofSpread, multipoles: stride }: Expansions,
  multipoles: Float64Array,
): void {
  const { geometry: G, topology: T, bodies } = tree;
  const at = slot * stride;
  const t = slot * TOPOLOGY;
  const g = slot * GEOMETRY;
  const cx = G[g];
  const cy = G[g + 1];
  const cz = G[g + 2];
  const { spread } = tree;
  const mean = ofSpread === null ? 0 : spread[slot * SPREAD + NODE_MEAN];
  multipoles.fill(0, at, at + stride);
  const children = T[t + NODE_CHILDREN];
  if (children === 0) {
    const { x, y, z, mass, squares } = bodies;
    for (let i = T[t + NODE_BEGIN]; i < T[t + NODE_END]; i++) {
      const dx = x[i] - cx;
      const dy = y[i] - cy;
      const dz = z[i] - cz;
      expansion.addBody(multipoles, at, mass[i], dx, dy, dz);
      ofSpread?.addBody(multipoles, at, mass[i], dx, dy, dz, (squares[i] - mean) / 2);
    }
    return;
  }
  const first = T[t + NODE_CHILD];
  for (let child = first; child < first + children; child++) {
    const c = child * GEOMETRY;
    const m = G[c + NODE_MASS];
    const dx = G[c] - cx;
    const dy = G[c + 1] - cy;
    const dz = G[c + 2] - cz;
    expansion.addChild(multipoles, at, child * stride, m, dx, dy, dz);
    const ds = (spread[child * SPREAD + NODE_MEAN] - mean) / 2;
    ofSpread?.addChild(multipoles, at, child * stride, m, dx, dy, dz, ds);
  }
}

/** Multipoles of all nodes of a branch, children before parents. */
export function gatherBranch(
  tree: Octree,
  branch: number,
  expansions: Expansions,
  multipoles: Float64Array,
): void {
  const first = tree.branchSlots[2 * branch];
  for (let slot = tree.branchSlots[2 * branch + 1] - 1; slot >= first; slot--) {
    gatherSlot(tree, slot, expansions, multipoles);
  }
  gatherSlot(tree, tree.branchRoots[branch], expansions, multipoles);
}

/** Cells with at most this many bodies inherit the depth measured for a cell above them. */
const DEPTH_GROUP = 1024;
const stack = new Int32Array(65536);

/**
 * Estimates Σ m/r at the nodes of a branch by monopoles seen under a wide angle: good to some per
 * cent, which is all that acceptance needs. Parents get the least of their children's.
 * @param soft2 - ε² of Plummer softening, null where it is the sum of two cells' means, else 0
 */
export function estimateDepths(tree: Octree, branch: number, soft2: number | null): void {
  const { geometry: G, topology: T } = tree;
  const rootSlot = tree.branchRoots[branch];
  const first = tree.branchSlots[2 * branch];
  const end = tree.branchSlots[2 * branch + 1];
  // Downwards: the largest cells below the group size are measured, those below them inherit.
  for (let k = first - 1; k < end; k++) {
    const slot = k < first ? rootSlot : k;
    const t = slot * TOPOLOGY;
    const g = slot * GEOMETRY;
    const size = T[t + NODE_END] - T[t + NODE_BEGIN];
    const children = T[t + NODE_CHILDREN];
    if (G[g + NODE_DEPTH] === 0 && (size <= DEPTH_GROUP || children === 0)) {
      const own2 = soft2 ?? tree.spread[slot * SPREAD + NODE_MEAN];
      G[g + NODE_DEPTH] = depthAt(tree, G[g], G[g + 1], G[g + 2], own2, soft2 === null);
    }
    const child = T[t + NODE_CHILD];
    for (let c = child; c < child + children; c++) {
      G[c * GEOMETRY + NODE_DEPTH] = G[g + NODE_DEPTH];
    }
  }
  for (let slot = end - 1; slot >= first; slot--) leastOfChildren(tree, slot);
  leastOfChildren(tree, rootSlot);
}

/** Gives a node that has children the least depth among them. */
export function leastOfChildren(tree: Octree, slot: number): void {
  const { geometry: G, topology: T } = tree;
  const children = T[slot * TOPOLOGY + NODE_CHILDREN];
  if (children === 0) return;
  const child = T[slot * TOPOLOGY + NODE_CHILD];
  let least = Infinity;
  for (let c = child; c < child + children; c++) {
    least = Math.min(least, G[c * GEOMETRY + NODE_DEPTH]);
  }
  G[slot * GEOMETRY + NODE_DEPTH] = least;
}

function depthAt(
  tree: Octree,
  px: number,
  py: number,
  pz: number,
  own2: number,
  each: boolean,
): number {
  const { geometry: G, topology: T, spread } = tree;
  let sum = 0;
  let depth = 1;
  stack[0] = 0;
  while (depth > 0) {
    const slot = stack[--depth];
    const g = slot * GEOMETRY;
    const t = slot * TOPOLOGY;
    const dx = G[g] - px;
    const dy = G[g + 1] - py;
    const dz = G[g + 2] - pz;
    const d2 = dx * dx + dy * dy + dz * dz;
    const r = G[g + NODE_RADIUS];
    const children = T[t + NODE_CHILDREN];
    if (children > 0 && r * r > d2 && depth + 8 < stack.length) {
      const first = T[t + NODE_CHILD];
      for (let child = first; child < first + children; child++) stack[depth++] = child;
      continue;
    }
    const spread2 = children === 0 ? d2 + r * r : d2;
    const soft2 = each ? own2 + spread[slot * SPREAD + NODE_MEAN] : own2;
    if (spread2 + soft2 > 0) sum += G[g + NODE_MASS] / Math.sqrt(spread2 + soft2);
  }
  return sum;
}
