/**
 * Shared memory that is used again from one snapshot to the next.
 *
 * A fresh page costs more than the work on it, and the collector sees shared buffers late: a series
 * of large snapshots would pile them up. Inside {@link reusingMemory} big arrays come from a store and
 * go back to it at the end; outside they are allocated as usual. Nothing allocated inside may be used
 * after the end.
 */
import { AsyncLocalStorage } from 'node:async_hooks';

/** Smaller buffers are not worth keeping. */
const LEAST_BYTES = 65536;
/** A kept buffer serves if it is not larger than this times what is asked for. */
const MOST_SLACK = 1.25;

const scope = new AsyncLocalStorage<SharedArrayBuffer[]>();
let kept: SharedArrayBuffer[] = [];

/**
 * Runs `work` with reuse of big arrays. Scopes may run side by side: each gives back what it took.
 * Of the buffers kept, those that the scope did not take are dropped: the next snapshot is as a rule
 * like this one.
 */
export async function reusingMemory<T>(work: () => Promise<T>): Promise<T> {
  const taken: SharedArrayBuffer[] = [];
  try {
    return await scope.run(taken, work);
  } finally {
    kept = taken;
  }
}

/** A shared buffer of at least `bytes`; its contents are whatever they are. */
export function takeBuffer(bytes: number): SharedArrayBuffer {
  const taken = scope.getStore();
  if (taken === undefined || bytes < LEAST_BYTES) return new SharedArrayBuffer(bytes);
  let best = -1;
  for (let k = 0; k < kept.length; k++) {
    const size = kept[k].byteLength;
    if (size < bytes || size > MOST_SLACK * bytes) continue;
    if (best < 0 || size < kept[best].byteLength) best = k;
  }
  const buffer = best < 0 ? new SharedArrayBuffer(bytes) : kept[best];
  if (best >= 0) kept.splice(best, 1);
  taken.push(buffer);
  return buffer;
}

/** Room for `count` doubles in shared memory; every one must be written before it is read. */
export function takeDoubles(count: number): Float64Array<SharedArrayBuffer> {
  return new Float64Array(takeBuffer(count * 8), 0, count);
}

/** The same for unsigned 32-bit integers. */
export function takeUint32(count: number): Uint32Array<SharedArrayBuffer> {
  return new Uint32Array(takeBuffer(count * 4), 0, count);
}
