/** One line a snapshot of a run that is being watched. */
import type { Forecast, MeasureRecord, Verdict } from '../index.ts';
import { figure, short } from './figure.ts';
import type { RunSoFar } from './watch.ts';

/** `time 3.2  2T/|U| 1.02 ± 0.02  r_h 0.77  undecided: …`. */
export function watchLine(record: MeasureRecord, { verdict, forecast }: RunSoFar): string {
  const set = verdict?.ratio.set ?? 'whole';
  const kind = verdict?.ratio.kind ?? kindOf(record);
  const ratio = (record[set] ?? record.whole)[kind];
  const parts = [
    record.time === null ? record.file : `time ${short(record.time, 6)}`,
    `${kind === 'virialRatio' ? '2T/|U|' : '2T/|W|'} ${figure(ratio, (record[set] ?? record.whole).noise)}`,
    `r_h ${short(record.halfMassRadius, 4)}`,
    ...(verdict === null ? [] : [verdictWords(verdict, forecast)]),
  ];
  return parts.join('  ');
}

/** The verdict in a few words, with what is expected if it is still open. */
export function verdictWords(verdict: Verdict, forecast: Forecast | null): string {
  const { evidence, settledAt, settledAtError, verdict: name } = verdict;
  if (settledAt !== null) return `${name} since ${figure(settledAt, settledAtError)}`;
  const ahead = forecast === null ? '' : `; ${forecastWords(forecast)}`;
  const why = evidence.at(-1)?.text;
  return `${name}${why === undefined ? '' : `: ${why}`}${ahead}`;
}

export function forecastWords({ settledAt, error, toldAt }: Forecast): string {
  return `settling expected at ${figure(settledAt, error)}, told from ${short(toldAt, 3)} on`;
}

/** The ratio that is 1 in equilibrium: of softened bodies the one with their own forces. */
export function kindOf({ settings }: MeasureRecord): 'virialRatio' | 'clausiusRatio' {
  return settings.softening.value.kernel === 'none' ? 'virialRatio' : 'clausiusRatio';
}
