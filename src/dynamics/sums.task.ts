/**
 * Sums over bodies, chunk by chunk: each job writes its chunk's partial sums, which are then added
 * in chunk order, so that the same bits come out for any number of threads.
 */
import { CompensatedSum } from '../numerics/compensated.ts';
import type { TakeJob } from '../parallel/crew.ts';
import type { FloatColumn } from '../snapshot/particles.ts';

/** Bodies a job handles. */
export const SUM_CHUNK = 32768;

export interface Bodies {
  readonly count: number;
  readonly mass: FloatColumn;
  readonly x: FloatColumn;
  readonly y: FloatColumn;
  readonly z: FloatColumn;
  readonly vx: FloatColumn;
  readonly vy: FloatColumn;
  readonly vz: FloatColumn;
}

/** A round of sums: `partial` gets one row of numbers a chunk. */
interface Round {
  readonly bodies: Bodies;
  /** 1 for the bodies that belong to the set; null for all. */
  readonly member: Uint8Array | null;
  readonly partial: Float64Array;
}

export interface FirstRound extends Round {
  /** A point near the bodies and a velocity near theirs, so that sums far from the origin keep their digits. */
  readonly reference: Float64Array;
}

/** Columns of {@link sumFirst}: particles, with mass, Σm, Σm², Σm x y z, Σm vx vy vz. */
export const FIRST_SUMS = 10;

export function sumFirst(round: FirstRound, takeJob: TakeJob): void {
  const { mass, x, y, z, vx, vy, vz } = round.bodies;
  const [rx, ry, rz, rvx, rvy, rvz] = round.reference;
  eachChunk(round, takeJob, (begin, end, at) => {
    const sums = compensated(8);
    let particles = 0;
    let heavy = 0;
    for (let i = begin; i < end; i++) {
      if (round.member !== null && round.member[i] === 0) continue;
      const m = mass[i];
      particles++;
      if (m > 0) heavy++;
      sums[0].add(m);
      sums[1].add(m * m);
      sums[2].add(m * (x[i] - rx));
      sums[3].add(m * (y[i] - ry));
      sums[4].add(m * (z[i] - rz));
      sums[5].add(m * (vx[i] - rvx));
      sums[6].add(m * (vy[i] - rvy));
      sums[7].add(m * (vz[i] - rvz));
    }
    round.partial[at] = particles;
    round.partial[at + 1] = heavy;
    store(sums, round.partial, at + 2);
  });
}

export interface SecondRound extends Round {
  /** Centre of mass and mean velocity of the set. */
  readonly frame: Float64Array;
  readonly potential: Float64Array;
  readonly clausiusShare: Float64Array;
}

/** Columns of {@link sumSecond}: Σm v², Σm φ, Σm w, L x y z, Σm r², Σm r·v. */
export const SECOND_SUMS = 8;

export function sumSecond(round: SecondRound, takeJob: TakeJob): void {
  const { mass, x, y, z, vx, vy, vz } = round.bodies;
  const { potential, clausiusShare } = round;
  const [cx, cy, cz, cvx, cvy, cvz] = round.frame;
  eachChunk(round, takeJob, (begin, end, at) => {
    const sums = compensated(SECOND_SUMS);
    for (let i = begin; i < end; i++) {
      if (round.member !== null && round.member[i] === 0) continue;
      const m = mass[i];
      const dx = x[i] - cx;
      const dy = y[i] - cy;
      const dz = z[i] - cz;
      const ux = vx[i] - cvx;
      const uy = vy[i] - cvy;
      const uz = vz[i] - cvz;
      sums[0].add(m * (ux * ux + uy * uy + uz * uz));
      sums[1].add(m * potential[i]);
      sums[2].add(m * clausiusShare[i]);
      sums[3].add(m * (dy * uz - dz * uy));
      sums[4].add(m * (dz * ux - dx * uz));
      sums[5].add(m * (dx * uy - dy * ux));
      sums[6].add(m * (dx * dx + dy * dy + dz * dz));
      sums[7].add(m * (dx * ux + dy * uy + dz * uz));
    }
    store(sums, round.partial, at);
  });
}

