/**
 * The form of a file of rules: one schema for validation and for the published JSON Schema.
 * `docs/gate.md` tells users what the keys mean. Only what reads rules imports this module.
 */
import { z } from 'zod';
import { STATISTICS, type Rule, type RuleSet } from './rules.ts';

const pair = (text: string) => z.tuple([z.number(), z.number()]).describe(text);

const windowObject = z
  .strictObject({
    from: z.number().optional().describe('from this time on'),
    to: z.number().optional().describe('up to this time'),
    lastSnapshots: z.int().min(1).optional().describe('so many snapshots at the end'),
    lastCrossingTimes: z.number().positive().optional().describe('so much of the end'),
  })
  .describe('a part of the series: from and to, or one of the other keys');

const statisticObject = z
  .strictObject({ fractionWithin: pair('lower and upper end') })
  .describe('the share of snapshots whose value lies between the two');

const ruleShape = {
  name: z.string().min(1).optional().describe('what people read; made from the rule if not given'),
  quantity: z.string().min(1).describe('a figure of the record or the verdict'),
  during: z
    .union([z.enum(['all', 'settled']), windowObject], {
      error: '"all", "settled", or an object with from and to, lastSnapshots or lastCrossingTimes',
    })
    .optional()
    .describe('which snapshots'),
  statistic: z
    .union([z.enum(STATISTICS), statisticObject], {
      error: `one of ${STATISTICS.join(', ')}, or an object with fractionWithin`,
    })
    .optional()
    .describe('what is made of their values; the last one if there is no during'),
  relativeTo: z
    .enum(['first'])
    .optional()
    .describe('takes (value − first)/|first| in place of each value'),
  between: pair('lower and upper bound').optional(),
  atLeast: z.number().optional().describe('lower bound'),
  atMost: z.number().optional().describe('upper bound'),
  near: z
    .strictObject({ value: z.number(), tolerance: z.number().min(0) })
    .optional()
    .describe('value ± tolerance'),
  withinErrors: z
    .strictObject({ value: z.number(), times: z.number().positive() })
    .optional()
    .describe('not further from value than so many times its own 1σ error'),
  oneOf: z
    .array(z.union([z.string(), z.boolean()], { error: 'a text, true or false' }))
    .min(1)
    .optional()
    .describe('for quantities that are words, or true or false'),
  sigmas: z
    .number()
    .min(0)
    .optional()
    .describe('half-length in σ of the error bar that is held against a bound (2)'),
  severity: z.enum(['fail', 'warn']).optional().describe('what a rule that fails does (fail)'),
  message: z.string().min(1).optional().describe('told if the rule does not pass'),
} satisfies Record<keyof Rule, z.ZodType>;

const setShape = {
  name: z.string().min(1).optional().describe('name of the set; the file’s name if not given'),
  description: z.string().optional().describe('what the set is for'),
  sigmas: z.number().min(0).optional().describe('default of the rules’ sigmas'),
  rules: z.array(z.strictObject(ruleShape)).min(1).describe('the rules, judged in this order'),
} satisfies Record<keyof RuleSet, z.ZodType>;

export const rulesSchema = z
  .strictObject({
    $schema: z.string().optional().describe('for editors; not used'),
    settlemark: z.literal('rules/1').optional().describe('kind and version of this file'),
    ...setShape,
  })
  .meta({
    title: 'Settlemark rules',
    description: 'What figures of a run must be: judged by settlemark gate.',
  });

/** Names of the keys that may stand at a path of the file, for messages about a misspelt one. */
export function keysAt(path: readonly PropertyKey[]): readonly string[] {
  const place = path.filter((step) => typeof step === 'string').join('.');
  const keys: Record<string, readonly string[]> = {
    '': ['settlemark', ...Object.keys(setShape)],
    rules: Object.keys(ruleShape),
    'rules.during': Object.keys(windowObject.shape),
    'rules.statistic': Object.keys(statisticObject.shape),
    'rules.near': ['value', 'tolerance'],
    'rules.withinErrors': ['value', 'times'],
  };
  return keys[place] ?? [];
}

/** JSON Schema (draft 2020-12) of rules, for editors and for `docs/rules.schema.json`. */
export function rulesJsonSchema(): Record<string, unknown> {
  return z.toJSONSchema(rulesSchema, { target: 'draft-2020-12', io: 'input' });
}
