import type * as Library from '../../src/index.ts';

export interface Kind {
  readonly allowed: readonly string[];
  readonly counts: readonly number[];
}

export const KINDS: Readonly<Record<string, Kind>>;

type Tools = Pick<typeof Library, 'makeSnapshot' | 'leapfrog' | 'measureSnapshot'>;

/** The records of a run of the bank, and the places after which it was disturbed. */
export function recordsOf(
  library: Tools,
  kind: string,
  which: { readonly count: number; readonly seed: number },
  crew: Library.Crew,
): Promise<{ records: Library.MeasureRecord[]; disturbed: number[] }>;
