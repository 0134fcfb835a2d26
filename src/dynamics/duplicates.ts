/** Ids that occur more than once, and bodies that lie at one point. */
import type { Softening } from '../octree/softening.ts';
import type { IdColumn, Particles } from '../snapshot/particles.ts';

export interface Duplicates {
  /** Bodies whose id an earlier one has already. */
  readonly count: number;
  readonly firstIndex: number;
  readonly firstId: string;
}

const NONE: Duplicates = { count: 0, firstIndex: -1, firstId: '' };

/** Looks for ids that occur more than once. */
export function duplicateIds(ids: IdColumn | undefined): Duplicates {
  if (!ids || ids.length < 2) return NONE;
  const sorted = ids.slice().sort();
  let count = 0;
  let first: number | bigint | null = null;
  for (let i = 1; i < sorted.length; i++) {
    if (sorted[i] !== sorted[i - 1]) continue;
    count++;
    first ??= sorted[i];
  }
  if (first === null) return NONE;
  const indexOf = (from: number) =>
    (ids.indexOf as (id: unknown, from: number) => number).call(ids, first, from);
  return { count, firstIndex: indexOf(indexOf(0) + 1), firstId: String(first) };
}

/**
 * The first few pairs of bodies at exactly one point without softening, as input indices, in order of
 * position; bodies that have a softening length of their own are in none.
 */
export function coincidentPairs(
  { x, y, z }: Pick<Particles, 'x' | 'y' | 'z'>,
  { lengths }: Softening,
  most: number,
): [number, number][] {
  // Sort by x alone with the native sort, then look closer only where neighbours in x are equal.
  const sorted = Float64Array.from(x).sort();
  const repeated = new Set<number>();
  for (let i = 1; i < sorted.length; i++) if (sorted[i] === sorted[i - 1]) repeated.add(sorted[i]);
  const seen = new Map<string, number>();
  const pairs: [number, number][] = [];
  for (let i = 0; i < x.length && pairs.length < most; i++) {
    if (!repeated.has(x[i]) || (lengths !== undefined && lengths[i] > 0)) continue;
    const place = `${x[i]} ${y[i]} ${z[i]}`;
    const other = seen.get(place);
    if (other !== undefined) pairs.push([other, i]);
    else seen.set(place, i);
  }
  return pairs;
}
