/**
 * Nearest neighbours of many bodies that lie together.
 *
 * A search from the root would pass some hundred nodes for each handful of bodies. So the nodes near a
 * large cell are listed once, those near a smaller one are taken from that list, and the bodies near a
 * group from the smaller list.
 */
import {
  GEOMETRY,
  longerStack,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_END,
  NODE_RADIUS,
  TOPOLOGY,
  type Octree,
} from './tree.ts';

/** A list of more nodes is given up: its cell is far out, and wide enough to hold what is dense. */
const MOST_LISTED = 1024;

let stack: Int32Array = new Int32Array(4096);

/** All nodes that meet a sphere, none much larger than asked: whatever lies in the sphere lies in them. */
class NodeList {
  count = 0;
  slots: Int32Array = new Int32Array(MOST_LISTED + 1);
  x = 0;
  y = 0;
  z = 0;
  radius = -1;

  covers(px: number, py: number, pz: number, radius: number): boolean {
    const dx = px - this.x;
    const dy = py - this.y;
    const dz = pz - this.z;
    const room = this.radius - radius;
    return room >= 0 && dx * dx + dy * dy + dz * dz <= room * room;
  }
}

/** Cells of at most so many bodies get a list of the nodes around them. */
const LISTED = [4096, 512];
/** A list reaches beyond its cell by this times the distance to be searched at the cell's mean density. */
const LIST_MARGIN = 1.6;
/** Nodes of a list hold at most this share of the bodies of the cell. */
const NODE_SHARE = 1 / 8;
/** The box around a group is searched as far out as this many times the expected distance of the last neighbour. */
const SEARCH_MARGIN = 1.3;
/** Least side of a group's box over its largest, for the density of its bodies. */
const LEAST_SIDE = 0.25;
/** Cells of at most so many bodies are looked through without asking which of their children are near. */
const SCANNED = 40;

/** Where bodies are collected: what lies both in a box and in the sphere about its middle. */
interface SearchBox {
  x: number;
  y: number;
  z: number;
  halfX: number;
  halfY: number;
  halfZ: number;
  radius: number;
}

/**
 * Bodies near a group, copied out of the tree: positions and places in tree order. Like all scratch of
 * the inner loops these are constants of the module with a fixed size: the optimiser then knows where
 * they lie, and the loops take half the time.
 */
const CANDIDATES = 2048;
const candidateX = new Float64Array(CANDIDATES);
const candidateY = new Float64Array(CANDIDATES);
const candidateZ = new Float64Array(CANDIDATES);
const candidatePlace = new Uint32Array(CANDIDATES);
/** Those of the candidates that come into question for one body. */
const nearDistance2 = new Float64Array(CANDIDATES);
const nearPlace = new Uint32Array(CANDIDATES);
/** Most neighbours that can be asked for. */
const MOST_WANTED = 64;
const foundDistance2 = new Float64Array(MOST_WANTED);
const foundPlace = new Uint32Array(MOST_WANTED);
const lists = LISTED.map(() => new NodeList());
/** Centres and radii of the nodes of the last list, the one that groups are looked up in. */
const listedX = new Float64Array(MOST_LISTED + 1);
const listedY = new Float64Array(MOST_LISTED + 1);
const listedZ = new Float64Array(MOST_LISTED + 1);
const listedRadius = new Float64Array(MOST_LISTED + 1);
const childOrder = new Int32Array(8);
const childDistance2 = new Float64Array(8);

/** Squared distances are guessed to grow at most by this from body to body, and bounds widened by this. */
const GUESS_SLACK = 2.25;
const BOUND_SLACK = 1 + 1e-9;

