/** A figure with its error against a bound. */
import { plain, withError } from './numbers.ts';
import { intervalOf, type Rule } from './rules.ts';
import { figureOf, type Figure, type Point } from './statistic.ts';

export interface Judgement {
  readonly outcome: 'passes' | 'fails' | 'cannotTell';
  readonly value: number | string | boolean | null;
  readonly error: number | null;
  readonly bar: readonly [number, number] | null;
  readonly reason: string;
}

/**
 * Holds a figure against the bound of a rule.
 * @param sigmas - half-length of the error bar in σ; of no account with `withinErrors`
 */
export function holdAgainst(rule: Rule, { value, error }: Figure, sigmas: number): Judgement {
  if (!Number.isFinite(value)) {
    return {
      outcome: 'cannotTell',
      value: null,
      error: null,
      bar: null,
      reason: 'the figure is beyond the range of numbers',
    };
  }
  if (rule.withinErrors !== undefined) return holdWithinErrors(rule.withinErrors, { value, error });
  const half = sigmas * (error ?? 0);
  return holdBar(rule, { value, error }, [value - half, value + half], (end) =>
    error === null || error === 0 || sigmas === 0
      ? `${plain(value)} is ${end}`
      : `${withError(value, error)} is ${end}${sigmas === 1 ? '' : `, with ± ${plain(sigmas)}σ`}`,
  );
}

function holdWithinErrors(
  { value: wanted, times }: NonNullable<Rule['withinErrors']>,
  { value, error }: Figure,
): Judgement {
  if (error === null || !(error > 0)) {
    return {
      outcome: 'cannotTell',
      value,
      error,
      bar: null,
      reason: 'no error of this figure is known, so nothing can be told in terms of it',
    };
  }
  const off = Math.abs(value - wanted) / error;
  const passes = off <= times;
  return {
    outcome: passes ? 'passes' : 'fails',
    value,
    error,
    bar: [value - times * error, value + times * error],
    reason: passes
      ? ''
      : `${withError(value, error)} is ${plain(off, 3)} errors off ${plain(wanted)}`,
  };
}

function holdBar(
  rule: Rule,
  { value, error }: Figure,
  bar: readonly [number, number],
  said: (end: string) => string,
): Judgement {
  const [low, high] = intervalOf(rule) as readonly [number, number];
  const shown = bar[0] === bar[1] ? null : bar;
  if (bar[0] >= low && bar[1] <= high)
    return { outcome: 'passes', value, error, bar: shown, reason: '' };
  if (bar[1] < low || bar[0] > high) {
    const end = bar[1] < low ? `below ${plain(low)}` : `above ${plain(high)}`;
    return { outcome: 'fails', value, error, bar: shown, reason: said(end) };
  }
  const straddled = bar[0] < low ? low : high;
  const never = bar[1] - bar[0] > high - low;
  const reason = `the error bar from ${plain(bar[0])} to ${plain(bar[1])} straddles the bound ${plain(straddled)}${never ? ' and is wider than the bounds are apart' : ''}`;
  return { outcome: 'cannotTell', value, error, bar: shown, reason };
}

/**
 * Holds the values in a window against a rule.
 * @param points - those that have a value, at least one
 * @param wanted - number of snapshots in the window
 */
export function holdSeries(
  rule: Rule,
  points: readonly Point[],
  wanted: number,
  crossingTime: number | null,
  sigmas: number,
): Judgement {
  const { statistic = 'last' } = rule;
  if (typeof statistic === 'object') {
    return holdFraction(rule, statistic.fractionWithin, points, wanted, sigmas);
  }
  if (statistic === 'every') return holdEvery(rule, points, wanted, sigmas);
  const figure = figureOf(statistic, points, crossingTime);
  if ('reason' in figure) {
    return { outcome: 'cannotTell', value: null, error: null, bar: null, reason: figure.reason };
  }
  const judgement = holdAgainst(rule, figure, sigmas);
  if (judgement.outcome === 'passes' && points.length < wanted && OF_ALL.includes(statistic)) {
    return { ...judgement, outcome: 'cannotTell', reason: missing(points.length, wanted) };
  }
  return judgement;
}

/** The greatest of values some of which are not known is not known to be within a bound. */
const OF_ALL: readonly string[] = ['min', 'max', 'largest'];

const missing = (known: number, wanted: number): string =>
  `${wanted - known} of ${wanted} snapshots in the window do not have this figure`;

function holdEvery(
  rule: Rule,
  points: readonly Point[],
  wanted: number,
  sigmas: number,
): Judgement {
  const held = points.map((point) => holdAgainst(rule, point, sigmas));
  const of = (outcome: Judgement['outcome']) => held.filter((one) => one.outcome === outcome);
  const some = (list: readonly Judgement[]) =>
    wanted === 1 ? '' : `in ${list.length} of ${wanted} snapshots, such as: `;
  const fails = of('fails');
  if (fails.length > 0) {
    const worst = fails.reduce((a, b) => (distance(rule, b) > distance(rule, a) ? b : a));
    return { ...worst, reason: some(fails) + worst.reason };
  }
  const open = of('cannotTell');
  if (open.length > 0) return { ...open[0], reason: some(open) + open[0].reason };
  if (points.length < wanted)
    return { ...held[0], outcome: 'cannotTell', reason: missing(points.length, wanted) };
  return held.reduce((a, b) => (distance(rule, b) > distance(rule, a) ? b : a));
}

/** How far out a value lies: beyond the nearer bound, or from the value in errors; for choosing the worst. */
function distance(rule: Rule, { value, error }: Judgement): number {
  if (typeof value !== 'number') return -Infinity;
  const { withinErrors } = rule;
  if (withinErrors !== undefined) return Math.abs(value - withinErrors.value) / (error ?? 1);
  const [low, high] = intervalOf(rule) as readonly [number, number];
  return Math.max(low - value, value - high);
}

/** The share of snapshots within bounds; a snapshot whose own error bar straddles one may be in or out. */
function holdFraction(
  rule: Rule,
  [low, high]: readonly [number, number],
  points: readonly Point[],
  wanted: number,
  sigmas: number,
): Judgement {
  const inside: Rule = { quantity: rule.quantity, between: [low, high] };
  const held = points.map((point) => holdAgainst(inside, point, sigmas).outcome);
  const share = (count: number) => count / wanted;
  const certain = held.filter((outcome) => outcome === 'passes').length;
  const out = held.filter((outcome) => outcome === 'fails').length;
  const value = share(points.filter((point) => point.value >= low && point.value <= high).length);
  const bar = [share(certain), share(wanted - out)] as const;
  return holdBar(rule, { value, error: null }, bar, (end) =>
    bar[0] === bar[1]
      ? `${plain(value)} is ${end}`
      : `${plain(value)}, and at ${end.startsWith('below') ? `most ${plain(bar[1])}` : `least ${plain(bar[0])}`}, is ${end}`,
  );
}
