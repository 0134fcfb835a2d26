/**
 * Cutting the whole set into branches of a few thousand bodies, before any body is moved.
 *
 * A sample of the bodies, in Morton order, tells where the octants of octants lie that hold about
 * as many bodies as a branch should. Each such octant is an interval of Morton keys, so that every
 * body finds its bucket by one binary search, and one pass moves it there.
 */

/** Octant levels of a key: 17, so that a key of 51 bits is exact in a double. */
const LEVELS = 17;
const CELLS = 2 ** LEVELS;
const KEY_END = 8 ** LEVELS;
const LOW_BITS = 9;
const LOW_MASK = 2 ** LOW_BITS - 1;
const HIGH_STEP = 8 ** LOW_BITS;

/** Bits of a 9-bit number spread out to every third place. */
const SPREAD = Uint32Array.from({ length: 512 }, (_, v) => {
  let s = 0;
  for (let bit = 0; bit < LOW_BITS; bit++) s |= ((v >> bit) & 1) << (3 * bit);
  return s;
});

/** The cube that keys refer to: its low corner and cells per unit of length. */
export interface KeyBox {
  readonly lowX: number;
  readonly lowY: number;
  readonly lowZ: number;
  readonly cellsPerLength: number;
}

/** The cube from the low corner of an extent (lowest x, y, z, highest x, y, z) over its longest edge. */
export function keyBox(extent: Float64Array): KeyBox {
  const edge = Math.max(extent[3] - extent[0], extent[4] - extent[1], extent[5] - extent[2]);
  return {
    lowX: extent[0],
    lowY: extent[1],
    lowZ: extent[2],
    cellsPerLength: edge > 0 && CELLS / edge < Infinity ? CELLS / edge : 0,
  };
}

/** Morton key of a point in the box: an integer below 2^51. */
export function mortonKey(box: KeyBox, x: number, y: number, z: number): number {
  const i = Math.min(CELLS - 1, (x - box.lowX) * box.cellsPerLength) | 0;
  const j = Math.min(CELLS - 1, (y - box.lowY) * box.cellsPerLength) | 0;
  const k = Math.min(CELLS - 1, (z - box.lowZ) * box.cellsPerLength) | 0;
  const high = SPREAD[i >> LOW_BITS] | (SPREAD[j >> LOW_BITS] << 1) | (SPREAD[k >> LOW_BITS] << 2);
  const low = SPREAD[i & LOW_MASK] | (SPREAD[j & LOW_MASK] << 1) | (SPREAD[k & LOW_MASK] << 2);
  return high * HIGH_STEP + low;
}

/** An octant of the sampled tree: buckets [bucket, bucketEnd), and its parts if it was cut. */
export interface Octant {
  readonly bucket: number;
  readonly bucketEnd: number;
  readonly parts: readonly Octant[];
}

export interface BucketPlan {
  readonly box: KeyBox;
  /** First key of each bucket, ascending; the first is 0. */
  readonly firstKeys: Float64Array;
  readonly root: Octant;
}

/** Buckets are numbered in 16 bits; a plan stays well below that. */
const MOST_BUCKETS = 60_000;

/**
 * Plans buckets from the keys of a sample.
 * @param sampleKeys - keys of the sample; sorted in place
 * @param sampleCapacity - an octant with more of the sample than this is cut
 */
export function planBuckets(
  box: KeyBox,
  sampleKeys: Float64Array,
  sampleCapacity: number,
): BucketPlan {
  sampleKeys.sort();
  const firstKeys: number[] = [];
  const plan = (key: number, size: number, begin: number, end: number): Octant => {
    const bucket = firstKeys.length;
    if (end - begin <= sampleCapacity || size <= 1 || bucket > MOST_BUCKETS) {
      firstKeys.push(key);
      return { bucket, bucketEnd: bucket + 1, parts: [] };
    }
    const parts: Octant[] = [];
    const part = size / 8;
    let from = begin;
    for (let octant = 0; octant < 8; octant++) {
      const partKey = key + octant * part;
      const to = octant === 7 ? end : lowerBound(sampleKeys, partKey + part, from, end);
      parts.push(plan(partKey, part, from, to));
      from = to;
    }
    return { bucket, bucketEnd: firstKeys.length, parts };
  };
  const root = plan(0, KEY_END, 0, sampleKeys.length);
  return { box, firstKeys: Float64Array.from(firstKeys), root };
}

function lowerBound(sorted: Float64Array, key: number, begin: number, end: number): number {
  let low = begin;
  let high = end;
  while (low < high) {
    const mid = (low + high) >>> 1;
    if (sorted[mid] < key) low = mid + 1;
    else high = mid;
  }
  return low;
}

/**
 * Bucket of each body in [begin, end), and how many bodies each bucket gets from this range.
 * @param bucketOf - written at [begin, end)
 * @param counts - one number a bucket, overwritten
 */
export function classify(
  plan: Pick<BucketPlan, 'box' | 'firstKeys'>,
  x: ArrayLike<number>,
  y: ArrayLike<number>,
  z: ArrayLike<number>,
  begin: number,
  end: number,
  bucketOf: Uint16Array,
  counts: Uint32Array,
): void {
  const { box, firstKeys } = plan;
  const buckets = firstKeys.length;
  let topStep = 1;
  while (topStep * 2 <= buckets) topStep *= 2;
  counts.fill(0);
  for (let i = begin; i < end; i++) {
    const key = mortonKey(box, x[i], y[i], z[i]);
    let bucket = 0;
    for (let step = topStep; step > 0; step >>= 1) {
      const probe = bucket + step;
      if (probe < buckets && firstKeys[probe] <= key) bucket = probe;
    }
    bucketOf[i] = bucket;
    counts[bucket]++;
  }
}