/** Finds the nearest neighbours of bodies, group by group. One at a time in a thread. */
export class Surroundings {
  /** Squared distances of the nearest bodies, nearest first; the body itself is one of them. */
  readonly distance2 = foundDistance2;
  /** Their places in tree order. */
  readonly place = foundPlace;
  private readonly tree: Octree;
  private readonly wanted: number;
  /** All bodies as near as this to any of the group are candidates; −1 if they were too many. */
  private margin = -1;
  private guess2 = Infinity;
  /** Candidates in use. */
  private count = 0;
  private readonly box: SearchBox = { x: 0, y: 0, z: 0, halfX: 0, halfY: 0, halfZ: 0, radius: 0 };

  /** @param wanted - number of nearest bodies to find, each body itself included */
  constructor(tree: Octree, wanted: number) {
    this.tree = tree;
    this.wanted = wanted;
    if (!(wanted >= 1 && wanted <= MOST_WANTED)) throw new RangeError(`${wanted} neighbours`);
    for (const list of lists) list.radius = -1;
  }

  /** Lists the nodes around a cell that holds groups. */
  enter(slot: number, size: number): void {
    const level = size <= LISTED[1] ? 1 : size <= LISTED[0] ? 0 : -1;
    if (level < 0) return;
    const list = lists[level];
    const { geometry: G } = this.tree;
    const g = slot * GEOMETRY;
    const x = G[g];
    const y = G[g + 1];
    const z = G[g + 2];
    const reach = G[g + NODE_RADIUS] * (1 + LIST_MARGIN * this.share(size));
    if (list.covers(x, y, z, reach)) return;
    const from = level === 1 && lists[0].covers(x, y, z, reach) ? lists[0] : null;
    this.fill(list, x, y, z, reach, from, size * NODE_SHARE);
    if (level === 0) return;
    for (let k = 0; k < list.count; k++) {
      const h = list.slots[k] * GEOMETRY;
      listedX[k] = G[h];
      listedY[k] = G[h + 1];
      listedZ[k] = G[h + 2];
      listedRadius[k] = G[h + NODE_RADIUS];
    }
  }

  /** Collects the bodies around a group. */
  openGroup(slot: number): void {
    const { topology: T, bodies } = this.tree;
    const { x, y, z } = bodies;
    const begin = T[slot * TOPOLOGY + NODE_BEGIN];
    const end = T[slot * TOPOLOGY + NODE_END];
    let lowX = x[begin];
    let lowY = y[begin];
    let lowZ = z[begin];
    let highX = lowX;
    let highY = lowY;
    let highZ = lowZ;
    for (let i = begin + 1; i < end; i++) {
      if (x[i] < lowX) lowX = x[i];
      if (x[i] > highX) highX = x[i];
      if (y[i] < lowY) lowY = y[i];
      if (y[i] > highY) highY = y[i];
      if (z[i] < lowZ) lowZ = z[i];
      if (z[i] > highZ) highZ = z[i];
    }
    const box = this.box;
    box.x = lowX + (highX - lowX) / 2;
    box.y = lowY + (highY - lowY) / 2;
    box.z = lowZ + (highZ - lowZ) / 2;
    const halfX = (highX - lowX) / 2;
    const halfY = (highY - lowY) / 2;
    const halfZ = (highZ - lowZ) / 2;
    // The box around a few bodies is smaller than their share of space; a flat one tells little.
    const size = end - begin;
    const widest = Math.max(halfX, halfY, halfZ);
    const least = widest * LEAST_SIDE;
    const share =
      (8 *
        Math.max(halfX, least) *
        Math.max(halfY, least) *
        Math.max(halfZ, least) *
        ((size + 1) / (size - 1 || 1)) ** 3) /
      size;
    const expected = Math.cbrt((share * this.wanted) / ((4 / 3) * Math.PI));
    const margin = SEARCH_MARGIN * expected;
    box.halfX = halfX + margin;
    box.halfY = halfY + margin;
    box.halfZ = halfZ + margin;
    box.radius = Math.sqrt(halfX * halfX + halfY * halfY + halfZ * halfZ) + margin;
    this.margin = widest > 0 && this.collect() ? margin : -1;
    this.guess2 = GUESS_SLACK * expected * expected;
  }

