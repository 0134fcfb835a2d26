/**
 * Density centre and core radius from the distances of nearest neighbours.
 *
 * ρ_i is the mass of the j − 1 nearest neighbours over the sphere out to the j-th; the body itself
 * and the j-th are not counted, which makes ρ unbiased. Centre Σρx/Σρ, core radius √(Σρ²d²/Σρ²).
 * Source: Casertano & Hut 1985, ApJ 298, 80; the squared form of the core radius is later practice.
 */
import type * as NeighboursTask from './neighbours.task.ts';
import { CompensatedSum, compensatedSum } from '../numerics/compensated.ts';
import { crewOfOne, type Crew, type TaskModule } from '../parallel/crew.ts';
import { BIN_SUMS, BINS, DENSITY_SUMS, MOMENTS } from './neighbours.task.ts';
import { eachGroup } from './groups.ts';
import { GEOMETRY, NODE_BEGIN, NODE_END, TOPOLOGY, type Octree } from './tree.ts';

const TASK: TaskModule<typeof NeighboursTask> = {
  url: new URL('./neighbours.task.js', import.meta.url),
  load: () => import('./neighbours.task.ts'),
};

/** The usual j of the estimator. */
export const NEIGHBOURS = 6;
/** Up to this many bodies every one is measured. */
const MEASURE_ALL = 200_000;
/**
 * Beyond, one in some of the groups of low density that carry this share of the weights is measured;
 * they calibrate the mean densities of the others, by steps of density.
 */
const SAMPLED_SHARE = 0.03;
/** Groups of still lower density that carry this share are not measured at all. */
const UNMEASURED_SHARE = 0.002;

/** Squared distance from the rough centre to the true one, over that of the core, that costs too many digits. */
const FAR = 1e4;

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
  const { limits, origin: rough } = survey(tree, all);
  const density = new Float64Array(new SharedArrayBuffer(wantDensities ? count * 8 : 0));
  const branches = tree.branchRoots.length;
  const rows = new Float64Array(new SharedArrayBuffer(branches * DENSITY_SUMS * 8));
  const workers = count < 20_000 ? crewOfOne() : crew;
  for (let origin = rough, first = true; ; first = false) {
    const round = { tree, neighbours, ...limits, origin, sums: rows.fill(0), density };
    await workers.run(TASK, 'sumDensities', round, branches);
    const columns = Array.from({ length: DENSITY_SUMS }, () => new CompensatedSum());
    for (let k = 0; k < rows.length; k++) columns[k % DENSITY_SUMS].add(rows[k]);
    const sums = withUnmeasured(columns.map((column) => column.value()));
    if (!(sums[0] > 0) || !Number.isFinite(sums[4])) return null;
    const d = [1, 2, 3].map((k) => sums[k] / sums[0]);
    const centre: [number, number, number] = [origin[0] + d[0], origin[1] + d[1], origin[2] + d[2]];
    // Σρ²|x − c|² from the moments about the origin.
    const away2 = d[0] ** 2 + d[1] ** 2 + d[2] ** 2;
    const square =
      sums[8] - 2 * (d[0] * sums[5] + d[1] * sums[6] + d[2] * sums[7]) + sums[4] * away2;
    if (first && away2 * sums[4] > FAR * square) {
      // The difference of large numbers: the same again about what was found.
      origin = Float64Array.from(centre);
      continue;
    }
    return { centre, coreRadius: Math.sqrt(Math.max(0, square / sums[4])), density };
  }
}

/** Adds the groups that were not measured: their coarse moments at the scale that measured ones of like density tell. */
function withUnmeasured(sums: readonly number[]): number[] {
  const moments = sums.slice(0, MOMENTS);
  // Where a bin has no measured group, the nearest denser bin that has one stands in.
  let scale = [1, 1, 1];
  for (let bin = 0; bin < BINS; bin++) {
    const b = sums.slice(MOMENTS + bin * BIN_SUMS, MOMENTS + (bin + 1) * BIN_SUMS);
    if (b[3] > 0 && b[5] > 0) scale = [b[0] / b[3], b[1] / b[4], b[2] / b[5]];
    for (let k = 0; k < MOMENTS; k++) {
      moments[k] += b[6 + k] * (k < 4 ? scale[0] : k < MOMENTS - 1 ? scale[1] : scale[2]);
    }
  }
  return moments;
}

interface Limits {
  /** See {@link DensityRound}. */
  readonly all: number;
  readonly none: number;
}

/** A rough centre, and the densities below which groups carry only certain shares of the weights. */
function survey(tree: Octree, all: boolean): { origin: Float64Array; limits: Limits } {
  const { geometry: G, topology: T } = tree;
  const size = (slot: number) => T[slot * TOPOLOGY + NODE_END] - T[slot * TOPOLOGY + NODE_BEGIN];
  const sums = new Float64Array(4);
  everyGroup(tree, (slot, rho) => {
    const g = slot * GEOMETRY;
    const w = rho * size(slot);
    sums[0] += w;
    for (let k = 0; k < 3; k++) sums[k + 1] += w * (G[g + k] - G[k]);
  });
  const origin = Float64Array.from([0, 1, 2], (k) =>
    sums[0] > 0 ? G[k] + sums[k + 1] / sums[0] : G[k],
  );
  if (all) return { origin, limits: { all: 0, none: 0 } };

  // Weights of the centre and of the core radius, by density in steps of a factor 2^(1/4).
  const bins = 8192;
  const binOf = (rho: number) =>
    rho > 0 ? Math.min(bins - 1, Math.max(1, Math.floor(Math.log2(rho) * 4) + bins / 2)) : 0;
  const centreWeight = new Float64Array(bins);
  const coreWeight = new Float64Array(bins);
  everyGroup(tree, (slot, rho) => {
    const g = slot * GEOMETRY;
    const bin = binOf(rho);
    let d2 = 0;
    for (let k = 0; k < 3; k++) d2 += (G[g + k] - origin[k]) ** 2;
    centreWeight[bin] += size(slot) * rho;
    coreWeight[bin] += size(slot) * rho * rho * d2;
  });
  const binBelow = (weights: Float64Array, share: number) => {
    const total = compensatedSum(weights);
    let sum = 0;
    for (let bin = 0; bin < bins; bin++) {
      sum += weights[bin];
      if (sum > share * total) return bin;
    }
    return 0;
  };
  const below = (share: number) => {
    const bin = Math.min(binBelow(centreWeight, share), binBelow(coreWeight, share));
    return bin <= 1 ? 0 : 2 ** ((bin - bins / 2) / 4);
  };
  return { origin, limits: { all: below(SAMPLED_SHARE), none: below(UNMEASURED_SHARE) } };
}

function everyGroup(tree: Octree, visit: (slot: number, coarse: number) => void): void {
  for (let branch = 0; branch < tree.branchRoots.length; branch++) {
    eachGroup(tree, branch, { group: visit });
  }
}
