/**
 * Growing one branch: the bodies of a range are sorted into octants of octants until few are left.
 *
 * A cell is cut at its middle; if all bodies fall into one octant, the cell shrinks to the cube that
 * just holds them and is cut again. So depth has no limit: a dense core in a huge box, or one body
 * at 1e12, costs no more levels than there is structure. A cell whose bodies have very different
 * softening lengths of their own is cut in two by these instead, and both parts keep the cube.
 */
import {
  GEOMETRY,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_DEPTH,
  NODE_END,
  NODE_MASS,
  NODE_RADIUS,
  NODE_X,
  NODE_Y,
  NODE_Z,
  TOPOLOGY,
  type Octree,
  type OrderedBodies,
} from './tree.ts';
import { gatherSpread, joinSpread, spreadOf, whereToCut } from './spread.ts';

/**
 * When a cell is a leaf: it holds few bodies, and is not wide as seen from where the mass is.
 * Far outside a handful of bodies may fill a cell as wide as its distance; expansions about such a
 * cell's centre would be poor for each of them, so it is cut further.
 */
export interface LeafRule {
  readonly capacity: number;
  /** Positions of some bodies of the whole set, x y z: a sketch of where the mass is. */
  readonly sketch: Float64Array;
  /** Half width up to which no cell is wide wherever it lies. */
  readonly narrow: number;
}

/** Largest half width of a leaf over the harmonic mean of its distances from the mass. */
export const WIDEST_LEAF = 0.12;

/** Mean of 1/r over the sketch, seen from a cell: one over the distance that counts for the potential. */
export function meanInverseDistance(
  sketch: Float64Array,
  x: number,
  y: number,
  z: number,
  half: number,
): number {
  let sum = 0;
  for (let k = 0; k < sketch.length; k += 3) {
    const dx = sketch[k] - x;
    const dy = sketch[k + 1] - y;
    const dz = sketch[k + 2] - z;
    sum += 1 / Math.sqrt(dx * dx + dy * dy + dz * dz + half * half);
  }
  return (3 * sum) / sketch.length;
}

/** Scratch of one worker, reused from branch to branch; grows when a branch needs more. */
export class BranchScratch {
  bodies = 0;
  x = new Float64Array(0);
  y = new Float64Array(0);
  z = new Float64Array(0);
  mass = new Float64Array(0);
  squares = new Float64Array(0);
  input = new Uint32Array(0);
  octant = new Uint8Array(0);
  nodes = 0;
  begin = new Uint32Array(0);
  end = new Uint32Array(0);
  child = new Uint32Array(0);
  children = new Uint8Array(0);
  /** 1 if the node's bodies lie in the scratch arrays, 0 if in the tree's own. */
  inScratch = new Uint8Array(0);
  /** Cube of each node: middle and half width. */
  cellX = new Float64Array(0);
  cellY = new Float64Array(0);
  cellZ = new Float64Array(0);
  cellHalf = new Float64Array(0);

  holdBodies(count: number, each: boolean): void {
    if (each && count > this.squares.length)
      this.squares = new Float64Array(Math.ceil(count * 1.25));
    if (count <= this.bodies) return;
    this.bodies = Math.ceil(count * 1.25);
    this.x = new Float64Array(this.bodies);
    this.y = new Float64Array(this.bodies);
    this.z = new Float64Array(this.bodies);
    this.mass = new Float64Array(this.bodies);
    this.input = new Uint32Array(this.bodies);
    this.octant = new Uint8Array(this.bodies);
  }

  holdNodes(count: number): void {
    if (count <= this.nodes) return;
    const size = Math.max(1024, count * 2);
    this.begin = grown(this.begin, new Uint32Array(size));
    this.end = grown(this.end, new Uint32Array(size));
    this.child = grown(this.child, new Uint32Array(size));
    this.children = grown(this.children, new Uint8Array(size));
    this.inScratch = grown(this.inScratch, new Uint8Array(size));
    this.cellX = grown(this.cellX, new Float64Array(size));
    this.cellY = grown(this.cellY, new Float64Array(size));
    this.cellZ = grown(this.cellZ, new Float64Array(size));
    this.cellHalf = grown(this.cellHalf, new Float64Array(size));
    this.nodes = size;
  }
}

