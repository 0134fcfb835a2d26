/** A result in words. */
import type { GateReportOptions, GateResult, RuleOutcome } from './judge.ts';

/** What an outcome is called: a rule that only warns does not fail anything. */
export function outcomeWord({ outcome, severity }: RuleOutcome): string {
  if (outcome === 'passes') return 'passes';
  if (outcome === 'cannotTell') return 'cannot tell';
  return severity === 'fail' ? 'fails' : 'warns';
}

/** `not answered`: a verdict was asked for and could not be had, or snapshots could not be measured. */
export function stateOf(
  { gate, open, lacksVerdict }: GateResult,
  { strict = false, unreadable = [] }: GateReportOptions = {},
): 'passed' | 'failed' | 'not answered' {
  if (gate === 'failed' || (strict && open > 0)) return 'failed';
  return lacksVerdict || unreadable.length > 0 ? 'not answered' : 'passed';
}

/** One sentence on the whole: `failed: 1 of 5 rules fails (energy)`. */
export function summaryText(result: GateResult, options: GateReportOptions = {}): string {
  const { outcomes } = result;
  const all = `${outcomes.length} rule${outcomes.length === 1 ? '' : 's'}`;
  const named = (test: (outcome: RuleOutcome) => boolean) => {
    const names = outcomes.filter(test).map(({ name }) => name);
    return `${names.slice(0, 3).join(', ')}${names.length > 3 ? ', …' : ''}`;
  };
  const open = (one: RuleOutcome) => one.outcome === 'cannotTell';
  const parts = [
    ...(result.fails > 0
      ? [
          `${result.fails} of ${all} ${result.fails === 1 ? 'fails' : 'fail'} (${named((one) => one.outcome === 'fails' && one.severity === 'fail')})`,
        ]
      : []),
    ...(result.warns > 0
      ? [
          `${result.warns} ${result.warns === 1 ? 'warns' : 'warn'} (${named((one) => one.outcome === 'fails' && one.severity === 'warn')})`,
        ]
      : []),
    ...(result.cannotTell > 0 ? [`${result.cannotTell} cannot be told (${named(open)})`] : []),
  ];
  const unread = options.unreadable?.length ?? 0;
  if (unread > 0) parts.push(`${unread} of the snapshots could not be measured`);
  return `${stateOf(result, options)}: ${parts.length > 0 ? parts.join(', ') : outcomes.length === 1 ? 'its one rule' : `all ${all}`}`;
}

/** Why a rule does not pass; its own message is about failing. Empty if it passes. */
export function whyText({ outcome, reason, message }: RuleOutcome): string {
  if (outcome === 'passes') return '';
  return outcome === 'fails' && message !== null ? `${reason}; ${message}` : reason;
}
