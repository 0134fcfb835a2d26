/** Bound pairs among neighbours, and how hot it is around them: work of the crew. */
import { eachGroup } from '../octree/groups.ts';
import { softeningOfPair, type Softening } from '../octree/softening.ts';
import { Surroundings } from '../octree/surroundings.ts';
import { NODE_BEGIN, NODE_END, TOPOLOGY, type Octree } from '../octree/tree.ts';
import type { TakeJob } from '../parallel/crew.ts';
import { pairPotential } from './pairOrbit.ts';
import type { Bodies } from './sums.task.ts';

/** Stands for no partner. */
export const NOBODY = 0xffffffff;
/** A partner is sought among so many nearest bodies, as far as there are so many. */
export const PARTNERS = 4;
/** The temperature is that of so many nearest bodies. */
export const AROUND = 32;
/** Pairs a job judges. */
export const PAIRS_A_JOB = 64;
/** Numbers a pair of {@link judgePairs}: kT around it, and from how many bodies. */
export const JUDGED = 2;

interface PairRound {
  readonly tree: Octree;
  readonly bodies: Bodies;
}

export interface PartnerRound extends PairRound {
  readonly gravity: number;
  readonly softening: Softening;
  /** Written, by place in the tree: place of the body to which it is bound most, or {@link NOBODY}. */
  readonly partner: Uint32Array;
}

/** Finds each body's most tightly bound partner among its nearest neighbours; one job a branch. */
export function findPartners(round: PartnerRound, takeJob: TakeJob): void {
  const { tree, bodies, gravity, softening, partner } = round;
  const { vx, vy, vz } = bodies;
  const { topology: T } = tree;
  const { mass, input, count } = tree.bodies;
  const wanted = Math.min(PARTNERS + 1, count);
  const around = new Surroundings(tree, wanted);
  const { distance2, place } = around;
  const group = (slot: number) => {
    around.openGroup(slot);
    for (let i = T[slot * TOPOLOGY + NODE_BEGIN]; i < T[slot * TOPOLOGY + NODE_END]; i++) {
      partner[i] = NOBODY;
      if (mass[i] === 0) continue;
      around.find(i);
      const own = input[i];
      let most = 0;
      for (let k = 0; k < wanted; k++) {
        const j = place[k];
        const r2 = distance2[k];
        if (j === i || mass[j] === 0) continue;
        const other = input[j];
        const u = vx[other] - vx[own];
        const v = vy[other] - vy[own];
        const w = vz[other] - vz[own];
        const v2 = u * u + v * v + w * w;
        const attraction2 = 2 * gravity * (mass[i] + mass[j]);
        // Most pairs move too fast even unsoftened, which takes no root to tell.
        if (v2 * v2 * r2 >= attraction2 * attraction2) continue;
        const ofPair = softeningOfPair(softening, own, other);
        if (r2 === 0 && ofPair.kernel === 'none') continue;
        const binding =
          (mass[i] * mass[j] * (attraction2 * pairPotential(ofPair, r2) - v2)) /
          (mass[i] + mass[j]);
        // Of equals the first by index, so that both bodies choose alike.
        if (
          binding > most ||
          (binding === most && partner[i] !== NOBODY && other < input[partner[i]])
        ) {
          most = binding;
          partner[i] = j;
        }
      }
    }
  };
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    eachGroup(tree, job, { group, enter: (slot, size) => around.enter(slot, size) });
  }
}

export interface JudgeRound extends PairRound {
  readonly partner: Uint32Array;
  /** Places in the tree of one body of each pair. */
  readonly pairs: Uint32Array;
  /** Written, {@link JUDGED} numbers a pair. */
  readonly judged: Float64Array;
}

/**
 * kT around each pair: a third of ⟨m v²⟩ of the nearest bodies about their own mean, the pair left out
 * and other bound pairs taken as one body each, n/(n − 1) for the mean that comes from them.
 */
export function judgePairs(round: JudgeRound, takeJob: TakeJob): void {
  const { tree, bodies, partner, pairs, judged } = round;
  const { vx, vy, vz } = bodies;
  const { x, y, z, mass, input, count } = tree.bodies;
  const wanted = Math.min(AROUND + 2, count);
  const around = new Surroundings(tree, wanted);
  const { place } = around;
  const isPair = (i: number) => partner[i] !== NOBODY && partner[partner[i]] === i;
  const masses = new Float64Array(wanted);
  const velocities = new Float64Array(3 * wanted);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const end = Math.min(pairs.length, (job + 1) * PAIRS_A_JOB);
    for (let k = job * PAIRS_A_JOB; k < end; k++) {
      const i = pairs[k];
      // About the centre of mass, so that it does not matter which of the two comes first.
      const share = mass[partner[i]] / (mass[i] + mass[partner[i]]);
      const middle = (column: Float64Array) => column[i] + share * (column[partner[i]] - column[i]);
      around.findAt(middle(x), middle(y), middle(z));
      let objects = 0;
      let taken = 0;
      for (let near = 0; near < wanted && taken < AROUND; near++) {
        const a = place[near];
        if (a === i || a === partner[i] || mass[a] === 0) continue;
        taken++;
        const b = isPair(a) ? partner[a] : a;
        if (b !== a && place.subarray(0, near).includes(b)) continue; // taken with the other one
        const m = b === a ? mass[a] : mass[a] + mass[b];
        const mean = (column: ArrayLike<number>) =>
          b === a
            ? column[input[a]]
            : (mass[a] * column[input[a]] + mass[b] * column[input[b]]) / m;
        masses[objects] = m;
        velocities[3 * objects] = mean(vx);
        velocities[3 * objects + 1] = mean(vy);
        velocities[3 * objects + 2] = mean(vz);
        objects++;
      }
      judged[k * JUDGED] = temperature(masses, velocities, objects);
      judged[k * JUDGED + 1] = objects;
    }
  }
}

/** Σ m |v − ⟨v⟩|²/(3(n − 1)); 0 for fewer than two bodies. */
function temperature(masses: Float64Array, velocities: Float64Array, n: number): number {
  if (n < 2) return 0;
  let total = 0;
  const mean = [0, 0, 0];
  for (let k = 0; k < n; k++) {
    total += masses[k];
    for (let axis = 0; axis < 3; axis++) mean[axis] += masses[k] * velocities[3 * k + axis];
  }
  let square = 0;
  for (let k = 0; k < n; k++) {
    for (let axis = 0; axis < 3; axis++) {
      square += masses[k] * (velocities[3 * k + axis] - mean[axis] / total) ** 2;
    }
  }
  return square / (3 * (n - 1));
}
