/**
 * The cell–cell walk (Barnes & Hut 1986; cell against cell after Dehnen 2000, ApJ 536, L39).
 *
 * One branch of the target tree is walked against the whole source tree: in both directions at once
 * where both cells lie in the branch, one way from everything outside. So a branch writes only to
 * its own sums, in an order that the data alone decide.
 */
import type { Expansions } from './expansions.ts';
import type { PairKernels, PairSums } from './pairs.ts';
import {
  GEOMETRY,
  longerStack,
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
import { isSpreadFelt, isWider, meet, pairOfCells, type PairOfCells } from './spread.ts';

/** What decides whether two cells interact as a whole. */
export interface Acceptance {
  /** Opening angle: radii must sum to less than this times the distance. */
  readonly openingAngle: number;
  /** Wanted bound of one interaction's error relative to the target's potential. */
  readonly tolerance: number;
  /** Order of the expansion. */
  readonly order: number;
  /**
   * ε² of Plummer softening, which makes the field smoother and so widens acceptance; else 0. Where
   * bodies have lengths of their own, this and the support are those of the two cells.
   */
  readonly soft2: number;
  /** Largest variance of e² in two cells over u², and largest deviation over u, with u = d² + ε². */
  readonly varianceLimit: number;
  readonly farthestLimit: number;
  /** Distance inside which the pair force is not Newtonian and cells must open (spline support); else 0. */
  readonly support: number;
}

/**
 * The acceptance rule, the one place of it: whether a source cell acts on a target cell as a whole.
 * Three things must hold:
 *
 * - the radii sum to less than the opening angle times the distance d;
 * - the first neglected order of the expansion, (M/φ) (r/d)^(p+1)/d relative to the target's potential
 *   φ with r the sum of radii, is below the tolerance;
 * - so is what all sources about as far away neglect together because the target is wide:
 *   c (r_t/d)^(p+1), where c ≤ 1 is the share of φ that matter as dense as the source, out to d, would
 *   give. Far outside a system these errors add up, each of them small.
 *
 * And where softening lengths differ within the cells, by little against u = d² + ε²: their error has
 * one sign all around, so that it does not matter how small the cells are.
 *
 * Called in the innermost loop with plain numbers, so that it is inlined there.
 */
export function isAccepted(
  rule: Acceptance,
  targetRadius: number,
  sourceRadius: number,
  distance2: number,
  sourceMass: number,
  targetDepth: number,
  { soft2, support, variance, farthest }: PairOfCells,
): boolean {
  const { openingAngle, tolerance, varianceLimit, farthestLimit } = rule;
  const reach = targetRadius + sourceRadius;
  const u = distance2 + soft2;
  // Written so that a variance that overflowed is refused.
  if (!(variance <= varianceLimit * u * u && farthest <= farthestLimit * u)) return false;
  const reach2 = reach * reach;
  if (reach2 >= openingAngle * openingAngle * u) return false;
  if (support > 0 && distance2 <= (reach + support) * (reach + support)) return false;
  const ratio2 = reach2 / u;
  const wide2 = (targetRadius * targetRadius) / u;
  let fall2 = ratio2;
  let wideFall2 = wide2;
  for (let k = 0; k < rule.order; k++) {
    fall2 *= ratio2;
    wideFall2 *= wide2;
  }
  const relative = sourceMass / targetDepth;
  const tolerance2 = tolerance * tolerance;
  if (!(relative * relative * fall2 < tolerance2 * u)) return false;
  const limit2 = WIDE_TOLERANCE * WIDE_TOLERANCE * tolerance2;
  if (wideFall2 < limit2) return true;
  const share = (relative * u) / (sourceRadius * sourceRadius * sourceRadius);
  return share * share * wideFall2 < limit2;
}

/** Tolerance of the third condition over that of the second. */
const WIDE_TOLERANCE = 30;

/** Sizes below which pairs are summed directly: without asking, and when cells were refused. */
export const DIRECT_AT_ONCE = 24;
export const DIRECT_IF_REFUSED = 96;
/** A cell of at most this many bodies is summed directly with itself. */
const DIRECT_INSIDE = 12;

/** What one worker needs to walk branches; buffers grow with the largest branch and are reused. */
export class WalkScratch implements PairSums {
  phi: Float64Array = new Float64Array(0);
  psi: Float64Array = new Float64Array(0);
  ax: Float64Array = new Float64Array(0);
  ay: Float64Array = new Float64Array(0);
  az: Float64Array = new Float64Array(0);
  locals: Float64Array = new Float64Array(0);
  stack: Int32Array = new Int32Array(4096);

  /** Clears room for a branch. */
  prepare(bodies: number, locals: number, softened: boolean, force: boolean): void {
    this.phi = cleared(this.phi, bodies);
    this.psi = cleared(this.psi, softened ? bodies : 0);
    this.ax = cleared(this.ax, force ? bodies : 0);
    this.ay = cleared(this.ay, force ? bodies : 0);
    this.az = cleared(this.az, force ? bodies : 0);
    this.locals = cleared(this.locals, locals);
  }
}

function cleared(array: Float64Array, count: number): Float64Array {
  if (array.length < count) return new Float64Array(Math.ceil(count * 1.25));
  array.fill(0, 0, count);
  return array;
}

/** What was done, counted: deterministic figures of cost. */
export interface WalkCounts {
  cellInteractions: number;
  pairInteractions: number;
  /** Pairs at distance 0, left out of an unsoftened sum. */
  coincidentPairs: number;
}

/** The source side of a walk: a tree with multipoles of its nodes. */
export interface SourceTree {
  readonly tree: Octree;
  readonly multipoles: Float64Array;
}

export interface WalkTools {
  readonly expansions: Expansions;
  readonly pairs: PairKernels;
  /** As the pair kernels take it. */
  readonly pairSoftening: number;
  /** Bodies have softening lengths of their own: trees have a spread. */
  readonly softenedByEach: boolean;
  readonly acceptance: Acceptance;
}

/**
 * Sums the field of `source` on the bodies of one branch of `target` into `scratch`: pair sums at the
 * bodies, and local coefficients of the branch's nodes (its root at 0, then its slots in order).
 * @param same - source and target are one tree, so the branch also meets itself
 */
export function walkBranch(
  target: Octree,
  branch: number,
  source: SourceTree,
  same: boolean,
  tools: WalkTools,
  scratch: WalkScratch,
  counts: WalkCounts,
): void {
  const rootSlot = target.branchRoots[branch];
  const firstSlot = target.branchSlots[2 * branch];
  const base = target.topology[rootSlot * TOPOLOGY + NODE_BEGIN];
  const outer = new Walk(target, firstSlot, base, source, tools, scratch, counts);
  if (!same) {
    outer.oneWay(rootSlot, 0);
    return;
  }
  const { topology } = target;
  let slot = 0;
  while (slot !== rootSlot) {
    const t = slot * TOPOLOGY;
    const first = topology[t + NODE_CHILD];
    let onPath = first;
    for (let child = first; child < first + topology[t + NODE_CHILDREN]; child++) {
      const holds =
        topology[child * TOPOLOGY + NODE_BEGIN] <= base &&
        base < topology[child * TOPOLOGY + NODE_END];
      if (holds) onPath = child;
      else outer.oneWay(rootSlot, child);
    }
    slot = onPath;
  }
  outer.inside(rootSlot);
}

/** One branch's walk: the tree's arrays in locals, and the loops over a stack of pairs of cells. */
class Walk {
  private readonly target: Octree;
  private readonly firstSlot: number;
  private readonly base: number;
  private readonly source: SourceTree;
  private readonly tools: WalkTools;
  private readonly scratch: WalkScratch;
  private readonly counts: WalkCounts;

  constructor(
    target: Octree,
    firstSlot: number,
    base: number,
    source: SourceTree,
    tools: WalkTools,
    scratch: WalkScratch,
    counts: WalkCounts,
  ) {
    this.target = target;
    this.firstSlot = firstSlot;
    this.base = base;
    this.source = source;
    this.tools = tools;
    this.scratch = scratch;
    this.counts = counts;
  }

  /** The field of source cell `s0` on target cell `t0`, one way. */
  oneWay(t0: number, s0: number): void {
    const { target, base, firstSlot, scratch } = this;
    const { tree, multipoles } = this.source;
    const { tools } = this;
    const { expansions, pairs, pairSoftening, acceptance } = tools;
    const { plain, ofSpread, multipoles: momentStride, locals: localStride } = expansions;
    const { interact } = plain;
    const onto = pairs.onto;
    const locals = scratch.locals;
    const tG = target.geometry;
    const tT = target.topology;
    const sG = tree.geometry;
    const sT = tree.topology;
    const tS = target.spread;
    const sS = tree.spread;
    const tb = target.bodies;
    const sb = tree.bodies;
    const each = tools.softenedByEach;
    const pair = pairOfCells(acceptance);
    let stack = scratch.stack;
    let cells = 0;
    let pairCount = 0;
    let depth = 2;
    stack[0] = t0;
    stack[1] = s0;
    while (depth > 0) {
      const s = stack[--depth];
      const t = stack[--depth];
      const gt = t * GEOMETRY;
      const gs = s * GEOMETRY;
      const pt = t * TOPOLOGY;
      const ps = s * TOPOLOGY;
      const n =
        (tT[pt + NODE_END] - tT[pt + NODE_BEGIN]) * (sT[ps + NODE_END] - sT[ps + NODE_BEGIN]);
      const rt = tG[gt + NODE_RADIUS];
      const rs = sG[gs + NODE_RADIUS];
      if (each) meet(pair, tS, t, sS, s, ofSpread !== null);
      if (n > DIRECT_AT_ONCE) {
        const dx = tG[gt] - sG[gs];
        const dy = tG[gt + 1] - sG[gs + 1];
        const dz = tG[gt + 2] - sG[gs + 2];
        const d2 = dx * dx + dy * dy + dz * dz;
        const mass = sG[gs + NODE_MASS];
        const phi = tG[gt + NODE_DEPTH];
        if (isAccepted(acceptance, rt, rs, d2, mass, phi, pair)) {
          const lt = (t === t0 ? 0 : t - firstSlot + 1) * localStride;
          const ms = s * momentStride;
          if (ofSpread !== null && isSpreadFelt(pair, d2)) {
            ofSpread.interact(tG, gt, locals, lt, sG, gs, multipoles, ms, pair.soft2);
          } else interact(tG, gt, locals, lt, sG, gs, multipoles, ms, pair.soft2);
          cells++;
          continue;
        }
      }
      const tLeaf = tT[pt + NODE_CHILDREN] === 0;
      const sLeaf = sT[ps + NODE_CHILDREN] === 0;
      if (n <= DIRECT_IF_REFUSED || (tLeaf && sLeaf)) {
        onto(
          tb.x,
          tb.y,
          tb.z,
          tT[pt + NODE_BEGIN],
          tT[pt + NODE_END],
          sb.x,
          sb.y,
          sb.z,
          sb.mass,
          sT[ps + NODE_BEGIN],
          sT[ps + NODE_END],
          base,
          scratch,
          pairSoftening,
          tb.squares,
          sb.squares,
        );
        pairCount += n;
        continue;
      }
      if (depth + 32 > stack.length) stack = scratch.stack = longerStack(stack);
      const splitSource = each ? isWider(s, rs, sS, t, rt, tS) : rs >= rt;
      if (!sLeaf && (tLeaf || splitSource)) {
        const first = sT[ps + NODE_CHILD];
        for (let child = first + sT[ps + NODE_CHILDREN] - 1; child >= first; child--) {
          stack[depth++] = t;
          stack[depth++] = child;
        }
      } else {
        const first = tT[pt + NODE_CHILD];
        for (let child = first + tT[pt + NODE_CHILDREN] - 1; child >= first; child--) {
          stack[depth++] = child;
          stack[depth++] = s;
        }
      }
    }
    this.counts.cellInteractions += cells;
    this.counts.pairInteractions += pairCount;
  }

  /** All pairs of bodies inside the branch rooted at `root`, both ways at once. */
  inside(root: number): void {
    const { base, firstSlot, scratch } = this;
    const { tree, multipoles } = this.source;
    const { tools } = this;
    const { expansions, pairs, pairSoftening, acceptance } = tools;
    const { plain, ofSpread, multipoles: momentStride, locals: localStride } = expansions;
    const { interactBoth } = plain;
    const { inside, between } = pairs;
    const locals = scratch.locals;
    const G = tree.geometry;
    const T = tree.topology;
    const S = tree.spread;
    const { x, y, z, mass, squares } = tree.bodies;
    const each = tools.softenedByEach;
    const pair = pairOfCells(acceptance);
    let stack = scratch.stack;
    let cells = 0;
    let pairCount = 0;
    let coincident = 0;
    let depth = 2;
    stack[0] = root;
    stack[1] = root;
    while (depth > 0) {
      const b = stack[--depth];
      const a = stack[--depth];
      const pa = a * TOPOLOGY;
      const sizeA = T[pa + NODE_END] - T[pa + NODE_BEGIN];
      if (depth + 80 > stack.length) stack = scratch.stack = longerStack(stack);
      if (a === b) {
        if (T[pa + NODE_CHILDREN] === 0 || sizeA <= DIRECT_INSIDE) {
          const left = inside(
            x,
            y,
            z,
            mass,
            T[pa + NODE_BEGIN],
            T[pa + NODE_END],
            base,
            scratch,
            pairSoftening,
            squares,
          );
          coincident += left;
          pairCount += sizeA * (sizeA - 1);
          continue;
        }
        const first = T[pa + NODE_CHILD];
        const last = first + T[pa + NODE_CHILDREN];
        for (let i = last - 1; i >= first; i--) {
          for (let j = last - 1; j >= i; j--) {
            stack[depth++] = i;
            stack[depth++] = j;
          }
        }
        continue;
      }
      const pb = b * TOPOLOGY;
      const n = sizeA * (T[pb + NODE_END] - T[pb + NODE_BEGIN]);
      const ga = a * GEOMETRY;
      const gb = b * GEOMETRY;
      const ra = G[ga + NODE_RADIUS];
      const rb = G[gb + NODE_RADIUS];
      if (each) meet(pair, S, a, S, b, ofSpread !== null);
      if (n > DIRECT_AT_ONCE * 2) {
        const dx = G[ga] - G[gb];
        const dy = G[ga + 1] - G[gb + 1];
        const dz = G[ga + 2] - G[gb + 2];
        const d2 = dx * dx + dy * dy + dz * dz;
        const massA = G[ga + NODE_MASS];
        const massB = G[gb + NODE_MASS];
        const phiA = G[ga + NODE_DEPTH];
        const phiB = G[gb + NODE_DEPTH];
        if (
          isAccepted(acceptance, ra, rb, d2, massB, phiA, pair) &&
          isAccepted(acceptance, rb, ra, d2, massA, phiB, pair)
        ) {
          const la = (a === root ? 0 : a - firstSlot + 1) * localStride;
          const lb = (b === root ? 0 : b - firstSlot + 1) * localStride;
          const ma = a * momentStride;
          const mb = b * momentStride;
          if (ofSpread !== null && isSpreadFelt(pair, d2)) {
            ofSpread.interact(G, ga, locals, la, G, gb, multipoles, mb, pair.soft2);
            ofSpread.interact(G, gb, locals, lb, G, ga, multipoles, ma, pair.soft2);
          } else interactBoth(G, multipoles, locals, ga, ma, la, gb, mb, lb, pair.soft2);
          cells += 2;
          continue;
        }
      }
      const aLeaf = T[pa + NODE_CHILDREN] === 0;
      const bLeaf = T[pb + NODE_CHILDREN] === 0;
      if (n <= DIRECT_IF_REFUSED * 2 || (aLeaf && bLeaf)) {
        between(
          x,
          y,
          z,
          mass,
          T[pa + NODE_BEGIN],
          T[pa + NODE_END],
          T[pb + NODE_BEGIN],
          T[pb + NODE_END],
          base,
          scratch,
          pairSoftening,
          squares,
        );
        pairCount += 2 * n;
        continue;
      }
      const aIsWider = each ? isWider(a, ra, S, b, rb, S) : ra >= rb;
      const splitA = !aLeaf && (bLeaf || aIsWider);
      const p = splitA ? pa : pb;
      const first = T[p + NODE_CHILD];
      for (let child = first + T[p + NODE_CHILDREN] - 1; child >= first; child--) {
        stack[depth++] = splitA ? child : a;
        stack[depth++] = splitA ? b : child;
      }
    }
    this.counts.cellInteractions += cells;
    this.counts.pairInteractions += pairCount;
    this.counts.coincidentPairs += coincident;
  }
}

/**
 * Hands the local coefficients of a walked branch down to its bodies and adds their values to the
 * pair sums in `scratch`.
 */
export function descendBranch(
  target: Octree,
  branch: number,
  expansions: Expansions,
  softened: boolean,
  force: boolean,
  scratch: WalkScratch,
): void {
  const { geometry: G, topology: T, bodies } = target;
  const { x, y, z, squares } = bodies;
  const S = target.spread;
  const { plain, ofSpread, locals: stride } = expansions;
  const { passDown, valueAt, clausiusAt, gradientAt } = plain;
  const { phi, psi, ax, ay, az, locals } = scratch;
  const rootSlot = target.branchRoots[branch];
  const firstSlot = target.branchSlots[2 * branch];
  const endSlot = target.branchSlots[2 * branch + 1];
  const base = T[rootSlot * TOPOLOGY + NODE_BEGIN];
  const gradient = new Float64Array(3);
  for (let local = 0; local <= endSlot - firstSlot; local++) {
    const slot = local === 0 ? rootSlot : firstSlot + local - 1;
    const t = slot * TOPOLOGY;
    const g = slot * GEOMETRY;
    const at = local * stride;
    const cx = G[g];
    const cy = G[g + 1];
    const cz = G[g + 2];
    const mean = ofSpread === null ? 0 : S[slot * SPREAD + NODE_MEAN];
    const children = T[t + NODE_CHILDREN];
    if (children > 0) {
      const first = T[t + NODE_CHILD];
      for (let child = first; child < first + children; child++) {
        const c = child * GEOMETRY;
        const to = (child - firstSlot + 1) * stride;
        const dx = G[c] - cx;
        const dy = G[c + 1] - cy;
        const dz = G[c + 2] - cz;
        passDown(locals, at, to, dx, dy, dz);
        if (ofSpread === null) continue;
        const ds = (S[child * SPREAD + NODE_MEAN] - mean) / 2;
        ofSpread.passDown(locals, at, to, dx, dy, dz, ds);
      }
      continue;
    }
    for (let i = T[t + NODE_BEGIN], k = i - base; i < T[t + NODE_END]; i++, k++) {
      const dx = x[i] - cx;
      const dy = y[i] - cy;
      const dz = z[i] - cz;
      phi[k] += valueAt(locals, at, dx, dy, dz);
      if (softened) psi[k] += clausiusAt(locals, at, dx, dy, dz);
      if (force) gradientAt(locals, at, dx, dy, dz, gradient);
      if (ofSpread !== null) {
        const ds = (squares[i] - mean) / 2;
        phi[k] += ofSpread.valueAt(locals, at, dx, dy, dz, ds);
        psi[k] += ofSpread.clausiusAt(locals, at, dx, dy, dz, ds);
        if (force) ofSpread.gradientAt(locals, at, dx, dy, dz, ds, gradient);
      }
      if (force) {
        ax[k] += gradient[0];
        ay[k] += gradient[1];
        az[k] += gradient[2];
      }
    }
  }
}
