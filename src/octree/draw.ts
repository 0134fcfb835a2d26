/** Bodies drawn by mass, the same ones in every run. */
import {
  GEOMETRY,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_END,
  NODE_MASS,
  TOPOLOGY,
  type Octree,
} from './tree.ts';

export interface Draws {
  /** Places in tree order of the bodies drawn, each once. */
  readonly places: Uint32Array;
  /** Index into `places` of each draw: a heavy body is drawn again and again. */
  readonly of: Uint32Array;
}

/** One body in each equal share of the mass along the tree, at a hashed position in it. */
export function drawByMass(tree: Octree, wanted: number): Draws {
  const { geometry: G, topology: T, bodies } = tree;
  const total = G[NODE_MASS];
  if (!(total > 0)) return collectDraws([]);
  const size = Math.min(wanted, bodies.count);
  const drawn: number[] = [];
  for (let k = 0; k < size; k++) {
    const hash = (Math.imul(k + 1, 0x9e3779b1) >>> 0) / 2 ** 32;
    let mass = ((k + hash) / size) * total;
    let slot = 0;
    while (T[slot * TOPOLOGY + NODE_CHILDREN] > 0) {
      const first = T[slot * TOPOLOGY + NODE_CHILD];
      const last = first + T[slot * TOPOLOGY + NODE_CHILDREN] - 1;
      let child = first;
      while (child < last && mass >= G[child * GEOMETRY + NODE_MASS]) {
        mass -= G[child * GEOMETRY + NODE_MASS];
        child++;
      }
      slot = child;
    }
    let place = T[slot * TOPOLOGY + NODE_BEGIN];
    const end = T[slot * TOPOLOGY + NODE_END] - 1;
    while (place < end && mass >= bodies.mass[place]) mass -= bodies.mass[place++];
    if (bodies.mass[place] > 0) drawn.push(place);
  }
  return collectDraws(drawn);
}

/** Some of the draws, at equal steps: which, and as draws of their own. */
export function someOf(draws: Draws, wanted: number): { chosen: Uint32Array; draws: Draws } {
  const { places, of } = draws;
  const size = Math.min(wanted, of.length);
  const step = of.length / size;
  const chosen = Uint32Array.from({ length: size }, (_, k) => Math.floor((k + 0.5) * step));
  return { chosen, draws: collectDraws(Array.from(chosen, (k) => places[of[k]])) };
}

function collectDraws(drawn: readonly number[]): Draws {
  const places = [...new Set(drawn)];
  const at = new Map(places.map((place, k) => [place, k]));
  return {
    places: Uint32Array.from(places),
    of: Uint32Array.from(drawn, (place) => at.get(place) as number),
  };
}
