/**
 * Rules + records → what passes, what fails, what cannot be told.
 *
 * A figure is held against a bound with its error bar: it passes if all of the bar lies inside, fails
 * if all of it lies outside, and else cannot be told. No data never pass.
 */
import type { MeasureRecord } from '../dynamics/record.ts';
import { UnanswerableError, UsageError } from '../errors.ts';
import { inOrderOfTime } from '../settling/series.ts';
import { verdictOf, type Verdict, type VerdictName } from '../settling/verdict.ts';
import type { Remark } from '../snapshot/particles.ts';
import { checkRule, type RuleErrorCode } from './checkRule.ts';
import type { Reading } from './derived.ts';
import { holdAgainst, holdSeries, type Judgement } from './hold.ts';
import { ONLY_IF_SETTLED, type GateQuantity } from './quantities.ts';
import { Readings } from './readings.ts';
import {
  boundText,
  DEFAULT_SIGMAS,
  ruleText,
  subjectText,
  type Rule,
  type RuleSet,
} from './rules.ts';
import { together, type Point } from './statistic.ts';
import { recordsIn } from './window.ts';

export type Outcome = 'passes' | 'fails' | 'cannotTell';

export interface RuleOutcome {
  /** Name of the rule's set. */
  readonly set: string;
  readonly name: string;
  /** What was looked at, and what it must be, in words. */
  readonly subject: string;
  readonly bound: string;
  readonly severity: 'fail' | 'warn';
  readonly outcome: Outcome;
  readonly value: number | string | boolean | null;
  /** 1σ; null if none is known or there is none. */
  readonly error: number | null;
  /** The error bar that was held against the bound; null if there is none. */
  readonly bar: readonly [number, number] | null;
  /** Snapshots in the window that have a value, and the times of the first and last of them. */
  readonly snapshots: number;
  readonly from: number | null;
  readonly to: number | null;
  /** Why, in one sentence; empty for what passes. */
  readonly reason: string;
  /** Of the rule; null if it has none. */
  readonly message: string | null;
  readonly rule: Rule;
}

export interface GateResult {
  /** `failed` if a rule of severity fail fails. */
  readonly gate: 'passed' | 'failed';
  /** Rules by outcome; of those that fail, how many only warn. */
  readonly passes: number;
  readonly fails: number;
  readonly warns: number;
  readonly cannotTell: number;
  /** Rules of severity fail that cannot be told: with them a strict gate does not pass. */
  readonly open: number;
  /** The verdict on the run, or null if the series is too short for one. */
  readonly verdict: VerdictName | null;
  /** True if a rule asked for a verdict that could not be had. */
  readonly lacksVerdict: boolean;
  readonly snapshots: number;
  readonly outcomes: readonly RuleOutcome[];
  readonly remarks: readonly Remark[];
}

/** What reports say besides the result. */
export interface GateReportOptions {
  /** When the rules were judged; now if not given. */
  readonly at?: Date;
  /** Snapshots that could not be measured, with the reason. */
  readonly unreadable?: readonly { readonly file: string; readonly reason: string }[];
  /** Whether what cannot be told is a failure. */
  readonly strict?: boolean;
}

/**
 * Judges records by rules.
 * @param records - of one run, in any order; of several at one time the last is kept, unless all are of one time
 * @throws UnanswerableError `unanswerable.emptySeries` without records; UsageError for rules that are none
 */
export async function judgeRules(
  rules: RuleSet | readonly RuleSet[],
  records: readonly MeasureRecord[],
): Promise<GateResult> {
  if (records.length === 0) {
    throw new UnanswerableError(
      'unanswerable.emptySeries',
      'there is no snapshot to judge; an empty series never passes',
      'Give snapshots or records of the run.',
    );
  }
  const { ordered, remarks } = asSeries(records);
  const verdict = verdictIfAny(ordered);
  const readings = await Readings.of(ordered, verdict);
  const outcomes: RuleOutcome[] = [];
  let lacksVerdict = false;
  for (const set of 'rules' in rules ? [rules] : rules) {
    for (const rule of set.rules) {
      const quantity = await checkRule(rule, refuse);
      lacksVerdict ||= verdict === null && (quantity.of === 'run' || rule.during === 'settled');
      outcomes.push(judgeOne(rule, quantity, set, readings));
    }
  }
  const count = (test: (outcome: RuleOutcome) => boolean) => outcomes.filter(test).length;
  const fails = count(({ outcome, severity }) => outcome === 'fails' && severity === 'fail');
  return {
    gate: fails > 0 ? 'failed' : 'passed',
    passes: count(({ outcome }) => outcome === 'passes'),
    fails,
    warns: count(({ outcome, severity }) => outcome === 'fails' && severity === 'warn'),
    cannotTell: count(({ outcome }) => outcome === 'cannotTell'),
    open: count(({ outcome, severity }) => outcome === 'cannotTell' && severity === 'fail'),
    verdict: verdict?.verdict ?? null,
    lacksVerdict,
    snapshots: ordered.length,
    outcomes,
    remarks: [...remarks, ...(verdict?.remarks.filter(({ code }) => !TOLD.includes(code)) ?? [])],
  };
}

