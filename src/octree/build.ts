/** Particles → octree: plan buckets, move bodies, grow branches, join them under a shared top. */
import { takeBuffer, takeDoubles, takeUint32 } from '../numerics/reuse.ts';
import type * as BuildTask from './build.task.ts';
import { CHUNK, type Positions } from './build.task.ts';
import { meanInverseDistance, weighParent, WIDEST_LEAF, type LeafRule } from './branch.ts';
import { joinSpread } from './spread.ts';
import { keyBox, mortonKey, planBuckets, type BucketPlan, type Octant } from './partition.ts';
import {
  GEOMETRY,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_END,
  SPREAD,
  TOPOLOGY,
  type Octree,
  type OrderedBodies,
} from './tree.ts';
import type { Crew, TaskModule } from '../parallel/crew.ts';

const TASK: TaskModule<typeof BuildTask> = {
  url: new URL('./build.task.js', import.meta.url),
  load: () => import('./build.task.ts'),
};

type Column = Float64Array | Float32Array;

/** Default number of bodies up to which a cell is not cut. */
export const LEAF_CAPACITY = 32;
/** Branches and with them the work of the crew are cut to about this part of all bodies. */
const BRANCHES = 64;
const SMALLEST_BRANCH = 2048;
const SAMPLE = 32768;

export interface BodyColumns extends Positions {
  readonly mass: Column;
  /** Squared softening length of each body, where they have lengths of their own. */
  readonly squares?: Float64Array;
}

/** Room for `count` bodies in tree order, in shared memory. */
export function allocateBodies(count: number, each: boolean): OrderedBodies {
  const column = () => takeDoubles(count);
  return {
    count,
    x: column(),
    y: column(),
    z: column(),
    mass: column(),
    squares: takeDoubles(each ? count : 0),
    input: takeUint32(count),
  };
}

/** A node of the shared top while it is planned: a range of bodies, cut further or one branch. */
interface TopNode {
  begin: number;
  end: number;
  children: TopNode[];
}

/**
 * Builds the octree of all bodies.
 * @param columns - positions and masses in input order; not changed
 * @returns the tree, which owns its copy of the bodies
 */
export async function buildOctree(
  columns: BodyColumns,
  crew: Crew,
  leafCapacity = LEAF_CAPACITY,
): Promise<Octree> {
  const count = columns.mass.length;
  const each = columns.squares !== undefined;
  const bodies = allocateBodies(count, each);
  const branchSize = Math.max(SMALLEST_BRANCH, Math.ceil(count / BRANCHES));
  const root = await partition({ ...columns, input: null }, 0, count, bodies, 0, branchSize, crew);

  // Slots of the top in breadth-first order: siblings are neighbours and come after their parent.
  const top: TopNode[] = [root];
  const firstChild: number[] = [];
  for (let slot = 0; slot < top.length; slot++) {
    firstChild.push(top.length);
    top.push(...top[slot].children);
  }
  const branches = top.flatMap((node, slot) => (node.children.length === 0 ? [slot] : []));
  branches.sort((a, b) => top[a].begin - top[b].begin);
  const ranges = sharedUint32(branches.length * 2);
  branches.forEach((slot, k) => ranges.set([top[slot].begin, top[slot].end], 2 * k));

  const rule = leafRule(columns, leafCapacity);
  for (let perLeaf = 0.35; ; perLeaf *= 2) {
    const slotCapacity =
      top.length + branches.length * 8 + Math.ceil((count * perLeaf * 16) / leafCapacity);
    const geometry = takeDoubles(slotCapacity * GEOMETRY);
    const topology = takeUint32(slotCapacity * TOPOLOGY);
    const spread = takeDoubles(each ? slotCapacity * SPREAD : 0);
    const slots = sharedUint32(branches.length * 2);
    const nextSlot = sharedUint32(1);
    nextSlot[0] = top.length;
    const rootSlots = Uint32Array.from(branches);
    const round = { bodies, rule, ranges, rootSlots, geometry, topology, spread, slots, nextSlot };
    await crew.run(TASK, 'growBranches', { ...round, slotCapacity }, branches.length);
    if (nextSlot[0] > slotCapacity) continue;
    for (let slot = top.length - 1; slot >= 0; slot--) {
      const node = top[slot];
      if (node.children.length === 0) continue;
      const t = slot * TOPOLOGY;
      topology[t + NODE_BEGIN] = node.begin;
      topology[t + NODE_END] = node.end;
      topology[t + NODE_CHILD] = firstChild[slot];
      topology[t + NODE_CHILDREN] = node.children.length;
      weighParent(bodies, slot, geometry, topology);
      if (each) joinSpread(slot, geometry, topology, spread);
    }
    return {
      bodies,
      geometry,
      topology,
      spread,
      nodeCount: nextSlot[0],
      topCount: top.length,
      branchRoots: rootSlots,
      branchSlots: slots,
      leafCapacity,
    };
  }
}

/**
 * Moves the bodies [begin, end) of `from` into tree order at `at` of `to`, and tells their top nodes.
 * A bucket that stays over-full because its key bits ended is partitioned again in its own box.
 */
