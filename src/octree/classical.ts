/**
 * The classical walk, one point at a time (Barnes & Hut 1986, Nature 324, 446): small and readable.
 *
 * Used for potentials at arbitrary points, as the tighter sum that the engine's error is measured
 * against, and as a cross-check of the cell–cell walk.
 */
import type { Expansion } from './expansion.ts';
import type { PairKernels } from './pairs.ts';
import type { SourceTree } from './walk.ts';
import {
  GEOMETRY,
  longerStack,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_END,
  NODE_RADIUS,
  TOPOLOGY,
} from './tree.ts';

export interface PointWalkTools {
  readonly expansion: Expansion;
  readonly pairs: PairKernels;
  readonly pairSoftening: number;
  /** A cell is used whole if its radius is less than this times its distance. */
  readonly openingAngle: number;
  readonly soft2: number;
  /** Cells nearer than their radius plus this are opened: the spline's support, else 0. */
  readonly support: number;
}

let stack: Int32Array = new Int32Array(4096);

/**
 * Adds to `out` Σ m/√(r²+ε²) and the Clausius part at a point (out[0], out[1]).
 * @param skip - place in tree order of the body at the point, left out of the sum; -1 for none
 * @returns interactions with cells and bodies
 */
export function sumAtPoint(
  source: SourceTree,
  px: number,
  py: number,
  pz: number,
  skip: number,
  tools: PointWalkTools,
  out: Float64Array,
): number {
  const { tree, multipoles } = source;
  const { geometry: G, topology: T, bodies } = tree;
  const { x, y, z, mass } = bodies;
  const { expansion, pairs, pairSoftening, soft2, support } = tools;
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
    if (!holdsPoint && r * r < angle2 * d2 && (support === 0 || d2 > (r + support) ** 2)) {
      expansion.pointValue(G, g, multipoles, slot * expansion.multipoles, px, py, pz, soft2, out);
      interactions++;
      continue;
    }
    const children = T[t + NODE_CHILDREN];
    if (children === 0) {
      if (holdsPoint) {
        pairs.atPoint(px, py, pz, x, y, z, mass, begin, skip, out, pairSoftening);
        pairs.atPoint(px, py, pz, x, y, z, mass, skip + 1, end, out, pairSoftening);
      } else pairs.atPoint(px, py, pz, x, y, z, mass, begin, end, out, pairSoftening);
      interactions += end - begin;
      continue;
    }
    if (depth + 8 > stack.length) stack = longerStack(stack);
    const first = T[t + NODE_CHILD];
    for (let child = first + children - 1; child >= first; child--) stack[depth++] = child;
  }
  return interactions;
}