/** Remarks on the order of records, which are told once. */
const TOLD: readonly string[] = ['timeUnknown', 'timeRepeated'];

function refuse(key: string | null, code: RuleErrorCode, problem: string, remedy: string): never {
  throw new UsageError(code, `rule${key === null ? '' : `, ${key}`}: ${problem}`, remedy);
}

/** Snapshots without times, or all of one time, are no series: then all are kept, as they were given. */
function asSeries(records: readonly MeasureRecord[]): {
  readonly ordered: readonly MeasureRecord[];
  readonly remarks: readonly Remark[];
} {
  const times = new Set(records.map(({ time }) => time));
  return times.size === 1 ? { ordered: records, remarks: [] } : inOrderOfTime(records);
}

function verdictIfAny(records: readonly MeasureRecord[]): Verdict | null {
  try {
    return verdictOf(records);
  } catch (error) {
    if (error instanceof UnanswerableError) return null;
    throw error;
  }
}

function judgeOne(
  rule: Rule,
  quantity: GateQuantity,
  set: RuleSet,
  readings: Readings,
): RuleOutcome {
  const sigmas = rule.sigmas ?? set.sigmas ?? DEFAULT_SIGMAS;
  const judgement =
    quantity.of === 'run'
      ? judgeRun(rule, quantity, readings, sigmas)
      : judgeSnapshots(rule, quantity, readings, sigmas);
  return {
    set: set.name,
    name: rule.name ?? ruleText(rule),
    subject: subjectText(rule),
    bound: boundText(rule),
    severity: rule.severity ?? 'fail',
    from: null,
    to: null,
    snapshots: 0,
    ...judgement,
    message: rule.message ?? null,
    rule,
  };
}

const NONE = { value: null, error: null, bar: null } as const;

const cannotTell = (reason: string): Judgement => ({ outcome: 'cannotTell', ...NONE, reason });

function judgeRun(
  rule: Rule,
  quantity: GateQuantity,
  readings: Readings,
  sigmas: number,
): Judgement & Partial<RuleOutcome> {
  const { verdict, records } = readings;
  if (verdict === null) {
    return cannotTell(
      'a verdict needs at least two snapshots with different times, ratios and radii',
    );
  }
  const series = { snapshots: verdict.snapshots, ...endsOf(records.map(({ time }) => time)) };
  const reading = readings.ofRun(quantity);
  const undecided = verdict.verdict === 'undecided';
  if (reading.value === null && ONLY_IF_SETTLED.includes(quantity.name) && !undecided) {
    const reason = `the run has not settled: the verdict is ${verdict.verdict}`;
    return { outcome: 'fails', ...NONE, reason, ...series };
  }
  if (reading.value === null) {
    const why = undecided ? evidenceOf(verdict) : whyNull(quantity.name);
    return { ...cannotTell(why), ...series };
  }
  if (quantity.name === 'verdict' && undecided && !rule.oneOf?.includes('undecided')) {
    return { ...cannotTell(evidenceOf(verdict)), value: 'undecided', ...series };
  }
  return { ...holdOne(rule, reading, sigmas), ...series };
}

const evidenceOf = ({ evidence }: Verdict): string =>
  `the verdict is undecided: ${evidence.map(({ text }) => text).join('; ')}`;

function whyNull(name: string): string {
  return name.startsWith('verdict.audit.energy')
    ? 'the energy is not judged: the softening of the run is not stated (--softening, 0 for none)'
    : 'there is no such figure of this run';
}

