/**
 * The classical walk, one point at a time (Barnes & Hut 1986, Nature 324, 446): small and readable.
 *
 * Used for potentials at arbitrary points, as the tighter sum that the engine's error is measured
 * against, and as a cross-check of the cell–cell walk.
 */
import type { Expansions } from './expansions.ts';
import type { PairKernels } from './pairs.ts';
import { splineSupportOf } from './softening.ts';
import type { SourceTree } from './walk.ts';
import {
  GEOMETRY,
  longerStack,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_END,
  NODE_GREATEST,
  NODE_MEAN,
  NODE_RADIUS,
  NODE_FARTHEST,
  SPREAD,
  TOPOLOGY,
} from './tree.ts';

export interface PointWalkTools {
  readonly expansions: Expansions;
  readonly pairs: PairKernels;
  readonly pairSoftening: number;
  /** A cell is used whole if its radius is less than this times its distance. */
  readonly openingAngle: number;
  /** ε² of Plummer softening, else 0; not used where bodies have lengths of their own. */
  readonly soft2: number;
  /** Cells nearer than their radius plus this are opened: the spline's support, else 0. */
  readonly support: number;
  readonly softenedByEach: boolean;
}

let stack: Int32Array = new Int32Array(4096);

/**
 * Adds to `out` Σ m/√(r²+ε²) and the Clausius part at a point (out[0], out[1]).
 * @param own2 - e² of the body at the point, where bodies have lengths of their own
 * @param skip - place in tree order of the body at the point, left out of the sum; -1 for none
 * @returns interactions with cells and bodies
 */
export function sumAtPoint(
  source: SourceTree,
  px: number,
  py: number,
  pz: number,
  own2: number,
  skip: number,
  tools: PointWalkTools,
  out: Float64Array,
): number {
  const { tree, multipoles } = source;
  const { geometry: G, topology: T, spread: S, bodies } = tree;
  const { x, y, z, mass, squares } = bodies;
  const { expansions, pairs, softenedByEach } = tools;
  const { plain, ofSpread, multipoles: stride } = expansions;
  const pairSoftening = softenedByEach ? own2 : tools.pairSoftening;
  let { soft2, support } = tools;
  const angle2 = tools.openingAngle ** 2;
  let interactions = 0;
  let depth = 1;
  stack[0] = 0;
  while (depth > 0) {
    const slot = stack[--depth];
    const g = slot * GEOMETRY;
    const t = slot * TOPOLOGY;
    const dx = px - G[g];
    const dy = py - G[g + 1];
    const dz = pz - G[g + 2];
    const d2 = dx * dx + dy * dy + dz * dz;
    const r = G[g + NODE_RADIUS];
    const begin = T[t + NODE_BEGIN];
    const end = T[t + NODE_END];
    const holdsPoint = begin <= skip && skip < end;
    let isNarrow = r * r < angle2 * d2;
    if (softenedByEach) {
      const e = slot * SPREAD;
      if (ofSpread !== null) {
        soft2 = own2 + S[e + NODE_MEAN];
        isNarrow &&= S[e + NODE_FARTHEST] < angle2 * (d2 + soft2);
      } else support = splineSupportOf(Math.max(own2, S[e + NODE_GREATEST]));
    }
    if (!holdsPoint && isNarrow && (support === 0 || d2 > (r + support) ** 2)) {
      plain.pointValue(G, g, multipoles, slot * stride, px, py, pz, soft2, out);
      ofSpread?.pointValue(G, g, multipoles, slot * stride, px, py, pz, soft2, out);
      interactions++;
      continue;
    }
    const children = T[t + NODE_CHILDREN];
    if (children === 0) {
      if (holdsPoint) {
        pairs.atPoint(px, py, pz, x, y, z, mass, begin, skip, out, pairSoftening, squares);
        pairs.atPoint(px, py, pz, x, y, z, mass, skip + 1, end, out, pairSoftening, squares);
      } else pairs.atPoint(px, py, pz, x, y, z, mass, begin, end, out, pairSoftening, squares);
      interactions += end - begin;
      continue;
    }
    if (depth + 8 > stack.length) stack = longerStack(stack);
    const first = T[t + NODE_CHILD];
    for (let child = first + children - 1; child >= first; child--) stack[depth++] = child;
  }
  return interactions;
}
