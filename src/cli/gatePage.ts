/** What the gate found, as a page. */
import {
  gateState,
  gateSummary,
  type GateReportOptions,
  type GateResult,
  type RuleOutcome,
} from '../index.ts';
import { figure, wholeNumber } from './figure.ts';
import { printable, wrap } from './layout.ts';
import { asSentence, remarksText } from './remarks.ts';
import type { Paint } from './style.ts';

const WIDTH = 'cannot tell'.length;

export function gatePage(result: GateResult, options: GateReportOptions, paint: Paint): string {
  const state = gateState(result, options);
  const isQuiet = result.cannotTell + result.warns === 0;
  const { snapshots, verdict } = result;
  const facts = [
    `${wholeNumber(snapshots)} snapshot${snapshots === 1 ? '' : 's'}`,
    ...(verdict === null ? [] : [`verdict: ${verdict}`]),
  ];
  const sets = [...new Set(result.outcomes.map(({ set }) => set))];
  const lines = [
    paint[state === 'passed' ? (isQuiet ? 'good' : 'warn') : 'bad'](
      wrap(gateSummary(result, options)),
    ),
    `  ${facts.join('; ')}`,
    ...sets.flatMap((set) => [
      '',
      paint.strong(printable(set)),
      ...result.outcomes.filter((one) => one.set === set).map((one) => ruleLines(one, paint)),
    ]),
    ...(result.remarks.length > 0 ? ['', remarksText(result.remarks, paint)] : []),
  ];
  return `${lines.join('\n')}\n`;
}

function ruleLines(outcome: RuleOutcome, paint: Paint): string {
  const { name, subject, bound, reason, message } = outcome;
  const indent = ' '.repeat(WIDTH + 4);
  const [word, colour] = wordOf(outcome);
  const value = valueText(outcome);
  const first = wrap(value === '' ? name : `${name}: ${value}`, indent);
  const wanted = name === `${subject} ${bound}` ? [] : [`${subject} ${bound}`];
  const rest = outcome.outcome === 'passes' ? wanted : [...wanted, asSentence(reason)];
  const remedy = outcome.outcome === 'fails' && message !== null ? [message] : [];
  return [
    `  ${paint[colour](word.padEnd(WIDTH))}  ${first.slice(indent.length)}`,
    ...rest.map((text) => wrap(text, indent)),
    ...remedy.map((text) => wrap(asSentence(text), `${indent}  `, `${indent}→ `)),
  ].join('\n');
}

function wordOf({ outcome, severity }: RuleOutcome): readonly [string, keyof Paint] {
  if (outcome === 'passes') return ['passes', 'good'];
  if (outcome === 'cannotTell') return ['cannot tell', 'warn'];
  return severity === 'fail' ? ['fails', 'bad'] : ['warns', 'warn'];
}

function valueText({ value, error, snapshots, rule }: RuleOutcome): string {
  if (value === null) return '';
  const many = rule.during !== undefined && snapshots > 1 ? ` of ${wholeNumber(snapshots)}` : '';
  if (typeof value !== 'number') return `${String(value)}${many}`;
  return `${Number.isInteger(value) && error === null ? String(value) : figure(value, error)}${many}`;
}