export interface NoiseRound extends Round {
  readonly frame: Float64Array;
  /** φ, or with softening w: whichever makes the ratio that is 1 in equilibrium. */
  readonly depth: Float64Array;
  /** Mass-weighted means of v² and depth. */
  readonly meanSquare: number;
  readonly meanDepth: number;
}

/** Σ m² [v²/⟨v²⟩ − 2φ/⟨φ⟩ + 1]². Source: docs/methods.md, first-order expansion of 2T/|U|. */
export function sumNoise(round: NoiseRound, takeJob: TakeJob): void {
  const { mass, vx, vy, vz } = round.bodies;
  const { depth, meanSquare, meanDepth } = round;
  const cvx = round.frame[3];
  const cvy = round.frame[4];
  const cvz = round.frame[5];
  eachChunk(round, takeJob, (begin, end, at) => {
    const sum = new CompensatedSum();
    for (let i = begin; i < end; i++) {
      if (round.member !== null && round.member[i] === 0) continue;
      const ux = vx[i] - cvx;
      const uy = vy[i] - cvy;
      const uz = vz[i] - cvz;
      const v2 = ux * ux + uy * uy + uz * uz;
      const term = mass[i] * (v2 / meanSquare - (2 * depth[i]) / meanDepth + 1);
      sum.add(term * term);
    }
    round.partial[at] = sum.value();
  });
}

export interface VirialNoiseRound extends Round {
  readonly frame: Float64Array;
  readonly clausiusShare: Float64Array;
  /** Mass-weighted mean of v² + w. */
  readonly mean: number;
}

/** Σ m² (v² + w − ⟨v² + w⟩)². Source: docs/methods.md, first-order expansion of 2T + W. */
export function sumVirialNoise(round: VirialNoiseRound, takeJob: TakeJob): void {
  const { mass, vx, vy, vz } = round.bodies;
  const { clausiusShare, mean } = round;
  const cvx = round.frame[3];
  const cvy = round.frame[4];
  const cvz = round.frame[5];
  eachChunk(round, takeJob, (begin, end, at) => {
    const sum = new CompensatedSum();
    for (let i = begin; i < end; i++) {
      if (round.member !== null && round.member[i] === 0) continue;
      const ux = vx[i] - cvx;
      const uy = vy[i] - cvy;
      const uz = vz[i] - cvz;
      const term = mass[i] * (ux * ux + uy * uy + uz * uz + clausiusShare[i] - mean);
      sum.add(term * term);
    }
    round.partial[at] = sum.value();
  });
}

export interface EnergyRound extends Round {
  readonly frame: Float64Array;
  readonly potential: Float64Array;
  /** Written: ½|v − v_c|² + φ of each member, 0 elsewhere. */
  readonly specificEnergy: Float64Array;
}

/** Specific energies of the members; partial sums count those that are not bound (energy ≥ 0). */
export function sumUnbound(round: EnergyRound, takeJob: TakeJob): void {
  const { vx, vy, vz } = round.bodies;
  const { potential, specificEnergy } = round;
  const cvx = round.frame[3];
  const cvy = round.frame[4];
  const cvz = round.frame[5];
  eachChunk(round, takeJob, (begin, end, at) => {
    let unbound = 0;
    for (let i = begin; i < end; i++) {
      if (round.member !== null && round.member[i] === 0) {
        specificEnergy[i] = 0;
        continue;
      }
      const ux = vx[i] - cvx;
      const uy = vy[i] - cvy;
      const uz = vz[i] - cvz;
      const energy = 0.5 * (ux * ux + uy * uy + uz * uz) + potential[i];
      specificEnergy[i] = energy;
      if (energy >= 0) unbound++;
    }
    round.partial[at] = unbound;
  });
}

function eachChunk(
  round: Round,
  takeJob: TakeJob,
  work: (begin: number, end: number, at: number) => void,
): void {
  const count = round.bodies.count;
  const chunks = Math.ceil(count / SUM_CHUNK);
  const width = round.partial.length / chunks;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const begin = job * SUM_CHUNK;
    work(begin, Math.min(count, begin + SUM_CHUNK), job * width);
  }
}

function compensated(width: number): CompensatedSum[] {
  return Array.from({ length: width }, () => new CompensatedSum());
}

function store(sums: readonly CompensatedSum[], into: Float64Array, at: number): void {
  for (let k = 0; k < sums.length; k++) into[at + k] = sums[k].value();
}
