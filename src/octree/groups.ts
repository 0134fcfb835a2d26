/** Groups of bodies that lie together: the tree cut into handfuls, for work that wants neighbours. */
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

/** Groups are the largest nodes with at most this many bodies, and leaves. */
export const GROUP = 80;
/** A group of fewer bodies takes the coarse density of the cell above it. */
const FEW = 6;

export interface GroupVisitor {
  /** A group, with its coarse density: mass over the sphere of its radius. */
  readonly group: (slot: number, coarse: number) => void;
  /** A node that holds groups, before these. */
  readonly enter?: (slot: number, size: number) => void;
}

let stack: Int32Array = new Int32Array(4096);

/** Visits the groups of a branch in tree order. The visitor must not visit groups itself. */
export function eachGroup(tree: Octree, branch: number, visitor: GroupVisitor): void {
  const { topology: T } = tree;
  const { group, enter } = visitor;
  const root = tree.branchRoots[branch];
  let depth = 2;
  stack[0] = root;
  stack[1] = root;
  while (depth > 0) {
    const slot = stack[--depth];
    const parent = stack[--depth];
    const t = slot * TOPOLOGY;
    const size = T[t + NODE_END] - T[t + NODE_BEGIN];
    const children = T[t + NODE_CHILDREN];
    if (size <= GROUP || children === 0) {
      group(slot, coarseDensity(tree, size < FEW ? parent : slot));
      continue;
    }
    enter?.(slot, size);
    if (depth + 16 > stack.length) stack = longerStack(stack);
    const first = T[t + NODE_CHILD];
    for (let child = first + children - 1; child >= first; child--) {
      stack[depth++] = slot;
      stack[depth++] = child;
    }
  }
}

/** Mean density of a node: its mass over the sphere of its radius; of a lone body 0. */
function coarseDensity(tree: Octree, slot: number): number {
  const radius = tree.geometry[slot * GEOMETRY + NODE_RADIUS];
  const mass = tree.geometry[slot * GEOMETRY + NODE_MASS];
  return radius > 0 ? mass / ((4 / 3) * Math.PI * radius * radius * radius) : 0;
}
