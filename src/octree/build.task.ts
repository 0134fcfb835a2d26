/** Work of the crew while a tree is built: each function does numbered jobs on shared arrays. */
import type { TakeJob } from '../parallel/crew.ts';
import { BranchScratch, growBranch, plantBranch, type LeafRule } from './branch.ts';
import { classify, type KeyBox } from './partition.ts';
import type { OrderedBodies } from './tree.ts';

type Column = Float64Array | Float32Array;

/** Bodies a job of the chunked passes handles; fixed, so that the cut does not depend on threads. */
export const CHUNK = 65536;

export interface Positions {
  readonly x: Column;
  readonly y: Column;
  readonly z: Column;
}

export interface ExtentRound {
  readonly positions: Positions;
  readonly begin: number;
  readonly end: number;
  /** Six numbers a chunk: lowest x, y, z, highest x, y, z. */
  readonly extents: Float64Array;
}

export function measureExtent(round: ExtentRound, takeJob: TakeJob): void {
  const { x, y, z } = round.positions;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const begin = round.begin + job * CHUNK;
    const end = Math.min(round.end, begin + CHUNK);
    spread(x, begin, end, round.extents, job * 6);
    spread(y, begin, end, round.extents, job * 6 + 1);
    spread(z, begin, end, round.extents, job * 6 + 2);
  }
}

function spread(column: Column, begin: number, end: number, into: Float64Array, at: number): void {
  let low = Infinity;
  let high = -Infinity;
  for (let i = begin; i < end; i++) {
    const value = column[i];
    if (value < low) low = value;
    if (value > high) high = value;
  }
  into[at] = low;
  into[at + 3] = high;
}

export interface ClassifyRound {
  readonly positions: Positions;
  readonly begin: number;
  readonly end: number;
  readonly box: KeyBox;
  readonly firstKeys: Float64Array;
  /** Bucket of each body, at its index less `begin`. */
  readonly bucketOf: Uint16Array;
  /** Bodies in each bucket, one row a chunk. */
  readonly counts: Uint32Array;
}

export function classifyBodies(round: ClassifyRound, takeJob: TakeJob): void {
  const { positions, firstKeys } = round;
  const x = positions.x.subarray(round.begin, round.end);
  const y = positions.y.subarray(round.begin, round.end);
  const z = positions.z.subarray(round.begin, round.end);
  const buckets = firstKeys.length;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const begin = job * CHUNK;
    const end = Math.min(round.end - round.begin, begin + CHUNK);
    const counts = round.counts.subarray(job * buckets, (job + 1) * buckets);
    classify(round, x, y, z, begin, end, round.bucketOf, counts);
  }
}

export interface ScatterRound {
  readonly from: Positions & {
    readonly mass: Column;
    readonly squares?: Float64Array;
    readonly input: Uint32Array | null;
  };
  readonly begin: number;
  readonly end: number;
  readonly bucketOf: Uint16Array;
  /** Where each chunk's first body of each bucket goes, one row a chunk. */
  readonly places: Uint32Array;
  readonly buckets: number;
  readonly to: OrderedBodies;
}

export function scatterBodies(round: ScatterRound, takeJob: TakeJob): void {
  const { from, to, bucketOf, buckets, begin: origin } = round;
  const squares = from.squares !== undefined && from.squares.length > 0 ? from.squares : null;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const begin = job * CHUNK;
    const end = Math.min(round.end - origin, begin + CHUNK);
    const places = round.places.slice(job * buckets, (job + 1) * buckets);
    for (let k = begin; k < end; k++) {
      const place = places[bucketOf[k]]++;
      const i = origin + k;
      to.x[place] = from.x[i];
      to.y[place] = from.y[i];
      to.z[place] = from.z[i];
      to.mass[place] = from.mass[i];
      to.input[place] = from.input === null ? i : from.input[i];
      if (squares !== null) to.squares[place] = squares[i];
    }
  }
}

export interface CopyRound {
  readonly from: OrderedBodies;
  readonly to: OrderedBodies;
  /** Place in `to` of the first body of `from`. */
  readonly at: number;
}

export function copyBodies(round: CopyRound, takeJob: TakeJob): void {
  const { from, to, at } = round;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const begin = job * CHUNK;
    const end = Math.min(from.count, begin + CHUNK);
    to.x.set(from.x.subarray(begin, end), at + begin);
    to.y.set(from.y.subarray(begin, end), at + begin);
    to.z.set(from.z.subarray(begin, end), at + begin);
    to.mass.set(from.mass.subarray(begin, end), at + begin);
    to.input.set(from.input.subarray(begin, end), at + begin);
    if (to.squares.length > 0) to.squares.set(from.squares.subarray(begin, end), at + begin);
  }
}

export interface GrowRound {
  readonly bodies: OrderedBodies;
  readonly rule: LeafRule;
  /** First body and end of each branch. */
  readonly ranges: Uint32Array;
  readonly rootSlots: Uint32Array;
  readonly geometry: Float64Array;
  readonly topology: Uint32Array;
  readonly spread: Float64Array;
  /** Written: first slot and end of each branch's nodes below its root. */
  readonly slots: Uint32Array;
  /** One number: the next free slot. Which branch lies where has no bearing on any result. */
  readonly nextSlot: Uint32Array;
  readonly slotCapacity: number;
}

const scratch = new BranchScratch();

/** Grows branches; one that finds no room leaves its slots 0 and `nextSlot` above the capacity. */
export function growBranches(round: GrowRound, takeJob: TakeJob): void {
  const { bodies, ranges, rootSlots, slots } = round;
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const nodes = growBranch(bodies, ranges[2 * job], ranges[2 * job + 1], round.rule, scratch);
    const first = Atomics.add(round.nextSlot, 0, nodes - 1);
    if (first + nodes - 1 > round.slotCapacity) continue;
    slots[2 * job] = first;
    slots[2 * job + 1] = first + nodes - 1;
    plantBranch(bodies, scratch, nodes, rootSlots[job], first, round);
  }
}
