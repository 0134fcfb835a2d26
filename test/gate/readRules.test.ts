/** Files of rules: what is taken, and where each error is said to be. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { Ajv2020 } from 'ajv/dist/2020.js';
import { parse } from 'yaml';
import { afterAll, describe, expect, it } from 'vitest';
import { UsageError } from '../../src/errors.ts';
import { BUILT_IN_RULES } from '../../src/gate/builtIn.ts';
import { quantityNames, resolveQuantity } from '../../src/gate/quantities.ts';
import { parseRules, readRules } from '../../src/gate/readRules.ts';
import { rulesJsonSchema, rulesSchema } from '../../src/gate/rulesSchema.ts';

const folder = mkdtempSync(join(tmpdir(), 'settlemark-rules-'));
afterAll(() => rmSync(folder, { recursive: true }));

async function refused(text: string, name = 'r.yaml'): Promise<string[]> {
  try {
    await parseRules(text, name);
  } catch (error) {
    expect(error).toBeInstanceOf(UsageError);
    const { code, message, remedy } = error as UsageError;
    return [code.replace('usage.', ''), message, remedy ?? ''];
  }
  throw new Error(`taken: ${text}`);
}

const rule = (...lines: string[]) => `rules:\n  - ${lines.join('\n    ')}\n`;

describe('rules', () => {
  it('are the same in JSON and YAML', async () => {
    const json = `{
      "settlemark": "rules/1",
      "rules": [{ "quantity": "virialRatio", "between": [0.95, 1.05],
        "during": { "lastCrossingTimes": 3 }, "statistic": "mean", "severity": "warn" }]
    }`;
    const yaml = rule(
      'quantity: virialRatio',
      'between: [0.95, 1.05]',
      'during: { lastCrossingTimes: 3 }',
      'statistic: mean # of them all',
      'severity: warn',
    );
    const [a, b] = [await parseRules(json, 'x/r.json'), await parseRules(yaml, 'x/r.yaml')];
    expect(a).toEqual(b);
    expect(a).toMatchObject({ name: 'r', rules: [{ quantity: 'virialRatio', statistic: 'mean' }] });
  });

  it.each(Object.keys(BUILT_IN_RULES))(
    'of the built-in set %s hold, as a file too',
    async (name) => {
      const set = await readRules(name);
      expect(set.name).toBe(name);
      expect(set.description).not.toBe('');
      const path = join(folder, `${name}.yaml`);
      writeFileSync(path, BUILT_IN_RULES[name]);
      expect(await readRules(path)).toEqual(set);
    },
  );

  it('that pass the published schema pass ours, and the other way round', () => {
    const ajv = new Ajv2020({ strict: true, strictTuples: false, allowUnionTypes: true }).compile(
      rulesJsonSchema(),
    );
    const texts = [
      ...Object.values(BUILT_IN_RULES),
      rule('quantity: x', 'atMos: 1'),
      rule('quantity: x', 'between: [1]'),
      rule('quantity: x', 'during: {lastSnapshots: 0}'),
      rule('quantity: x', 'statistic: {fractionWithin: [0, 1]}', 'atLeast: 0.9'),
      'rules: []',
      '{}',
    ];
    const both = texts.map((text) => {
      const value: unknown = parse(text);
      return [ajv(value), rulesSchema.safeParse(value).success];
    });
    for (const [a, b] of both) expect(a).toBe(b);
    expect(both.map(([a]) => a)).toEqual([
      true,
      true,
      true,
      true,
      false,
      false,
      false,
      true,
      false,
      false,
    ]);
  });
});

describe('a file of rules that is wrong is refused with its place:', () => {
  it.each<[string, string, string, string, RegExp, RegExp]>([
    [
      'broken YAML',
      'r.yaml',
      'rules:\n  - quantity: "x\n',
      'rulesNotYaml',
      /line 3, column 1/,
      /quotes/,
    ],
    [
      'tabs',
      'r.yaml',
      'rules:\n\t- quantity: x\n',
      'rulesNotYaml',
      /line 2, column 1/,
      /indentation/,
    ],
    [
      'broken JSON',
      'r.json',
      '{"rules": [\n{"quantity": "x",}]}',
      'rulesNotYaml',
      /line 2, column 18: expected JSON, found "}"/,
      /comma/,
    ],
    [
      'YAML in .json',
      'r.json',
      'rules: []',
      'rulesNotYaml',
      /line 1, column 1/,
      /name the file .yaml/,
    ],
    ['two documents', 'r.yaml', 'a: 1\n---\nb: 1\n', 'rulesNotYaml', /line 2/, /./],
    [
      'nothing',
      'r.yaml',
      '# only a comment\n',
      'rulesInvalid',
      /found null; expected an object/,
      /docs\/gate\.md/,
    ],
    [
      'no rules',
      'r.yaml',
      'rules: []\n',
      'rulesInvalid',
      /line 1, column 8: rules: found \[\]; expected at least one item/,
      /./,
    ],
    [
      'an unknown key of the file',
      'r.yaml',
      'ruls: []\n',
      'rulesUnknownKey',
      /line 1, column 1: found the unknown key "ruls"/,
      /"rules"/,
    ],
    [
      'an unknown key of a rule',
      'r.yaml',
      rule('quantity: verdict', 'onof: [settled]'),
      'rulesUnknownKey',
      /line 3, column 5: rules\[0\]: found the unknown key "onof"/,
      /"oneOf"/,
    ],
    [
      'an unknown key of a window',
      'r.yaml',
      rule('quantity: virialRatio', 'during: { lastSnapshot: 3 }'),
      'rulesUnknownKey',
      /line 3, column 15: rules\[0\]\.during: found the unknown key "lastSnapshot"/,
      /"lastSnapshots"/,
    ],
    [
      'an unknown window',
      'r.yaml',
      rule('quantity: virialRatio', 'during: setled'),
      'rulesInvalid',
      /line 3, column 13: rules\[0\]\.during: found "setled"/,
      /"settled"/,
    ],
    [
      'an unknown statistic',
      'r.yaml',
      rule('quantity: virialRatio', 'atMost: 1', 'statistic: man'),
      'rulesInvalid',
      /line 4, column 16: .*"mean" or/,
      /"mean"/,
    ],
    [
      'a key twice',
      'r.yaml',
      rule('quantity: virialRatio', 'atMost: 1', 'atMost: 2'),
      'rulesInvalid',
      /line 4, column 5: atMost stands there twice/,
      /Remove/,
    ],
    [
      'a key twice in JSON',
      'r.json',
      '{"rules": [{"quantity": "x", "quantity": "y"}]}',
      'rulesInvalid',
      /line 1, column 30: "quantity" stands there twice/,
      /Remove/,
    ],
    [
      'an unknown quantity',
      'r.yaml',
      rule('quantity: virialRato', 'atMost: 1'),
      'rulesUnknownQuantity',
      /line 2, column 5: rules\[0\]\.quantity: unknown quantity "virialRato"/,
      /"virialRatio"/,
    ],
    [
      'an unknown figure of the verdict',
      'r.yaml',
      rule('quantity: audit.energyDrif', 'atMost: 1'),
      'rulesUnknownQuantity',
      /unknown quantity/,
      /"audit.energyDrift"/,
    ],
    [
      'a list',
      'r.yaml',
      rule('quantity: lagrangian', 'atMost: 1'),
      'rulesUnknownQuantity',
      /is a list/,
      /"lagrangian\[0\.5\]"/,
    ],
    [
      'a fraction that is none',
      'r.yaml',
      rule('quantity: lagrangian[50]', 'atMost: 1'),
      'rulesUnknownQuantity',
      /mass fraction between 0 and 1/,
      /lagrangian\[0\.5\]/,
    ],
    [
      'a vector',
      'r.yaml',
      rule('quantity: frame.centre', 'atMost: 1'),
      'rulesUnknownQuantity',
      /is a vector/,
      /"frame\.centre\.x"/,
    ],
    [
      'an unknown remark',
      'r.yaml',
      rule('quantity: remarks[duplicateId]', 'oneOf: [false]'),
      'rulesUnknownQuantity',
      /unknown remark/,
      /"remarks\[duplicateIds\]"/,
    ],
    [
      'bounds the wrong way round',
      'r.yaml',
      rule('quantity: virialRatio', 'between: [1.05, 0.95]'),
      'rulesInvalid',
      /line 3, column 5: rules\[0\]\.between: the bounds contradict each other/,
      /smaller/,
    ],
    [
      'bounds that leave nothing',
      'r.yaml',
      rule('quantity: virialRatio', 'atLeast: 2', 'atMost: 1'),
      'rulesInvalid',
      /contradict/,
      /./,
    ],
    [
      'a fraction above 1',
      'r.yaml',
      rule(
        'quantity: virialRatio',
        'during: all',
        'statistic: { fractionWithin: [0, 2] }',
        'atLeast: 95',
      ),
      'rulesInvalid',
      /between 0 and 1/,
      /0\.9/,
    ],
    [
      'two bounds',
      'r.yaml',
      rule('quantity: virialRatio', 'between: [0, 1]', 'atMost: 1'),
      'rulesInvalid',
      /line 4, column 5: rules\[0\]\.atMost: found between and atMost/,
      /each/,
    ],
    ['no bound', 'r.yaml', rule('quantity: virialRatio'), 'rulesInvalid', /found no bound/, /./],
    [
      'a tolerance below 0',
      'r.yaml',
      rule('quantity: virialRatio', 'near: { value: 1, tolerance: -1 }'),
      'rulesInvalid',
      /tolerance: found -1; expected at least 0/,
      /./,
    ],
    [
      'one number for between',
      'r.yaml',
      rule('quantity: virialRatio', 'between: [1]'),
      'rulesInvalid',
      /expected two numbers/,
      /./,
    ],
    [
      'infinity',
      'r.yaml',
      rule('quantity: virialRatio', 'atMost: .inf'),
      'rulesInvalid',
      /atMost/,
      /./,
    ],
    [
      'words for a number',
      'r.yaml',
      rule('quantity: virialRatio', 'oneOf: [good]'),
      'rulesInvalid',
      /is a number/,
      /./,
    ],
    [
      'a number for a word',
      'r.yaml',
      rule('quantity: verdict', 'atMost: 1'),
      'rulesInvalid',
      /is a word; expected oneOf/,
      /./,
    ],
    [
      'a verdict that is none',
      'r.yaml',
      rule('quantity: verdict', 'oneOf: [setled]'),
      'rulesInvalid',
      /is never "setled"/,
      /"settled"/,
    ],
    [
      'a word for true or false',
      'r.yaml',
      rule('quantity: audit.massKept', 'oneOf: ["yes"]'),
      'rulesInvalid',
      /true or false/,
      /./,
    ],
    [
      'a window without a statistic',
      'r.yaml',
      rule('quantity: virialRatio', 'atMost: 1', 'during: settled'),
      'rulesInvalid',
      /line 4, column 5: .*during without statistic/,
      /mean/,
    ],
    [
      'a window of the run',
      'r.yaml',
      rule('quantity: verdict', 'oneOf: [settled]', 'during: all'),
      'rulesInvalid',
      /whole run; expected no during/,
      /./,
    ],
    [
      'a window that ends before it begins',
      'r.yaml',
      rule('quantity: virialRatio', 'atMost: 1', 'statistic: mean', 'during: { from: 2, to: 1 }'),
      'rulesInvalid',
      /ends \(1\) before it begins \(2\)/,
      /./,
    ],
    [
      'two windows',
      'r.yaml',
      rule(
        'quantity: virialRatio',
        'atMost: 1',
        'statistic: mean',
        'during: { from: 2, lastSnapshots: 1 }',
      ),
      'rulesInvalid',
      /found from and lastSnapshots/,
      /./,
    ],
    [
      'no window',
      'r.yaml',
      rule('quantity: virialRatio', 'atMost: 1', 'statistic: mean', 'during: {}'),
      'rulesInvalid',
      /found no key/,
      /./,
    ],
    ['an alias of nothing', 'r.yaml', 'rules: *gone\n', 'rulesInvalid', /line 1/, /./],
  ])('%s', async (_what, name, text, code, message, remedy) => {
    const [found, said, todo] = await refused(text, name);
    expect({ found, said, todo }).toMatchObject({ found: code });
    expect(said).toMatch(message);
    expect(said.startsWith(`${name}, line `)).toBe(true);
    expect(todo).toMatch(remedy);
  });

  it('a name that is no file and no set', async () => {
    await expect(readRules('setled')).rejects.toMatchObject({
      code: 'usage.rulesNotFound',
      remedy: 'Did you mean "settled"?',
    });
    await expect(readRules(folder)).rejects.toMatchObject({ code: 'input.isDirectory' });
  });
});

describe('names of quantities', () => {
  it.each([
    ['virialRatio', 'whole.virialRatio', 'snapshot', 'number'],
    ['bound.clausiusRatio', 'bound.clausiusRatio', 'snapshot', 'number'],
    ['lagrangian[0.50]', 'lagrangian[0.5]', 'snapshot', 'number'],
    ['shells.anisotropy[3]', 'shells.anisotropy[3]', 'snapshot', 'number'],
    ['frame.centre.x', 'frame.centre.x', 'snapshot', 'number'],
    ['settings.softening.kernel', 'settings.softening.kernel', 'snapshot', 'text'],
    ['crossingTime', 'crossingTime', 'snapshot', 'number'],
    ['verdict.crossingTime', 'verdict.crossingTime', 'run', 'number'],
    ['verdict', 'verdict', 'run', 'text'],
    ['settledAt', 'verdict.settledAt', 'run', 'number'],
    ['audit.massKept', 'verdict.audit.massKept', 'run', 'boolean'],
    ['remarks[duplicateIds]', 'remarks[duplicateIds]', 'snapshot', 'boolean'],
  ])('%s is %s', async (short, name, of, type) => {
    expect(await resolveQuantity(short)).toMatchObject({ name, of, type });
  });

  it('say what must be measured for them', async () => {
    expect(await resolveQuantity('hardPairs')).toMatchObject({ extra: 'pairs' });
    expect(await resolveQuantity('shells.axis.x')).toMatchObject({ extra: 'shells' });
    expect(await resolveQuantity('lagrangian[0.3]')).toMatchObject({ fraction: 0.3, extra: null });
  });

  it('all mean something', async () => {
    const names = await quantityNames();
    expect(names.length).toBeGreaterThan(100);
    for (const name of names) expect(await resolveQuantity(name)).toMatchObject({ name });
  });
});
