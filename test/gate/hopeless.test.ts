/** Which rules can no longer pass: only those that nothing still to come can mend. */
import { expect, it } from 'vitest';
import { hopelessRules } from '../../src/gate/hopeless.ts';
import { judgeRules } from '../../src/gate/judge.ts';
import type { Rule } from '../../src/gate/rules.ts';
import { madeRecord } from '../cli/made.ts';

const base = madeRecord();
const ratio = base.whole.virialRatio ?? NaN;
const records = Array.from({ length: 30 }, (_, k) => ({
  ...base,
  time: k,
  halfMassRadius: k === 12 ? 5 : 1,
}));
const hopeless = async (rule: Rule): Promise<boolean> => {
  const result = await judgeRules([{ name: 'test', rules: [rule] }], records);
  expect(result.fails + result.warns).toBe(1);
  return (await Promise.resolve(hopelessRules(result, records))).length > 0;
};
const radius = 'halfMassRadius';

it.each<[boolean, Rule]>([
  // Greatest and least values, and what holds of every snapshot, do not come back.
  [true, { quantity: radius, during: 'all', statistic: 'max', atMost: 2 }],
  [true, { quantity: radius, during: 'all', statistic: 'min', atLeast: 2 }],
  [true, { quantity: radius, during: 'all', statistic: 'every', atMost: 2 }],
  // A window that is over.
  [true, { quantity: radius, during: { from: 10, to: 14 }, statistic: 'max', atMost: 1.1 }],
  // What later snapshots can mend.
  [false, { quantity: radius, during: { from: 10, to: 40 }, statistic: 'last', atLeast: 1.1 }],
  [false, { quantity: radius, during: 'all', statistic: 'max', atLeast: 9 }],
  [false, { quantity: radius, during: { lastSnapshots: 20 }, statistic: 'max', atMost: 2 }],
  [false, { quantity: 'virialRatio', atLeast: ratio + 10 }],
  // What only warns never ends a run.
  [false, { quantity: radius, during: 'all', statistic: 'max', atMost: 2, severity: 'warn' }],
])('is %s of %j', async (expected, rule) => {
  expect(await hopeless(rule)).toBe(expected);
});