function holdOne(rule: Rule, { value, error }: Reading, sigmas: number): Judgement {
  if (typeof value === 'number') return holdAgainst(rule, { value, error }, sigmas);
  const allowed = rule.oneOf?.some((one) => one === value) === true;
  return {
    outcome: allowed ? 'passes' : 'fails',
    value,
    error: null,
    bar: null,
    reason: allowed ? '' : `it is ${String(value)}`,
  };
}

function judgeSnapshots(
  rule: Rule,
  quantity: GateQuantity,
  readings: Readings,
  sigmas: number,
): Judgement & Partial<RuleOutcome> {
  const { records, verdict } = readings;
  const crossingTime =
    verdict?.crossingTime ??
    records.find((record) => record.crossingTime !== null)?.crossingTime ??
    null;
  const chosen = recordsIn(rule.during ?? 'all', records, verdict, crossingTime);
  if ('reason' in chosen) return cannotTell(`the window is empty: ${chosen.reason}`);
  if (chosen.length === 0) return cannotTell('the window is empty: no snapshot lies in it');
  const all = chosen.map((k) => ({
    k,
    time: records[k].time,
    ...readings.ofSnapshot(quantity, k),
  }));
  const known = all.filter(({ value }) => value !== null);
  const part = { snapshots: known.length, ...endsOf(known.map(({ time }) => time)) };
  if (known.length === 0) {
    const remedy = quantity.extra === null ? '' : `; measure with --with ${quantity.extra}`;
    const fraction =
      quantity.fraction === null ? '' : `; measure with --fractions ${quantity.fraction}`;
    return cannotTell(`no snapshot in the window has this figure${remedy}${fraction}`);
  }
  const { statistic = quantity.type === 'number' ? 'last' : 'every' } = rule;
  const edge = statistic === 'first' ? all[0] : statistic === 'last' ? all[all.length - 1] : null;
  if (edge?.value === null) {
    return {
      ...cannotTell(`the ${statistic as string} snapshot in the window does not have it`),
      ...part,
    };
  }
  if (quantity.type !== 'number') {
    return {
      ...judgeWords(
        rule,
        known.map(({ value }) => value),
        all.length,
      ),
      ...part,
    };
  }
  const points = known.map(({ time, value, error }) => ({ time, value: value as number, error }));
  const relative =
    rule.relativeTo === undefined ? points : relativeToFirst(points, quantity, readings);
  if ('reason' in relative) return { ...cannotTell(relative.reason), ...part };
  return { ...holdSeries(rule, relative, all.length, crossingTime, sigmas), ...part };
}

function judgeWords(rule: Rule, values: readonly Reading['value'][], wanted: number): Judgement {
  const { statistic } = rule;
  if (statistic === 'first') return holdOne(rule, { value: values[0], error: null }, 0);
  if (statistic === 'last')
    return holdOne(rule, { value: values[values.length - 1], error: null }, 0);
  const wrong = values.filter((value) => !rule.oneOf?.some((one) => one === value));
  if (wrong.length > 0) {
    const reason = `it is ${String(wrong[0])} in ${wrong.length} of ${wanted} snapshots`;
    return { outcome: 'fails', value: wrong[0], error: null, bar: null, reason };
  }
  if (values.length < wanted) {
    return cannotTell(
      `${wanted - values.length} of ${wanted} snapshots in the window do not have it`,
    );
  }
  return { outcome: 'passes', value: values[0], error: null, bar: null, reason: '' };
}

/** (value − first)/|first| with the first snapshot of the series that has the figure. */
function relativeToFirst(
  points: readonly Point[],
  quantity: GateQuantity,
  readings: Readings,
): readonly Point[] | { readonly reason: string } {
  let first: Reading = { value: null, error: null };
  for (let k = 0; k < readings.records.length && first.value === null; k++) {
    first = readings.ofSnapshot(quantity, k);
  }
  const { value: start, error: startError } = first;
  if (typeof start !== 'number' || start === 0) {
    return { reason: 'the first value is 0: nothing is relative to it' };
  }
  const scale = Math.abs(start);
  return points.map(({ time, value, error }) => {
    const both = together(error, startError);
    return { time, value: (value - start) / scale, error: both === null ? null : both / scale };
  });
}

function endsOf(times: readonly (number | null)[]): Pick<RuleOutcome, 'from' | 'to'> {
  const known = times.filter((time) => time !== null);
  return { from: known[0] ?? null, to: known.at(-1) ?? null };
}
