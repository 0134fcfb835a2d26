/**
 * Selecting radii by enclosed mass without sorting all bodies: squared distances, a histogram of
 * their bits, and the bodies of the few bins that matter.
 *
 * The bits of a positive double, read as an integer, grow with its value; the high 32 of them make
 * bins of equal ratio over any range.
 */
import { CompensatedSum } from '../numerics/compensated.ts';
import type { TakeJob } from '../parallel/crew.ts';
import type { FloatColumn } from '../snapshot/particles.ts';

/** Slices the bodies are cut into, whatever their number; partial results are added in slice order. */
export const SLICES = 16;

const LITTLE_ENDIAN = new Uint8Array(new Uint32Array([1]).buffer)[0] === 1;
/** Place of the high word of double number i in its buffer's 32-bit words is 2 i + HIGH_WORD. */
const HIGH_WORD = LITTLE_ENDIAN ? 1 : 0;

interface SliceRound {
  readonly mass: FloatColumn;
  readonly member: Uint8Array | null;
  /** Squared distances. */
  readonly distance2: Float64Array;
}

export interface DistanceRound extends SliceRound {
  readonly x: FloatColumn;
  readonly y: FloatColumn;
  readonly z: FloatColumn;
  readonly centre: Float64Array;
  /** Written, two numbers a slice: lowest and highest high word among the set's bodies with mass. */
  readonly words: Uint32Array;
}

export function measureDistances(round: DistanceRound, takeJob: TakeJob): void {
  const { x, y, z, mass, member, distance2, words } = round;
  const [cx, cy, cz] = round.centre;
  const bits = new Uint32Array(distance2.buffer);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const [begin, end] = slice(distance2.length, job);
    let low = 0xffffffff;
    let high = 0;
    for (let i = begin; i < end; i++) {
      const dx = x[i] - cx;
      const dy = y[i] - cy;
      const dz = z[i] - cz;
      distance2[i] = dx * dx + dy * dy + dz * dz;
      if (mass[i] === 0 || (member !== null && member[i] === 0)) continue;
      const word = bits[2 * i + HIGH_WORD];
      if (word < low) low = word;
      if (word > high) high = word;
    }
    words[2 * job] = low;
    words[2 * job + 1] = high;
  }
}

/** Bins over high words: word → (word − low) >>> shift. */
export interface Bins {
  readonly low: number;
  readonly shift: number;
  readonly count: number;
}

export interface HistogramRound extends SliceRound {
  readonly bins: Bins;
  /** Written: mass in each bin, one row a slice. */
  readonly masses: Float64Array;
}

export function weighBins(round: HistogramRound, takeJob: TakeJob): void {
  const { mass, member, distance2, bins, masses } = round;
  const bits = new Uint32Array(distance2.buffer);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const [begin, end] = slice(distance2.length, job);
    const row = masses.subarray(job * bins.count, (job + 1) * bins.count);
    for (let i = begin; i < end; i++) {
      if (mass[i] === 0 || (member !== null && member[i] === 0)) continue;
      row[(bits[2 * i + HIGH_WORD] - bins.low) >>> bins.shift] += mass[i];
    }
  }
}

export interface CollectRound extends SliceRound {
  readonly bins: Bins;
  /** 1 for the bins whose bodies are wanted. */
  readonly wanted: Uint8Array;
}

/** Bodies of the wanted bins, in input order within a slice. */
export interface Collected {
  readonly slice: number;
  readonly bodies: Uint32Array;
}

export function collectBins(round: CollectRound, takeJob: TakeJob): Collected[] {
  const { mass, member, distance2, bins, wanted } = round;
  const bits = new Uint32Array(distance2.buffer);
  const found: Collected[] = [];
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    const [begin, end] = slice(distance2.length, job);
    const bodies: number[] = [];
    for (let i = begin; i < end; i++) {
      if (mass[i] === 0 || (member !== null && member[i] === 0)) continue;
      if (wanted[(bits[2 * i + HIGH_WORD] - bins.low) >>> bins.shift] === 1) bodies.push(i);
    }
    found.push({ slice: job, bodies: Uint32Array.from(bodies) });
  }
  return found;
}

/** Bodies [begin, end) of a slice. */
function slice(count: number, job: number): [number, number] {
  return [Math.floor((job * count) / SLICES), Math.floor(((job + 1) * count) / SLICES)];
}

/** Mass of each bin over all slices, compensated. */
export function addSlices(masses: Float64Array, bins: number): Float64Array {
  const total = new Float64Array(bins);
  for (let bin = 0; bin < bins; bin++) {
    const sum = new CompensatedSum();
    for (let k = bin; k < masses.length; k += bins) sum.add(masses[k]);
    total[bin] = sum.value();
  }
  return total;
}
