/**
 * Density centre and core radius from the distances of nearest neighbours.
 *
 * ρ_i is the mass of the j − 1 nearest neighbours over the sphere out to the j-th; the body itself
 * and the j-th are not counted, which makes ρ unbiased. Centre Σρx/Σρ, core radius √(Σρ²d²/Σρ²).
 * Source: Casertano & Hut 1985, ApJ 298, 80; the squared form of the core radius is later practice.
 */
import type * as NeighboursTask from './neighbours.task.ts';
import { compensatedSum } from '../numerics/compensated.ts';
import { crewOfOne, type Crew, type TaskModule } from '../parallel/crew.ts';
import { DENSITY_SUMS, eachGroup } from './neighbours.task.ts';
import { GEOMETRY, NODE_BEGIN, NODE_END, TOPOLOGY, type Octree } from './tree.ts';

const TASK: TaskModule<typeof NeighboursTask> = {
  url: new URL('./neighbours.task.js', import.meta.url),
  load: () => import('./neighbours.task.ts'),
};

/** The usual j of the estimator. */
export const NEIGHBOURS = 6;
/** Up to this many bodies every one is measured. */
const MEASURE_ALL = 200_000;
/** Beyond, bodies of low density that carry this share of the weights enter by their leaf's mean density. */
const COARSE_SHARE = 0.02;

export interface DensityCentre {
  readonly centre: readonly [number, number, number];
  readonly coreRadius: number;
  /** ρ of each body in input order; 0 where it was not measured. Empty unless asked for. */
  readonly density: Float64Array;
}

/**
 * Density centre of the tree's bodies.
 * @param wantDensities - also give every body's density, for which every one is measured
 * @returns null if there are too few bodies (fewer than j + 2) or no density is finite
 */
export async function densityCentre(
  tree: Octree,
  crew: Crew,
  wantDensities = false,
  neighbours = NEIGHBOURS,
): Promise<DensityCentre | null> {
  const { count } = tree.bodies;
  if (count < neighbours + 2) return null;
  const all = wantDensities || count <= MEASURE_ALL;
  const { origin, threshold } = survey(tree, all);
  const density = new Float64Array(new SharedArrayBuffer(wantDensities ? count * 8 : 0));
  const branches = tree.branchRoots.length;
  const rows = new Float64Array(new SharedArrayBuffer(branches * DENSITY_SUMS * 8));
  const workers = count < 20_000 ? crewOfOne() : crew;
  const round = { tree, neighbours, threshold, origin, sums: rows, density };
  await workers.run(TASK, 'sumDensities', round, branches);
  const measured = Array.from({ length: DENSITY_SUMS }, (_, k) =>
    compensatedSum(rows.filter((_value, at) => at % DENSITY_SUMS === k)),
  );
  let sums = measured;
  if (threshold > 0) {
    // Bring the coarse densities to the scale of measured ones, as found just above the threshold.
    const scale = measured[10] > 0 ? measured[9] / measured[10] : 1;
    sums = addCoarse(tree, measured, origin, threshold, scale);
  }
  if (!(sums[0] > 0) || !Number.isFinite(sums[4])) return null;
  const d = [1, 2, 3].map((k) => sums[k] / sums[0]);
  const centre: [number, number, number] = [origin[0] + d[0], origin[1] + d[1], origin[2] + d[2]];
  // Σρ²|x − c|² from the moments about the origin.
  const square =
    sums[8] -
    2 * (d[0] * sums[5] + d[1] * sums[6] + d[2] * sums[7]) +
    sums[4] * (d[0] ** 2 + d[1] ** 2 + d[2] ** 2);
  return { centre, coreRadius: Math.sqrt(Math.max(0, square / sums[4])), density };
}

/** A rough centre, and the density below which leaves carry only {@link COARSE_SHARE} of the weights. */
function survey(tree: Octree, all: boolean): { origin: Float64Array; threshold: number } {
  const { geometry: G, topology: T } = tree;
  const sums = new Float64Array(4);
  everyGroup(tree, (slot, rho) => {
    const g = slot * GEOMETRY;
    const w = rho * (T[slot * TOPOLOGY + NODE_END] - T[slot * TOPOLOGY + NODE_BEGIN]);
    sums[0] += w;
    for (let k = 0; k < 3; k++) sums[k + 1] += w * (G[g + k] - G[k]);
  });
  const origin = Float64Array.from([0, 1, 2], (k) =>
    sums[0] > 0 ? G[k] + sums[k + 1] / sums[0] : G[k],
  );
  if (all) return { origin, threshold: 0 };

  // Weights of the centre and of the core radius, by density in steps of a factor 2^(1/4).
  const bins = 8192;
  const binOf = (rho: number) =>
    rho > 0 ? Math.min(bins - 1, Math.max(1, Math.floor(Math.log2(rho) * 4) + bins / 2)) : 0;
  const centreWeight = new Float64Array(bins);
  const coreWeight = new Float64Array(bins);
  everyGroup(tree, (slot, rho) => {
    const g = slot * GEOMETRY;
    const n = T[slot * TOPOLOGY + NODE_END] - T[slot * TOPOLOGY + NODE_BEGIN];
    const bin = binOf(rho);
    let d2 = 0;
    for (let k = 0; k < 3; k++) d2 += (G[g + k] - origin[k]) ** 2;
    centreWeight[bin] += n * rho;
    coreWeight[bin] += n * rho * rho * d2;
  });
  const enough = (weights: Float64Array) => {
    const total = compensatedSum(weights);
    let sum = 0;
    for (let bin = 0; bin < bins; bin++) {
      sum += weights[bin];
      if (sum > COARSE_SHARE * total) return bin;
    }
    return 0;
  };
  const bin = Math.min(enough(centreWeight), enough(coreWeight));
  return { origin, threshold: bin <= 1 ? 0 : 2 ** ((bin - bins / 2) / 4) };
}

/** Adds the leaves below the threshold with their coarse densities, scaled. */
function addCoarse(
  tree: Octree,
  measured: readonly number[],
  origin: Float64Array,
  threshold: number,
  scale: number,
): number[] {
  const { geometry: G, topology: T } = tree;
  const sums = [...measured];
  everyGroup(tree, (slot, coarse) => {
    if (coarse >= threshold) return;
    const g = slot * GEOMETRY;
    const n = T[slot * TOPOLOGY + NODE_END] - T[slot * TOPOLOGY + NODE_BEGIN];
    const rho = coarse * scale;
    let d2 = 0;
    sums[0] += n * rho;
    sums[4] += n * rho * rho;
    for (let k = 0; k < 3; k++) {
      const d = G[g + k] - origin[k];
      sums[1 + k] += n * rho * d;
      sums[5 + k] += n * rho * rho * d;
      d2 += d * d;
    }
    sums[8] += n * rho * rho * d2;
  });
  return sums;
}

function everyGroup(tree: Octree, visit: (slot: number, coarse: number) => void): void {
  for (let branch = 0; branch < tree.branchRoots.length; branch++) {
    eachGroup(tree, branch, visit);
  }
}
