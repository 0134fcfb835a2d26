/** Multipoles of all nodes, and the estimate of the potential's depth that acceptance is judged by. */
import type { Expansion } from './expansion.ts';
import {
  GEOMETRY,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_DEPTH,
  NODE_END,
  NODE_MASS,
  NODE_RADIUS,
  TOPOLOGY,
  type Octree,
} from './tree.ts';

/** Computes the multipoles of one slot: from its bodies in a leaf, else from its children's. */
export function gatherSlot(
  tree: Octree,
  slot: number,
  expansion: Expansion,
  multipoles: Float64Array,
): void {
  const { geometry: G, topology: T, bodies } = tree;
  const stride = expansion.multipoles;
  const at = slot * stride;
  const t = slot * TOPOLOGY;
  const g = slot * GEOMETRY;
  const cx = G[g];
  const cy = G[g + 1];
  const cz = G[g + 2];
  multipoles.fill(0, at, at + stride);
  const children = T[t + NODE_CHILDREN];
  if (children === 0) {
    const { x, y, z, mass } = bodies;
    for (let i = T[t + NODE_BEGIN]; i < T[t + NODE_END]; i++) {
      expansion.addBody(multipoles, at, mass[i], x[i] - cx, y[i] - cy, z[i] - cz);
    }
    return;
  }
  const first = T[t + NODE_CHILD];
  for (let child = first; child < first + children; child++) {
    const c = child * GEOMETRY;
    const m = G[c + NODE_MASS];
    expansion.addChild(multipoles, at, child * stride, m, G[c] - cx, G[c + 1] - cy, G[c + 2] - cz);
  }
}

/** Multipoles of all nodes of a branch, children before parents. */
export function gatherBranch(
  tree: Octree,
  branch: number,
  expansion: Expansion,
  multipoles: Float64Array,
): void {
  const first = tree.branchSlots[2 * branch];
  for (let slot = tree.branchSlots[2 * branch + 1] - 1; slot >= first; slot--) {
    gatherSlot(tree, slot, expansion, multipoles);
  }
  gatherSlot(tree, tree.branchRoots[branch], expansion, multipoles);
}

/** Cells with at most this many bodies inherit the depth measured for a cell above them. */
const DEPTH_GROUP = 1024;
const stack = new Int32Array(65536);

/**
 * Estimates Σ m/r at the nodes of a branch by monopoles seen under a wide angle: good to some per
 * cent, which is all that acceptance needs. Parents get the least of their children's.
 */
export function estimateDepths(tree: Octree, branch: number, soft2: number): void {
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
      G[g + NODE_DEPTH] = depthAt(tree, G[g], G[g + 1], G[g + 2], soft2);
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

function depthAt(tree: Octree, px: number, py: number, pz: number, soft2: number): number {
  const { geometry: G, topology: T } = tree;
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
    if (spread2 + soft2 > 0) sum += G[g + NODE_MASS] / Math.sqrt(spread2 + soft2);
  }
  return sum;
}
