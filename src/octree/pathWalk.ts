/**
 * The cell–cell walk followed towards one body alone: what the walk of its whole branch would give it.
 *
 * A few hundred bodies tell what error a setting is going to make before it is spent on all.
 */
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
import { isSpreadFelt, isWider, meet, pairOfCells } from './spread.ts';
import {
  DIRECT_AT_ONCE,
  DIRECT_IF_REFUSED,
  isAccepted,
  type SourceTree,
  type WalkTools,
} from './walk.ts';

let stack: Int32Array = new Int32Array(4096);
let locals = new Float64Array(0);

/**
 * Adds to `out` the sums of the body at a place of the tree: Σ m/√(r²+ε²) and the Clausius part.
 * @param source - the tree, with multipoles of the order of `tools`
 */
export function sumTowards(
  source: SourceTree,
  place: number,
  tools: WalkTools,
  out: Float64Array,
): void {
  const { tree, multipoles } = source;
  const { geometry: G, topology: T, spread: S, bodies } = tree;
  const { x, y, z, mass, squares } = bodies;
  const { expansions, pairs, softenedByEach: each, acceptance } = tools;
  const { plain, ofSpread, multipoles: momentStride, locals: localStride } = expansions;
  const pairSoftening = each ? squares[place] : tools.pairSoftening;
  const pair = pairOfCells(acceptance);
  const path = pathTo(tree, place);
  if (locals.length < path.length * localStride) {
    locals = new Float64Array(path.length * localStride * 2);
  }
  locals.fill(0, 0, path.length * localStride);
  const branchBegin = T[path[0] * TOPOLOGY + NODE_BEGIN];
  const branchEnd = T[path[0] * TOPOLOGY + NODE_END];
  const px = x[place];
  const py = y[place];
  const pz = z[place];
  let depth = 2;
  stack[0] = 0;
  stack[1] = 0;
  while (depth > 0) {
    const s = stack[--depth];
    const step = stack[--depth];
    const t = path[step];
    const gt = t * GEOMETRY;
    const gs = s * GEOMETRY;
    const pt = t * TOPOLOGY;
    const ps = s * TOPOLOGY;
    const begin = T[ps + NODE_BEGIN];
    const end = T[ps + NODE_END];
    const n = (T[pt + NODE_END] - T[pt + NODE_BEGIN]) * (end - begin);
    const rt = G[gt + NODE_RADIUS];
    const rs = G[gs + NODE_RADIUS];
    if (each) meet(pair, S, t, S, s, ofSpread !== null);
    // The cells above the branch, or the cell itself: never taken whole, however soft its field is.
    const holdsBody = begin <= place && place < end;
    // Inside the branch cells act on each other both ways at once, or not at all.
    const both = begin >= branchBegin && end <= branchEnd;
    const ways = both ? 2 : 1;
    if (!holdsBody && n > ways * DIRECT_AT_ONCE) {
      const dx = G[gt] - G[gs];
      const dy = G[gt + 1] - G[gs + 1];
      const dz = G[gt + 2] - G[gs + 2];
      const d2 = dx * dx + dy * dy + dz * dz;
      if (
        isAccepted(acceptance, rt, rs, d2, G[gs + NODE_MASS], G[gt + NODE_DEPTH], pair) &&
        (!both || isAccepted(acceptance, rs, rt, d2, G[gt + NODE_MASS], G[gs + NODE_DEPTH], pair))
      ) {
        const { interact } = isSpreadFelt(pair, d2) && ofSpread !== null ? ofSpread : plain;
        const ms = s * momentStride;
        interact(G, gt, locals, step * localStride, G, gs, multipoles, ms, pair.soft2);
        continue;
      }
    }
    const tLeaf = step === path.length - 1;
    const sLeaf = T[ps + NODE_CHILDREN] === 0;
    if (n <= ways * DIRECT_IF_REFUSED || (tLeaf && sLeaf)) {
      const split = Math.min(end, Math.max(begin, place));
      const after = place >= begin && place < end ? place + 1 : split;
      pairs.atPoint(px, py, pz, x, y, z, mass, begin, split, out, pairSoftening, squares);
      pairs.atPoint(px, py, pz, x, y, z, mass, after, end, out, pairSoftening, squares);
      continue;
    }
    if (depth + 16 > stack.length) stack = longerStack(stack);
    const splitSource = each ? isWider(s, rs, S, t, rt, S) : rs >= rt;
    if (!sLeaf && (tLeaf || holdsBody || splitSource)) {
      // A cell with itself is cut on both sides.
      const next = s === t ? step + 1 : step;
      const first = T[ps + NODE_CHILD];
      for (let child = first + T[ps + NODE_CHILDREN] - 1; child >= first; child--) {
        stack[depth++] = next;
        stack[depth++] = child;
      }
    } else {
      stack[depth++] = step + 1;
      stack[depth++] = s;
    }
  }
  path.forEach((slot, step) => {
    const g = slot * GEOMETRY;
    const at = step * localStride;
    const child = path[step + 1];
    if (ofSpread !== null && child !== undefined) {
      // Of what a cell hands down, small terms are left out: only the same way gives the same sums.
      const c = child * GEOMETRY;
      const dx = G[c] - G[g];
      const dy = G[c + 1] - G[g + 1];
      const dz = G[c + 2] - G[g + 2];
      const ds = (S[child * SPREAD + NODE_MEAN] - S[slot * SPREAD + NODE_MEAN]) / 2;
      plain.passDown(locals, at, at + localStride, dx, dy, dz);
      ofSpread.passDown(locals, at, at + localStride, dx, dy, dz, ds);
      return;
    }
    const dx = px - G[g];
    const dy = py - G[g + 1];
    const dz = pz - G[g + 2];
    out[0] += plain.valueAt(locals, at, dx, dy, dz);
    out[1] += plain.clausiusAt(locals, at, dx, dy, dz);
    if (ofSpread === null) return;
    const ds = (squares[place] - S[slot * SPREAD + NODE_MEAN]) / 2;
    out[0] += ofSpread.valueAt(locals, at, dx, dy, dz, ds);
    out[1] += ofSpread.clausiusAt(locals, at, dx, dy, dz, ds);
  });
}

/** The slots from the root of its branch down to the leaf that holds a body. */
function pathTo(tree: Octree, place: number): number[] {
  const { topology: T, branchRoots } = tree;
  const holds = (slot: number) =>
    T[slot * TOPOLOGY + NODE_BEGIN] <= place && place < T[slot * TOPOLOGY + NODE_END];
  const path = [branchRoots[branchRoots.findIndex(holds)]];
  for (let slot = path[0]; T[slot * TOPOLOGY + NODE_CHILDREN] > 0; path.push(slot)) {
    slot = T[slot * TOPOLOGY + NODE_CHILD];
    while (!holds(slot)) slot++;
  }
  return path;
}