async function partition(
  from: BodyColumns & { readonly input: Uint32Array | null },
  begin: number,
  end: number,
  to: OrderedBodies,
  at: number,
  branchSize: number,
  crew: Crew,
): Promise<TopNode> {
  const count = end - begin;
  const chunks = Math.ceil(count / CHUNK);
  const extents = new Float64Array(new SharedArrayBuffer(chunks * 6 * 8));
  await crew.run(TASK, 'measureExtent', { positions: pick(from), begin, end, extents }, chunks);
  const plan = planFromSample(from, begin, end, joinExtents(extents), branchSize);
  const buckets = plan.firstKeys.length;
  const bucketOf = new Uint16Array(takeBuffer(count * 2), 0, count);
  const counts = sharedUint32(chunks * buckets);
  const { box, firstKeys } = plan;
  await crew.run(
    TASK,
    'classifyBodies',
    { positions: pick(from), begin, end, box, firstKeys, bucketOf, counts },
    chunks,
  );
  const bucketBegin = placesFromCounts(counts, chunks, buckets, at);
  const scatter = { from: columnsOf(from), begin, end, bucketOf, places: counts, buckets, to };
  await crew.run(TASK, 'scatterBodies', scatter, chunks);

  const overfull: TopNode[] = [];
  const join = (octant: Octant): TopNode | null => {
    const node: TopNode = {
      begin: bucketBegin[octant.bucket],
      end: bucketBegin[octant.bucketEnd],
      children: [],
    };
    const size = node.end - node.begin;
    if (size === 0) return null;
    if (size <= branchSize) return node;
    for (const part of octant.parts) {
      const child = join(part);
      if (child) node.children.push(child);
    }
    if (node.children.length === 1) return node.children[0];
    const separable = box.cellsPerLength > 0;
    if (octant.parts.length === 0 && size > 4 * branchSize && separable) overfull.push(node);
    return node;
  };
  const root = join(plan.root) as TopNode;
  for (const node of overfull) {
    const size = node.end - node.begin;
    const inner = allocateBodies(size, to.squares.length > 0);
    const again = await partition(to, node.begin, node.end, inner, 0, branchSize, crew);
    if (again.children.length === 0) continue; // all at one point: one branch
    await crew.run(
      TASK,
      'copyBodies',
      { from: inner, to, at: node.begin },
      Math.ceil(size / CHUNK),
    );
    node.children = again.children.map((child) => shifted(child, node.begin));
  }
  return root;
}

function shifted(node: TopNode, by: number): TopNode {
  return {
    begin: node.begin + by,
    end: node.end + by,
    children: node.children.map((child) => shifted(child, by)),
  };
}

const pick = ({ x, y, z }: Positions): Positions => ({ x, y, z });

function columnsOf(from: BodyColumns & { readonly input: Uint32Array | null }) {
  const { x, y, z, mass, squares, input } = from;
  return { x, y, z, mass, ...(squares && { squares }), input };
}

function joinExtents(extents: Float64Array): Float64Array {
  const all = extents.slice(0, 6);
  for (let k = 6; k < extents.length; k += 6) {
    for (let axis = 0; axis < 3; axis++) {
      all[axis] = Math.min(all[axis], extents[k + axis]);
      all[axis + 3] = Math.max(all[axis + 3], extents[k + axis + 3]);
    }
  }
  return all;
}

/** Bodies in the sketch of where the mass is. */
const SKETCH = 64;

function leafRule({ x, y, z }: BodyColumns, capacity: number): LeafRule {
  const size = Math.min(x.length, SKETCH);
  const sketch = new Float64Array(size * 3);
  for (let k = 0; k < size; k++) {
    const i = Math.floor(((k + 0.5) * x.length) / size);
    sketch.set([x[i], y[i], z[i]], 3 * k);
  }
  // Nowhere is the mass nearer than where it is densest; there itself the nearest body is not counted.
  let densest = 0;
  for (let k = 0; k < size; k++) {
    const others = Float64Array.from(sketch);
    others.copyWithin(3 * k, 0, 3);
    const [px, py, pz] = sketch.subarray(3 * k, 3 * k + 3);
    densest = Math.max(densest, meanInverseDistance(others.subarray(3), px, py, pz, 0));
  }
  return {
    capacity,
    sketch,
    narrow: densest > 0 && densest < Infinity ? WIDEST_LEAF / densest : 0,
  };
}

/** A sample at equal steps with a hashed offset in each, so that order in the file has no say. */
function planFromSample(
  from: Positions,
  begin: number,
  end: number,
  extent: Float64Array,
  branchSize: number,
): BucketPlan {
  const count = end - begin;
  const box = keyBox(extent);
  const size = count <= branchSize ? 1 : Math.min(count, SAMPLE);
  const keys = new Float64Array(size);
  for (let k = 0; k < size; k++) {
    const low = Math.floor((k * count) / size);
    const width = Math.floor(((k + 1) * count) / size) - low;
    const i = begin + low + ((Math.imul(k + 1, 0x9e3779b1) >>> 8) % width);
    keys[k] = mortonKey(box, from.x[i], from.y[i], from.z[i]);
  }
  return planBuckets(box, keys, Math.max(1, (branchSize / 2) * (size / count)));
}

/** Turns counts (chunk by bucket) into places, bucket by bucket and in it chunk by chunk. */
function placesFromCounts(
  counts: Uint32Array,
  chunks: number,
  buckets: number,
  at: number,
): Uint32Array {
  const bucketBegin = new Uint32Array(buckets + 1);
  let place = at;
  for (let bucket = 0; bucket < buckets; bucket++) {
    bucketBegin[bucket] = place;
    for (let chunk = 0; chunk < chunks; chunk++) {
      const k = chunk * buckets + bucket;
      const here = counts[k];
      counts[k] = place;
      place += here;
    }
  }
  bucketBegin[buckets] = place;
  return bucketBegin;
}

function sharedUint32(count: number): Uint32Array {
  return new Uint32Array(new SharedArrayBuffer(count * 4));
}