function grown<T extends Float64Array | Uint32Array | Uint8Array>(old: T, larger: T): T {
  larger.set(old);
  return larger;
}

/** Room for the extent of a range: lowest and highest x, y, z. */
const extent = new Float64Array(6);
const octantCount = new Uint32Array(8);
const octantPlace = new Uint32Array(8);

/**
 * Sorts the bodies [begin, end) into tree order and leaves the branch's nodes in `scratch`.
 * Local node 0 is the branch's root; the children of a node are neighbours and come after it.
 * @returns the number of nodes
 */
export function growBranch(
  bodies: OrderedBodies,
  begin: number,
  end: number,
  rule: LeafRule,
  scratch: BranchScratch,
): number {
  const each = bodies.squares.length > 0;
  scratch.holdBodies(end - begin, each);
  scratch.holdNodes(1);
  scratch.begin[0] = begin;
  scratch.end[0] = end;
  scratch.inScratch[0] = 0;
  shrinkCell(bodies, scratch, begin, 0);
  let count = 1;
  for (let node = 0; node < count; node++) {
    scratch.holdNodes(count + 8);
    const size = scratch.end[node] - scratch.begin[node];
    let made = each && size > 1 ? cutBySpread(bodies, scratch, begin, node, count, rule) : 0;
    if (made === 0 && (size > rule.capacity || (size > 1 && isWide(scratch, node, rule)))) {
      made = cutCell(bodies, scratch, begin, node, count);
      if (made === 0 && shrinkCell(bodies, scratch, begin, node)) {
        made = cutCell(bodies, scratch, begin, node, count);
      }
    }
    scratch.children[node] = made;
    scratch.child[node] = count;
    count += made;
    if (made === 0 && scratch.inScratch[node] === 1) bringHome(bodies, scratch, begin, node);
  }
  return count;
}

function isWide(scratch: BranchScratch, node: number, { sketch, narrow }: LeafRule): boolean {
  const half = scratch.cellHalf[node];
  if (half <= narrow) return false;
  const { cellX, cellY, cellZ } = scratch;
  const inverse = meanInverseDistance(sketch, cellX[node], cellY[node], cellZ[node], half);
  return half * inverse > WIDEST_LEAF;
}

/** Sets the node's cell to the cube that just holds its bodies; false if all lie at one point. */
function shrinkCell(
  bodies: OrderedBodies,
  scratch: BranchScratch,
  origin: number,
  node: number,
): boolean {
  const from = scratch.inScratch[node] === 1;
  const shift = from ? origin : 0;
  const begin = scratch.begin[node] - shift;
  const end = scratch.end[node] - shift;
  const x = from ? scratch.x : bodies.x;
  const y = from ? scratch.y : bodies.y;
  const z = from ? scratch.z : bodies.z;
  extentOf(x, y, z, begin, end);
  const half = Math.max(extent[3] - extent[0], extent[4] - extent[1], extent[5] - extent[2]) / 2;
  scratch.cellX[node] = between(extent[0], extent[3]);
  scratch.cellY[node] = between(extent[1], extent[4]);
  scratch.cellZ[node] = between(extent[2], extent[5]);
  scratch.cellHalf[node] = half;
  return extent[3] > extent[0] || extent[4] > extent[1] || extent[5] > extent[2];
}

/** A number m with low ≤ m < high where low < high, so that cutting at m leaves no side empty. */
function between(low: number, high: number): number {
  const m = low + (high - low) / 2;
  return m < high ? m : low;
}

function extentOf(
  x: Float64Array,
  y: Float64Array,
  z: Float64Array,
  begin: number,
  end: number,
): void {
  let lowX = Infinity;
  let lowY = Infinity;
  let lowZ = Infinity;
  let highX = -Infinity;
  let highY = -Infinity;
  let highZ = -Infinity;
  for (let i = begin; i < end; i++) {
    const xi = x[i];
    const yi = y[i];
    const zi = z[i];
    if (xi < lowX) lowX = xi;
    if (xi > highX) highX = xi;
    if (yi < lowY) lowY = yi;
    if (yi > highY) highY = yi;
    if (zi < lowZ) lowZ = zi;
    if (zi > highZ) highZ = zi;
  }
  extent[0] = lowX;
  extent[1] = lowY;
  extent[2] = lowZ;
  extent[3] = highX;
  extent[4] = highY;
  extent[5] = highZ;
}

