/** What the virial theorem speaks of: energies averaged over time, not those of one moment. */
import type { MeasureRecord } from '../dynamics/record.ts';
import { UnanswerableError } from '../errors.ts';

export interface AveragedBalance {
  readonly records: number;
  /** First and last time [time]. */
  readonly from: number;
  readonly to: number;
  /** Time averages of T, U and W [mass · velocity²]. */
  readonly kinetic: number;
  readonly potential: number;
  readonly clausius: number;
  /** 2⟨T⟩/|⟨W⟩|. */
  readonly clausiusRatio: number;
  /**
   * What the ratio must be because the motion has not come full circle in the time averaged:
   * 1 + (İ₂ − İ₁)/(2 (t₂ − t₁) |⟨W⟩|).
   */
  readonly expectedRatio: number;
  /** Least and greatest 2T/|W| of a single record. */
  readonly smallest: number;
  readonly largest: number;
}

/**
 * Averages T, U and W over time by the trapezoidal rule.
 * @param records - of one isolated system, in any order, each with a time
 * @throws UnanswerableError `unanswerable.average` if fewer than two times are known or W averages 0
 * Source: the Lagrange–Jacobi identity ½ Ï = 2T + W, integrated over the time averaged.
 */
export function averageBalance(records: readonly MeasureRecord[]): AveragedBalance {
  const series = records
    .filter((record) => record.time !== null)
    .map((record) => ({ time: record.time ?? 0, record }))
    .sort((a, b) => a.time - b.time);
  const from = series.at(0)?.time ?? 0;
  const to = series.at(-1)?.time ?? 0;
  if (!(to > from)) {
    throw new UnanswerableError(
      'unanswerable.average',
      `a time average needs records of at least two times; found ${series.length} record(s) from time ${from} to ${to}`,
      'Measure more snapshots of the series, with their times.',
    );
  }
  const mean = (value: (record: MeasureRecord) => number): number => {
    let sum = 0;
    for (let i = 1; i < series.length; i++) {
      const [a, b] = [series[i - 1], series[i]];
      sum += 0.5 * (value(a.record) + value(b.record)) * (b.time - a.time);
    }
    return sum / (to - from);
  };
  const kinetic = mean((record) => record.whole.kinetic);
  const clausius = mean((record) => record.whole.clausius);
  if (clausius === 0) {
    throw new UnanswerableError(
      'unanswerable.average',
      'W is 0 at all times; a ratio needs bodies that attract each other',
      'Average a system of at least two bodies with mass.',
    );
  }
  const change =
    series[series.length - 1].record.momentOfInertiaRate - series[0].record.momentOfInertiaRate;
  const ratios = series.map(({ record }) => (2 * record.whole.kinetic) / -record.whole.clausius);
  return {
    records: series.length,
    from,
    to,
    kinetic,
    potential: mean((record) => record.whole.potential),
    clausius,
    clausiusRatio: (2 * kinetic) / Math.abs(clausius),
    expectedRatio: 1 + change / (2 * (to - from) * Math.abs(clausius)),
    smallest: Math.min(...ratios),
    largest: Math.max(...ratios),
  };
}
