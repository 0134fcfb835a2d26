/** Which rules a run can no longer pass, whatever is still to come. */
import type { MeasureRecord } from '../dynamics/record.ts';
import type { GateResult, RuleOutcome } from './judge.ts';
import { intervalOf, type Rule, type Window } from './rules.ts';

/**
 * The rules of severity `fail` that fail now and will fail for ever: what they look at lies in the past,
 * or only grows away from the bound.
 * @param records - those that were judged
 */
export function hopelessRules(
  { outcomes }: GateResult,
  records: readonly MeasureRecord[],
): readonly RuleOutcome[] {
  const now = Math.max(...records.map(({ time }) => time ?? -Infinity));
  return outcomes.filter(
    (outcome) =>
      outcome.severity === 'fail' && outcome.outcome === 'fails' && isFinal(outcome, now),
  );
}

/** Figures of the verdict that are greatest values so far: they never fall again. */
const ONLY_GROWS =
  /^verdict\.audit\.(energy|momentum|centre|angularMomentum)Drift$|^audit\.\w+Drift$/;
/** Facts of the verdict that are lost for ever once they are. */
const LOST_FOR_EVER = /(^|\.)audit\.(massKept|particlesKept)$/;

function isFinal({ rule, value, bar }: RuleOutcome, now: number): boolean {
  const { quantity, statistic, during } = rule;
  const isAbove = isBeyond(rule, value, bar, 'above');
  if (ONLY_GROWS.test(quantity)) return isAbove;
  if (LOST_FOR_EVER.test(quantity)) return value === false;
  if (quantity === 'verdict') return value === 'broken';
  if (statistic === 'first') return true;
  if (during !== undefined && isOver(during, now)) return true;
  if (!keepsItsSnapshots(during)) return false;
  if (statistic === 'every') return true;
  if (statistic === 'max' || statistic === 'largest') return isAbove;
  return statistic === 'min' && isBeyond(rule, value, bar, 'below');
}

/** A window that ended in the past. */
const isOver = (window: Window, now: number): boolean =>
  typeof window === 'object' && 'to' in window && window.to !== undefined && window.to < now;

/** Whether a snapshot that is in the window now stays in it. */
const keepsItsSnapshots = (window: Window | undefined): boolean =>
  window === 'all' ||
  (typeof window === 'object' && !('lastSnapshots' in window) && !('lastCrossingTimes' in window));

function isBeyond(
  rule: Rule,
  value: RuleOutcome['value'],
  bar: RuleOutcome['bar'],
  side: 'above' | 'below',
): boolean {
  const interval = intervalOf(rule);
  if (typeof value !== 'number' || interval === null) return false;
  const [low, high] = bar ?? [value, value];
  return side === 'above' ? low > interval[1] : high < interval[0];
}