/** Cuts the cell in two by e² if that is what its bodies differ by most; returns the children made. */
function cutBySpread(
  bodies: OrderedBodies,
  scratch: BranchScratch,
  origin: number,
  node: number,
  next: number,
  rule: LeafRule,
): number {
  const fromScratch = scratch.inScratch[node] === 1;
  const shift = fromScratch ? origin : 0;
  const begin = scratch.begin[node] - shift;
  const end = scratch.end[node] - shift;
  const squares = fromScratch ? scratch.squares : bodies.squares;
  const mass = fromScratch ? scratch.mass : bodies.mass;
  const half = scratch.cellHalf[node];
  const spread = spreadOf(squares, mass, begin, end);
  const cut = whereToCut(spread, half, end - begin <= rule.capacity);
  if (Number.isNaN(cut)) return 0;
  octantCount.fill(0);
  for (let i = begin, k = 0; i < end; i++, k++) {
    const o = +(squares[i] > cut);
    scratch.octant[k] = o;
    octantCount[o]++;
  }
  return moveBodies(bodies, scratch, origin, node, next, 0, half);
}

/**
 * Cuts the node's cell at its middle and moves the bodies to the other set of arrays, octant by octant.
 * @returns the number of children made from slot `next` on, or 0 (nothing moved) if one octant holds all
 */
function cutCell(
  bodies: OrderedBodies,
  scratch: BranchScratch,
  origin: number,
  node: number,
  next: number,
): number {
  const fromScratch = scratch.inScratch[node] === 1;
  const shift = fromScratch ? origin : 0;
  const begin = scratch.begin[node] - shift;
  const end = scratch.end[node] - shift;
  const x = fromScratch ? scratch.x : bodies.x;
  const y = fromScratch ? scratch.y : bodies.y;
  const z = fromScratch ? scratch.z : bodies.z;
  const octant = scratch.octant;
  const cx = scratch.cellX[node];
  const cy = scratch.cellY[node];
  const cz = scratch.cellZ[node];

  octantCount.fill(0);
  for (let i = begin, k = 0; i < end; i++, k++) {
    const o = +(x[i] > cx) | (+(y[i] > cy) << 1) | (+(z[i] > cz) << 2);
    octant[k] = o;
    octantCount[o]++;
  }
  const half = scratch.cellHalf[node] / 2;
  return moveBodies(bodies, scratch, origin, node, next, half, half);
}

/**
 * Moves the bodies of a node to the other set of arrays, by `scratch.octant` of each, and makes children.
 * @param away - how far the middles of the children's cubes are from the node's along each axis
 * @param half - half width of these cubes
 * @returns as {@link cutCell}
 */
