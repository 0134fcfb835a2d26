/** Rules: what figures of a run must be. Plain data, as they stand in a file; `docs/gate.md` explains every key. */

/** Which snapshots a rule speaks of; times are those of the snapshots, both ends included. */
export type Window =
  | 'all'
  /** From the time at which the verdict has the run settled. */
  | 'settled'
  | { readonly from?: number; readonly to?: number }
  | { readonly lastSnapshots: number }
  | { readonly lastCrossingTimes: number };

export const STATISTICS = [
  'first',
  'last',
  'mean',
  'min',
  'max',
  'largest',
  'rms',
  'scatter',
  'change',
  'driftPerCrossingTime',
  'every',
] as const;
export type StatisticName = (typeof STATISTICS)[number];

/** What is made of the values in the window. */
export type Statistic = StatisticName | { readonly fractionWithin: readonly [number, number] };

export type Severity = 'fail' | 'warn';

export interface Rule {
  /** For people; made from the rule if not given. */
  readonly name?: string;
  /** Name of a figure of the record or the verdict; see {@link resolveQuantity}. */
  readonly quantity: string;
  readonly during?: Window;
  readonly statistic?: Statistic;
  /** Each value becomes (value − first) / |first|, with the first snapshot of the series. */
  readonly relativeTo?: 'first';
  readonly between?: readonly [number, number];
  readonly atLeast?: number;
  readonly atMost?: number;
  readonly near?: { readonly value: number; readonly tolerance: number };
  /** Not further from `value` than so many times its own 1σ error. */
  readonly withinErrors?: { readonly value: number; readonly times: number };
  readonly oneOf?: readonly (string | boolean)[];
  /** Half-length of the error bar in σ that is held against a bound. */
  readonly sigmas?: number;
  readonly severity?: Severity;
  /** Told if the rule does not pass. */
  readonly message?: string;
}

export interface RuleSet {
  readonly name: string;
  readonly description?: string;
  /** Default of the rules' `sigmas`. */
  readonly sigmas?: number;
  readonly rules: readonly Rule[];
}

/** Error bars are ± 2σ unless a rule says otherwise: a value at a bound then seldom fails by chance. */
export const DEFAULT_SIGMAS = 2;

export const BOUNDS = ['between', 'atLeast', 'atMost', 'near', 'withinErrors', 'oneOf'] as const;

/** The interval that a rule's figure must lie in; infinite where it is open. Null for `withinErrors` and `oneOf`. */
export function intervalOf({
  between,
  atLeast,
  atMost,
  near,
}: Rule): readonly [number, number] | null {
  if (between !== undefined) return between;
  if (near !== undefined) return [near.value - near.tolerance, near.value + near.tolerance];
  if (atLeast === undefined && atMost === undefined) return null;
  return [atLeast ?? -Infinity, atMost ?? Infinity];
}

/** What a rule says, in words: `mean of virialRatio over the last 3 crossing times between 0.95 and 1.05`. */
export function ruleText(rule: Rule): string {
  return [subjectText(rule), boundText(rule)].join(' ');
}

/** What a rule speaks of, in words. */
export function subjectText({ quantity, statistic, during, relativeTo }: Rule): string {
  const what = relativeTo === undefined ? quantity : `${quantity} relative to the first snapshot`;
  const of = statistic === undefined ? what : statisticText(statistic, what);
  return during === undefined ? of : `${of} ${windowText(during)}`;
}

function statisticText(statistic: Statistic, what: string): string {
  if (typeof statistic === 'object') {
    const [low, high] = statistic.fractionWithin;
    return `fraction of snapshots with ${what} between ${low} and ${high}`;
  }
  const words: Record<StatisticName, string> = {
    first: `first ${what}`,
    last: `last ${what}`,
    mean: `mean of ${what}`,
    min: `least ${what}`,
    max: `greatest ${what}`,
    largest: `largest |${what}|`,
    rms: `rms of ${what}`,
    scatter: `scatter of ${what}`,
    change: `change of ${what}`,
    driftPerCrossingTime: `drift of ${what} a crossing time`,
    every: `${what} of every snapshot`,
  };
  return words[statistic];
}

function windowText(window: Window): string {
  if (window === 'all') return 'over all snapshots';
  if (window === 'settled') return 'after settling';
  if ('lastSnapshots' in window) {
    return window.lastSnapshots === 1
      ? 'in the last snapshot'
      : `over the last ${window.lastSnapshots} snapshots`;
  }
  if ('lastCrossingTimes' in window) {
    return window.lastCrossingTimes === 1
      ? 'over the last crossing time'
      : `over the last ${window.lastCrossingTimes} crossing times`;
  }
  const { from, to } = window;
  if (from === undefined) return `up to time ${to}`;
  return to === undefined ? `from time ${from}` : `from time ${from} to ${to}`;
}

/** What a rule wants, in words. */
export function boundText(rule: Rule): string {
  const { between, atLeast, atMost, near, withinErrors, oneOf } = rule;
  if (between !== undefined) return `between ${between[0]} and ${between[1]}`;
  if (near !== undefined) return `within ${near.tolerance} of ${near.value}`;
  if (withinErrors !== undefined) {
    return `within ${withinErrors.times} of its own errors of ${withinErrors.value}`;
  }
  if (oneOf !== undefined)
    return oneOf.length === 1 ? String(oneOf[0]) : `one of ${oneOf.join(', ')}`;
  return [
    ...(atLeast === undefined ? [] : [`at least ${atLeast}`]),
    ...(atMost === undefined ? [] : [`at most ${atMost}`]),
  ].join(' and ');
}
