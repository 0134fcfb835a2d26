/** Which snapshots of a series are wanted. */

export interface SeriesRange {
  /** First and last time that is wanted, both included [time]. */
  readonly from?: number;
  readonly to?: number;
  /** The first and from there every n-th snapshot, of those between `from` and `to`. */
  readonly every?: number;
}

export type RangeKey = keyof SeriesRange;

/** Checks a range. Errors are those that `refuse` throws. */
export function checkRange(
  { from, to, every }: SeriesRange,
  refuse: (key: RangeKey, text: string, remedy: string) => never,
): void {
  for (const [key, time] of [
    ['from', from],
    ['to', to],
  ] as const) {
    if (time !== undefined && !Number.isFinite(time)) {
      refuse(key, `found ${time}; expected a finite number`, 'Give a time.');
    }
  }
  if (from !== undefined && to !== undefined && from > to) {
    refuse(
      'to',
      `${to} is before ${from}, with which the range begins`,
      'Give the earlier time first.',
    );
  }
  if (every !== undefined && !(Number.isInteger(every) && every >= 1)) {
    refuse(
      'every',
      `found ${every}; expected a whole number of at least 1`,
      'Give 1 for all, 2 for every other.',
    );
  }
}