function moveBodies(
  bodies: OrderedBodies,
  scratch: BranchScratch,
  origin: number,
  node: number,
  next: number,
  away: number,
  half: number,
): number {
  const fromScratch = scratch.inScratch[node] === 1;
  const shift = fromScratch ? origin : 0;
  const begin = scratch.begin[node] - shift;
  const end = scratch.end[node] - shift;
  const x = fromScratch ? scratch.x : bodies.x;
  const y = fromScratch ? scratch.y : bodies.y;
  const z = fromScratch ? scratch.z : bodies.z;
  const mass = fromScratch ? scratch.mass : bodies.mass;
  const input = fromScratch ? scratch.input : bodies.input;
  const toX = fromScratch ? bodies.x : scratch.x;
  const toY = fromScratch ? bodies.y : scratch.y;
  const toZ = fromScratch ? bodies.z : scratch.z;
  const toMass = fromScratch ? bodies.mass : scratch.mass;
  const toInput = fromScratch ? bodies.input : scratch.input;
  const octant = scratch.octant;
  const toBegin = scratch.begin[node] - (fromScratch ? 0 : origin);
  for (let o = 0, place = toBegin; o < 8; o++) {
    if (octantCount[o] === end - begin) return 0;
    octantPlace[o] = place;
    place += octantCount[o];
  }
  for (let i = begin, k = 0; i < end; i++, k++) {
    const place = octantPlace[octant[k]]++;
    toX[place] = x[i];
    toY[place] = y[i];
    toZ[place] = z[i];
    toMass[place] = mass[i];
    toInput[place] = input[i];
  }
  if (bodies.squares.length > 0) {
    const squares = fromScratch ? scratch.squares : bodies.squares;
    const toSquares = fromScratch ? bodies.squares : scratch.squares;
    // The places are at the ends of the octants now: going backwards fills them in the same order.
    for (let i = end - 1, k = end - begin - 1; i >= begin; i--, k--) {
      toSquares[--octantPlace[octant[k]]] = squares[i];
    }
  }
  const cx = scratch.cellX[node];
  const cy = scratch.cellY[node];
  const cz = scratch.cellZ[node];
  let made = 0;
  let childBegin = scratch.begin[node];
  for (let o = 0; o < 8; o++) {
    const size = octantCount[o];
    if (size === 0) continue;
    const child = next + made++;
    scratch.begin[child] = childBegin;
    childBegin += size;
    scratch.end[child] = childBegin;
    scratch.inScratch[child] = fromScratch ? 0 : 1;
    scratch.cellX[child] = cx + (o & 1 ? away : -away);
    scratch.cellY[child] = cy + (o & 2 ? away : -away);
    scratch.cellZ[child] = cz + (o & 4 ? away : -away);
    scratch.cellHalf[child] = half;
  }
  return made;
}

/** Copies a leaf's bodies from the scratch arrays to their place in the tree's own. */
function bringHome(
  bodies: OrderedBodies,
  scratch: BranchScratch,
  origin: number,
  node: number,
): void {
  const end = scratch.end[node];
  for (let i = scratch.begin[node], k = i - origin; i < end; i++, k++) {
    bodies.x[i] = scratch.x[k];
    bodies.y[i] = scratch.y[k];
    bodies.z[i] = scratch.z[k];
    bodies.mass[i] = scratch.mass[k];
    bodies.input[i] = scratch.input[k];
  }
  if (bodies.squares.length > 0) {
    const begin = scratch.begin[node];
    bodies.squares.set(scratch.squares.subarray(begin - origin, end - origin), begin);
  }
}

/**
 * Writes a grown branch into the tree: its root at slot `rootSlot`, the others from `firstSlot` on,
 * with mass, centre of mass and radius of every node, and its spread where that is wanted.
 */
export function plantBranch(
  bodies: OrderedBodies,
  scratch: BranchScratch,
  nodeCount: number,
  rootSlot: number,
  firstSlot: number,
  { geometry, topology, spread }: Pick<Octree, 'geometry' | 'topology' | 'spread'>,
): void {
  for (let node = nodeCount - 1; node >= 0; node--) {
    const slot = node === 0 ? rootSlot : firstSlot + node - 1;
    const t = slot * TOPOLOGY;
    const children = scratch.children[node];
    topology[t + NODE_BEGIN] = scratch.begin[node];
    topology[t + NODE_END] = scratch.end[node];
    topology[t + NODE_CHILD] = children > 0 ? firstSlot + scratch.child[node] - 1 : 0;
    topology[t + NODE_CHILDREN] = children;
    if (children === 0) weighLeaf(bodies, slot, geometry, topology);
    else weighParent(bodies, slot, geometry, topology);
    if (spread.length === 0) continue;
    if (children === 0) gatherSpread(bodies, slot, topology, spread);
    else joinSpread(slot, geometry, topology, spread);
  }
}

