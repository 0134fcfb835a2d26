/** Means and trends of every scalar of the records over a part of a run. */
import type { MeasureRecord } from '../dynamics/record.ts';
import { QUANTITIES } from '../dynamics/registry.ts';
import { blockMeans, FEW, slopeOf } from './blocks.ts';
import { LIMITS } from './limits.ts';
import { meanOf } from './means.ts';

export interface ScalarMean {
  /** Its key in the record; of Lagrangian radii with the mass fraction, `lagrangian[0.5]`. */
  readonly quantity: string;
  readonly mean: number;
  /** 1σ of the mean with the memory of the series; null if the part is too short to tell. */
  readonly error: number | null;
  /** Change per crossing time by a straight line through block means, and its 1σ error. */
  readonly trend: number | null;
  readonly trendError: number | null;
}

const ERRORS = new Set(QUANTITIES.map(({ error }) => error).filter((key) => key !== null));
const SCALARS = QUANTITIES.filter(
  ({ key, kind }) => kind === 'number' && !ERRORS.has(key) && !key.startsWith('engine.'),
).map(({ key }) => key);
const RADII = ['lagrangian', 'boundLagrangian'] as const;

/**
 * Of every scalar that all records have. Errors are those of means of blocks of at least 1.5 crossing
 * times, which are nearly independent.
 * @param time - of the records [crossing times]
 */
export function scalarMeans(
  records: readonly MeasureRecord[],
  time: Float64Array,
): readonly ScalarMean[] {
  const length = time[time.length - 1] - time[0];
  if (records.length < 2 || !(length > 0)) return [];
  const blocks = Math.min(20, Math.floor(Math.min(length / LIMITS.block, records.length / 2)));
  return columnsOf(records).map(({ quantity, values }) => {
    const { mean, error } = meanOf(time, values);
    const line = blocks < FEW ? null : slopeOf(blockMeans(time, values, blocks));
    return {
      quantity,
      mean,
      error,
      trend: line?.slope ?? null,
      trendError: line?.error ?? null,
    };
  });
}

function columnsOf(records: readonly MeasureRecord[]) {
  const columns: { quantity: string; values: Float64Array }[] = [];
  const add = (quantity: string, of: (record: MeasureRecord) => unknown): void => {
    const values = new Float64Array(records.length);
    for (const [k, record] of records.entries()) {
      const value = of(record);
      if (typeof value !== 'number' || !Number.isFinite(value)) return;
      values[k] = value;
    }
    columns.push({ quantity, values });
  };
  for (const key of SCALARS) {
    const path = key.split('.');
    add(key, (record) => {
      let value: unknown = record;
      for (const part of path)
        value = (value as Record<string, unknown> | null | undefined)?.[part];
      return value;
    });
  }
  for (const set of RADII) {
    for (const fraction of records[0][set].fractions) {
      add(
        `${set}[${fraction}]`,
        ({ [set]: { fractions, radii } }) => radii[fractions.indexOf(fraction)],
      );
    }
  }
  return columns;
}