  /** Finds the nearest bodies of one body of the group; there must be as many as wanted. */
  find(place: number): void {
    const { wanted, margin } = this;
    const { bodies } = this.tree;
    const px = bodies.x[place];
    const py = bodies.y[place];
    const pz = bodies.z[place];
    let enough = false;
    if (margin >= 0) {
      // The next body's neighbours are about as far as this one's: most candidates need no second look.
      enough = this.nearest(px, py, pz, this.guess2) || this.nearest(px, py, pz, Infinity);
    }
    const last2 = foundDistance2[wanted - 1];
    // What was found bounds what there is; a little more, so that equals are found again.
    if (!enough) this.search(px, py, pz, Infinity);
    else if (!(last2 <= margin * margin)) this.search(px, py, pz, last2 * BOUND_SLACK);
    this.guess2 = GUESS_SLACK * foundDistance2[wanted - 1];
  }

  /** The same for any point; no group need be open. */
  findAt(x: number, y: number, z: number): void {
    this.search(x, y, z, Infinity);
  }

  /** Expected distance of the last neighbour over the radius of a sphere of `size` bodies. */
  private share(size: number): number {
    return Math.cbrt(this.wanted / size);
  }

  private fill(
    list: NodeList,
    px: number,
    py: number,
    pz: number,
    radius: number,
    from: NodeList | null,
    largest: number,
  ): void {
    const { geometry: G, topology: T } = this.tree;
    list.count = 0;
    list.x = px;
    list.y = py;
    list.z = pz;
    list.radius = radius;
    let depth = this.start(from);
    while (depth > 0) {
      const slot = stack[--depth];
      const g = slot * GEOMETRY;
      const dx = G[g] - px;
      const dy = G[g + 1] - py;
      const dz = G[g + 2] - pz;
      const reach = radius + G[g + NODE_RADIUS];
      if (dx * dx + dy * dy + dz * dz > reach * reach) continue;
      const t = slot * TOPOLOGY;
      const children = T[t + NODE_CHILDREN];
      if (children === 0 || T[t + NODE_END] - T[t + NODE_BEGIN] <= largest) {
        list.slots[list.count++] = slot;
        if (list.count <= MOST_LISTED) continue;
        list.radius = -1;
        return;
      }
      if (depth + 8 > stack.length) stack = longerStack(stack);
      const first = T[t + NODE_CHILD];
      for (let child = first + children - 1; child >= first; child--) stack[depth++] = child;
    }
  }

  /** Puts the nodes of a list on the stack, or the root; returns their number. */
  private start(from: NodeList | null): number {
    if (from === null) {
      stack[0] = 0;
      return 1;
    }
    while (from.count + 8 > stack.length) stack = longerStack(stack);
    const { slots, count } = from;
    for (let k = 0; k < count; k++) stack[k] = slots[count - 1 - k];
    return count;
  }

  /** Puts on the stack those nodes of the last list that meet the box. */
  private startListed(): number {
    const { slots, count } = lists[1];
    const { x: px, y: py, z: pz, halfX, halfY, halfZ } = this.box;
    while (count + 8 > stack.length) stack = longerStack(stack);
    let depth = 0;
    for (let k = 0; k < count; k++) {
      const r = listedRadius[k];
      stack[depth] = slots[k];
      const meets =
        +(Math.abs(listedX[k] - px) <= halfX + r) &
        +(Math.abs(listedY[k] - py) <= halfY + r) &
        +(Math.abs(listedZ[k] - pz) <= halfZ + r);
      depth = (depth + meets) | 0;
    }
    return depth;
  }

