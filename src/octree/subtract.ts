/**
 * Taking some bodies' field away from all others: cheaper than summing again while few are removed.
 *
 * Few bodies are subtracted by direct sums; more through a tree of their own, walked against the tree
 * of all. Values at the removed bodies themselves become meaningless.
 */
import { takeDoubles } from '../numerics/reuse.ts';
import type * as ForcesTask from './forces.task.ts';
import type * as SubtractTask from './subtract.task.ts';
import { crewOfOne, type Crew, type TaskModule } from '../parallel/crew.ts';
import { buildOctree, type BodyColumns } from './build.ts';
import { acceptanceOf, gatherMultipoles, type Forces } from './forces.ts';
import { LEVELS } from './levels.ts';
import { isOfEach, squared } from './softening.ts';
import { FEW_CHUNK } from './subtract.task.ts';

const TASK: TaskModule<typeof SubtractTask> = {
  url: new URL('./subtract.task.js', import.meta.url),
  load: () => import('./subtract.task.ts'),
};
const FORCES: TaskModule<typeof ForcesTask> = {
  url: new URL('./forces.task.js', import.meta.url),
  load: () => import('./forces.task.ts'),
};

/** Up to this many removed bodies direct sums are cheaper than a tree of them. */
const DIRECT_REMOVED = 128;

/** φ and w of every body; one array twice if unsoftened. Changed in place by {@link subtractBodies}. */
export interface MutableField {
  readonly potential: Float64Array;
  readonly clausiusShare: Float64Array;
}

/**
 * Subtracts the field of the removed bodies from `field`, in place.
 * @param removed - input indices of the bodies taken away
 * @param forces - the forces of all bodies, for G, softening, level and tree
 * @returns false if the result is not finite at a body that was kept: then sum again
 */
export async function subtractBodies(
  columns: BodyColumns,
  removed: Uint32Array,
  kept: Uint8Array,
  forces: Forces,
  field: MutableField,
  crew: Crew,
): Promise<boolean> {
  const count = columns.mass.length;
  const { tree: source, softening } = forces;
  const lengths = isOfEach(softening) ? softening.lengths : undefined;
  const few = {
    x: pick(columns.x, removed),
    y: pick(columns.y, removed),
    z: pick(columns.z, removed),
    mass: pick(columns.mass, removed),
    squares: lengths === undefined ? takeDoubles(0) : squared(pick(lengths, removed)),
  };
  const softened = forces.softening.kernel !== 'none';
  const column = (wanted: boolean) => takeDoubles(wanted ? count : 0);
  const none = column(false);
  const phi = column(true);
  const psi = column(softened);
  if (source === null || removed.length <= DIRECT_REMOVED) {
    const small = count * removed.length < 1e6 ? crewOfOne() : crew;
    const { x, y, z } = columns;
    await small.run(
      TASK,
      'sumOfFew',
      { x, y, z, kept, few, softening, phi, psi },
      Math.ceil(count / FEW_CHUNK),
    );
    return subtractSums(phi, psi, kept, forces.gravity, field);
  }
  const level = forces.level ?? LEVELS[0];
  const { squares, ...bodies } = few;
  const tree = await buildOctree(lengths === undefined ? bodies : { ...bodies, squares }, crew);
  const removedSource = await gatherMultipoles(tree, level.order, softening, crew);
  await crew.run(
    FORCES,
    'walkBranches',
    {
      target: source.tree,
      source: removedSource,
      same: false,
      order: level.order,
      softening,
      acceptance: acceptanceOf(level, softening),
      field: { phi, psi, ax: none, ay: none, az: none },
    },
    source.tree.branchRoots.length,
  );
  return subtractSums(phi, psi, kept, forces.gravity, field);
}

function subtractSums(
  phi: Float64Array,
  psi: Float64Array,
  kept: Uint8Array,
  gravity: number,
  field: MutableField,
): boolean {
  const { potential, clausiusShare } = field;
  const softened = psi.length > 0;
  for (let i = 0; i < phi.length; i++) {
    if (kept[i] === 0) continue;
    if (!Number.isFinite(phi[i])) return false;
    potential[i] += gravity * phi[i];
    if (softened) clausiusShare[i] += gravity * (phi[i] - psi[i]);
    else if (clausiusShare !== potential) clausiusShare[i] += gravity * phi[i];
  }
  return true;
}

function pick(column: Float64Array | Float32Array, indices: Uint32Array): Float64Array {
  const picked = takeDoubles(indices.length);
  for (let k = 0; k < indices.length; k++) picked[k] = column[indices[k]];
  return picked;
}
