/**
 * The octree: particles in tree order, and nodes in parallel arrays.
 *
 * Slot 0 is the root. The children of a node are neighbours and come after it, so that a reverse
 * loop over the slots of one grown branch meets every child before its parent. The first `topCount`
 * slots are the shared top of the tree; the rest belongs to branches that workers grew on their own.
 */

/** Offsets inside a node's entry of {@link Octree.geometry}. */
export const GEOMETRY = 6;
/** Centre of mass x, y, z, then total mass, radius about the centre of mass, estimated Σ m/r. */
export const NODE_X = 0;
export const NODE_Y = 1;
export const NODE_Z = 2;
export const NODE_MASS = 3;
export const NODE_RADIUS = 4;
export const NODE_DEPTH = 5;

/** Offsets inside a node's entry of {@link Octree.topology}. */
export const TOPOLOGY = 4;
export const NODE_BEGIN = 0;
export const NODE_END = 1;
export const NODE_CHILD = 2;
export const NODE_CHILDREN = 3;

/** Offsets inside a node's entry of {@link Octree.spread}. */
export const SPREAD = 5;
/** Mean and variance of e² by mass; how far any body's e² is from the mean; least and greatest e². */
export const NODE_MEAN = 0;
export const NODE_VARIANCE = 1;
export const NODE_FARTHEST = 2;
export const NODE_LEAST = 3;
export const NODE_GREATEST = 4;

/** Bodies in tree order: a copy that the tree owns, with the way back to the input order. */
export interface OrderedBodies {
  readonly count: number;
  readonly x: Float64Array;
  readonly y: Float64Array;
  readonly z: Float64Array;
  readonly mass: Float64Array;
  /** Squared softening length e² of each body; empty where one length holds for all. */
  readonly squares: Float64Array;
  /** Input index of the body at each place. */
  readonly input: Uint32Array;
}

/** Where a branch's slots lie: its root in the shared top, its other nodes from `first` on. */
export interface Octree {
  readonly bodies: OrderedBodies;
  /** {@link GEOMETRY} reals a node: NODE_X … NODE_DEPTH. Masses in input units, depth without G. */
  readonly geometry: Float64Array;
  /** {@link TOPOLOGY} integers a node: first body, end of bodies, first child's slot, number of children (0 in a leaf). */
  readonly topology: Uint32Array;
  /** {@link SPREAD} reals a node: NODE_MEAN … NODE_GREATEST of its bodies' e²; empty as `bodies.squares` is. */
  readonly spread: Float64Array;
  /** Slots in use, and how many of them are the shared top. */
  readonly nodeCount: number;
  readonly topCount: number;
  /** Slots of the roots of the branches, in tree order. */
  readonly branchRoots: Uint32Array;
  /** First slot and end of the other nodes of each branch, two numbers a branch. */
  readonly branchSlots: Uint32Array;
  readonly leafCapacity: number;
}

/** A copy of a walk's stack with room for twice as much. */
export function longerStack(stack: Int32Array): Int32Array {
  const longer = new Int32Array(stack.length * 2);
  longer.set(stack);
  return longer;
}
