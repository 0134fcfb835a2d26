/** Local densities from nearest neighbours, leaf by leaf: work of the crew. */
import type { TakeJob } from '../parallel/crew.ts';
import { eachGroup } from './groups.ts';
import { Surroundings } from './surroundings.ts';
import { GEOMETRY, NODE_BEGIN, NODE_END, TOPOLOGY, type Octree } from './tree.ts';

/** Moments of a density: Σρ, Σρ x y z, Σρ², Σρ² x y z, Σρ² r². */
export const MOMENTS = 9;
/** Bins of coarse density, a factor √2 each, that groups below {@link DensityRound.all} fall into. */
export const BINS = 24;
/** Numbers a bin: Σρ, Σρ², Σρ²r² measured, the same of the same groups coarse, and moments of groups not measured, coarse. */
export const BIN_SUMS = 6 + MOMENTS;
/** Sums a branch gives: moments of what was measured, then the bins. */
export const DENSITY_SUMS = MOMENTS + BINS * BIN_SUMS;
/** One in so many groups below {@link DensityRound.all} is measured. */
const MEASURED_ONE_IN = 4;

export interface DensityRound {
  readonly tree: Octree;
  /** The j of the estimator: distance to the j-th neighbour. */
  readonly neighbours: number;
  /** Groups of at least this coarse density are all measured; 0 for every group. */
  readonly all: number;
  /** Groups below this are not measured, those between only one in some. */
  readonly none: number;
  /** Positions in the sums are about this point. */
  readonly origin: Float64Array;
  readonly sums: Float64Array;
  /** Density of each body in input order, or empty if not wanted. */
  readonly density: Float64Array;
}

export function sumDensities(round: DensityRound, takeJob: TakeJob): void {
  const { tree, all, none, neighbours: j, density } = round;
  const { geometry: G, topology: T, bodies } = tree;
  const { x, y, z, mass, input } = bodies;
  const around = new Surroundings(tree, j + 1);
  const { distance2, place } = around;
  const [ox, oy, oz] = round.origin;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const sums = round.sums.subarray(job * DENSITY_SUMS, (job + 1) * DENSITY_SUMS);
    let sampled = 0;
    const group = (slot: number, coarse: number) => {
      const t = slot * TOPOLOGY;
      const g = slot * GEOMETRY;
      const begin = T[t + NODE_BEGIN];
      const end = T[t + NODE_END];
      const bin = coarse >= all ? -1 : MOMENTS + binOf(all, coarse) * BIN_SUMS;
      if (bin >= 0) {
        const gx = G[g] - ox;
        const gy = G[g + 1] - oy;
        const gz = G[g + 2] - oz;
        const w = (end - begin) * coarse;
        const q = w * coarse;
        const q2 = q * (gx * gx + gy * gy + gz * gz);
        if (coarse < none || sampled++ % MEASURED_ONE_IN !== 0) {
          const at = bin + 6;
          sums[at] += w;
          sums[at + 1] += w * gx;
          sums[at + 2] += w * gy;
          sums[at + 3] += w * gz;
          sums[at + 4] += q;
          sums[at + 5] += q * gx;
          sums[at + 6] += q * gy;
          sums[at + 7] += q * gz;
          sums[at + 8] += q2;
          return;
        }
        sums[bin + 3] += w;
        sums[bin + 4] += q;
        sums[bin + 5] += q2;
      }
      around.openGroup(slot);
      for (let i = begin; i < end; i++) {
        const px = x[i];
        const py = y[i];
        const pz = z[i];
        around.find(i);
        let near = 0;
        for (let k = 1; k < j; k++) near += mass[place[k]];
        const r3 = distance2[j] * Math.sqrt(distance2[j]);
        const rho = r3 > 0 ? near / ((4 / 3) * Math.PI * r3) : 0;
        if (density.length > 0) density[input[i]] = rho;
        const dx = px - ox;
        const dy = py - oy;
        const dz = pz - oz;
        const q = rho * rho;
        sums[0] += rho;
        sums[1] += rho * dx;
        sums[2] += rho * dy;
        sums[3] += rho * dz;
        sums[4] += q;
        sums[5] += q * dx;
        sums[6] += q * dy;
        sums[7] += q * dz;
        const q2 = q * (dx * dx + dy * dy + dz * dz);
        sums[8] += q2;
        if (bin >= 0) {
          sums[bin] += rho;
          sums[bin + 1] += q;
          sums[bin + 2] += q2;
        }
      }
    };
    eachGroup(tree, job, { group, enter: (slot, size) => around.enter(slot, size) });
  }
}

function binOf(all: number, coarse: number): number {
  return coarse > 0 ? Math.min(BINS - 1, Math.floor(2 * Math.log2(all / coarse))) : BINS - 1;
}