  /** Collects all bodies of the box and sphere; false if they are too many. */
  private collect(): boolean {
    const { geometry: G, topology: T, bodies } = this.tree;
    const { x, y, z } = bodies;
    const { x: px, y: py, z: pz, halfX, halfY, halfZ, radius } = this.box;
    const radius2 = radius * radius;
    let count = 0;
    let depth = lists[1].covers(px, py, pz, radius)
      ? this.startListed()
      : this.start(lists[0].covers(px, py, pz, radius) ? lists[0] : null);
    while (depth > 0) {
      const slot = stack[--depth];
      const g = slot * GEOMETRY;
      const dx = G[g] - px;
      const dy = G[g + 1] - py;
      const dz = G[g + 2] - pz;
      const r = G[g + NODE_RADIUS];
      const reach = radius + r;
      if (dx * dx + dy * dy + dz * dz > reach * reach) continue;
      if (Math.abs(dx) > halfX + r || Math.abs(dy) > halfY + r || Math.abs(dz) > halfZ + r)
        continue;
      const t = slot * TOPOLOGY;
      const children = T[t + NODE_CHILDREN];
      const begin = T[t + NODE_BEGIN];
      const end = T[t + NODE_END];
      if (children > 0 && end - begin > SCANNED) {
        if (depth + 8 > stack.length) stack = longerStack(stack);
        const first = T[t + NODE_CHILD];
        for (let child = first + children - 1; child >= first; child--) stack[depth++] = child;
        continue;
      }
      if (count + end - begin > CANDIDATES) return false;
      for (let i = begin; i < end; i++) {
        const ex = x[i] - px;
        const ey = y[i] - py;
        const ez = z[i] - pz;
        // Written in any case and kept if near: cheaper than a jump that is hard to foresee.
        candidateX[count] = x[i];
        candidateY[count] = y[i];
        candidateZ[count] = z[i];
        candidatePlace[count] = i;
        const near =
          +(Math.abs(ex) <= halfX) &
          +(Math.abs(ey) <= halfY) &
          +(Math.abs(ez) <= halfZ) &
          +(ex * ex + ey * ey + ez * ez <= radius2);
        count = (count + near) | 0;
      }
    }
    this.count = count;
    return true;
  }

  /** The nearest among candidates nearer than √bound2; false if these are fewer than wanted. */
  private nearest(px: number, py: number, pz: number, bound2: number): boolean {
    const { wanted, count } = this;
    let near = 0;
    for (let k = 0; k < count; k++) {
      const dx = candidateX[k] - px;
      const dy = candidateY[k] - py;
      const dz = candidateZ[k] - pz;
      const d2 = dx * dx + dy * dy + dz * dz;
      nearDistance2[near] = d2;
      nearPlace[near] = candidatePlace[k];
      near = (near + +(d2 < bound2)) | 0;
    }
    if (near < wanted) return false;
    // The first ones in order, then each that is nearer than the last of these in its place.
    const last = wanted - 1;
    for (let k = 0; k < near; k++) {
      const d2 = nearDistance2[k];
      if (k > last && d2 >= foundDistance2[last]) continue;
      let at = Math.min(k, last);
      for (; at > 0 && foundDistance2[at - 1] > d2; at--) {
        foundDistance2[at] = foundDistance2[at - 1];
        foundPlace[at] = foundPlace[at - 1];
      }
      foundDistance2[at] = d2;
      foundPlace[at] = nearPlace[k];
    }
    return true;
  }

  /** Puts a body into the list of the nearest, which grows up to the number wanted; returns its length. */
  private insert(d2: number, place: number, found: number): number {
    const last = this.wanted - 1;
    let at = Math.min(found, last);
    for (; at > 0 && foundDistance2[at - 1] > d2; at--) {
      foundDistance2[at] = foundDistance2[at - 1];
      foundPlace[at] = foundPlace[at - 1];
    }
    foundDistance2[at] = d2;
    foundPlace[at] = place;
    return found > last ? found : found + 1;
  }

  /** The nearest among all bodies of the tree, nearest cells first. */
  private search(px: number, py: number, pz: number, bound2: number): void {
    const { geometry: G, topology: T, bodies } = this.tree;
    const { x, y, z } = bodies;
    const { wanted } = this;
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
          found = this.insert(d2, i, found);
          if (found === wanted) worst = foundDistance2[wanted - 1];
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
  }
}