/** Mass, centre of mass and radius of a leaf from its bodies. A leaf without mass keeps its middle. */
function weighLeaf(
  bodies: OrderedBodies,
  slot: number,
  geometry: Float64Array,
  topology: Uint32Array,
): void {
  const begin = topology[slot * TOPOLOGY + NODE_BEGIN];
  const end = topology[slot * TOPOLOGY + NODE_END];
  const { x, y, z, mass } = bodies;
  // Relative to the first body, so that a small leaf far from the origin keeps its digits.
  const x0 = x[begin];
  const y0 = y[begin];
  const z0 = z[begin];
  let m = 0;
  let sx = 0;
  let sy = 0;
  let sz = 0;
  for (let i = begin; i < end; i++) {
    const mi = mass[i];
    m += mi;
    sx += mi * (x[i] - x0);
    sy += mi * (y[i] - y0);
    sz += mi * (z[i] - z0);
  }
  const g = slot * GEOMETRY;
  geometry[g + NODE_X] = m > 0 ? x0 + sx / m : x0;
  geometry[g + NODE_Y] = m > 0 ? y0 + sy / m : y0;
  geometry[g + NODE_Z] = m > 0 ? z0 + sz / m : z0;
  geometry[g + NODE_MASS] = m;
  geometry[g + NODE_RADIUS] = radiusOfBodies(bodies, begin, end, geometry, g);
  geometry[g + NODE_DEPTH] = 0;
}

function radiusOfBodies(
  bodies: OrderedBodies,
  begin: number,
  end: number,
  geometry: Float64Array,
  g: number,
): number {
  const { x, y, z } = bodies;
  const cx = geometry[g + NODE_X];
  const cy = geometry[g + NODE_Y];
  const cz = geometry[g + NODE_Z];
  let r2 = 0;
  for (let i = begin; i < end; i++) {
    const dx = x[i] - cx;
    const dy = y[i] - cy;
    const dz = z[i] - cz;
    const d2 = dx * dx + dy * dy + dz * dz;
    if (d2 > r2) r2 = d2;
  }
  return Math.sqrt(r2);
}

/** Above this many bodies a node's radius is bounded from its children's instead of measured. */
const MEASURE_RADIUS_UP_TO = 512;

/** Mass, centre of mass and radius of a node from its children, which must be weighed already. */
export function weighParent(
  bodies: OrderedBodies,
  slot: number,
  geometry: Float64Array,
  topology: Uint32Array,
): void {
  const t = slot * TOPOLOGY;
  const first = topology[t + NODE_CHILD];
  const last = first + topology[t + NODE_CHILDREN];
  const x0 = geometry[first * GEOMETRY + NODE_X];
  const y0 = geometry[first * GEOMETRY + NODE_Y];
  const z0 = geometry[first * GEOMETRY + NODE_Z];
  let m = 0;
  let sx = 0;
  let sy = 0;
  let sz = 0;
  for (let child = first; child < last; child++) {
    const c = child * GEOMETRY;
    const mc = geometry[c + NODE_MASS];
    m += mc;
    sx += mc * (geometry[c + NODE_X] - x0);
    sy += mc * (geometry[c + NODE_Y] - y0);
    sz += mc * (geometry[c + NODE_Z] - z0);
  }
  const g = slot * GEOMETRY;
  const cx = m > 0 ? x0 + sx / m : x0;
  const cy = m > 0 ? y0 + sy / m : y0;
  const cz = m > 0 ? z0 + sz / m : z0;
  geometry[g + NODE_X] = cx;
  geometry[g + NODE_Y] = cy;
  geometry[g + NODE_Z] = cz;
  geometry[g + NODE_MASS] = m;
  geometry[g + NODE_DEPTH] = 0;
  const begin = topology[t + NODE_BEGIN];
  const end = topology[t + NODE_END];
  if (end - begin <= MEASURE_RADIUS_UP_TO) {
    geometry[g + NODE_RADIUS] = radiusOfBodies(bodies, begin, end, geometry, g);
    return;
  }
  let radius = 0;
  for (let child = first; child < last; child++) {
    const c = child * GEOMETRY;
    const dx = geometry[c + NODE_X] - cx;
    const dy = geometry[c + NODE_Y] - cy;
    const dz = geometry[c + NODE_Z] - cz;
    const reach = Math.sqrt(dx * dx + dy * dy + dz * dz) + geometry[c + NODE_RADIUS];
    if (reach > radius) radius = reach;
  }
  geometry[g + NODE_RADIUS] = radius;
}
