/** Rules on made-up series whose figures are known: the three outcomes, windows, statistics, errors. */
import { describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/dynamics/record.ts';
import type { MeasureOptions } from '../../src/dynamics/settings.ts';
import { judgeRules, type RuleOutcome } from '../../src/gate/judge.ts';
import { optionsForRules } from '../../src/gate/needs.ts';
import { readRules } from '../../src/gate/readRules.ts';
import type { Rule } from '../../src/gate/rules.ts';
import { Random } from '../../src/numerics/random.ts';
import { madeSeries } from './made.ts';

async function judge(rule: Rule, records: readonly MeasureRecord[]): Promise<RuleOutcome> {
  const { outcomes } = await judgeRules({ name: 'made', rules: [rule] }, records);
  return outcomes[0];
}

const quantity = 'virialRatio';
const one = (ratio: number, noise: number | null = 0.01) => madeSeries([{ ratio, noise }]);

describe('an error bar against a bound', () => {
  // Bars of ± 2σ, worked out by hand.
  it.each([
    [1.0, 'passes'], // 0.98 to 1.02
    [1.02, 'passes'], // 1.00 to 1.04
    [1.045, 'cannotTell'], // 1.025 to 1.065
    [1.069, 'cannotTell'], // 1.049 to 1.089
    [1.071, 'fails'], // 1.051 to 1.091
    [0.92, 'fails'], // 0.90 to 0.94
  ])('%d ± 0.01 between 0.95 and 1.05 %s', async (ratio, outcome) => {
    expect(await judge({ quantity, between: [0.95, 1.05] }, one(ratio))).toMatchObject({
      outcome,
      value: ratio,
      error: 0.01,
    });
  });

  it('is as long as the rule or its set says', async () => {
    const rule: Rule = { quantity, atMost: 1.05 };
    expect((await judge({ ...rule, sigmas: 1 }, one(1.035))).outcome).toBe('passes');
    expect((await judge({ ...rule, sigmas: 3 }, one(1.035))).outcome).toBe('cannotTell');
    expect((await judge({ ...rule, sigmas: 0 }, one(1.051))).outcome).toBe('fails');
    const { outcomes } = await judgeRules({ name: 'x', sigmas: 1, rules: [rule] }, one(1.035));
    expect(outcomes[0].outcome).toBe('passes');
  });

  it('that is wider than the bounds says so', async () => {
    const outcome = await judge({ quantity, near: { value: 1, tolerance: 0.01 } }, one(1));
    expect(outcome.outcome).toBe('cannotTell');
    expect(outcome.reason).toContain('wider than the bounds are apart');
  });

  it('counts as 0 where no error is known', async () => {
    const rule: Rule = { quantity: 'velocityDispersion', atMost: 0.3136 };
    expect(await judge(rule, one(1))).toMatchObject({ outcome: 'passes', error: null, bar: null });
  });

  it('can be the measure itself', async () => {
    const rule = (times: number): Rule => ({ quantity, withinErrors: { value: 1, times } });
    expect((await judge(rule(3), one(1.029))).outcome).toBe('passes');
    expect((await judge(rule(3), one(1.031))).outcome).toBe('fails');
    expect((await judge(rule(3), one(1.031, null))).outcome).toBe('cannotTell');
  });
});

describe('no data never pass:', () => {
  const series = madeSeries([{}, { ratio: null }, {}, {}]);
  it.each<[string, Rule]>([
    [
      'a window without snapshots',
      { quantity, during: { from: 100 }, statistic: 'mean', atMost: 9 },
    ],
    [
      'a window without the figure',
      { quantity, during: { from: 0.5, to: 0.5 }, statistic: 'max', atMost: 9 },
    ],
    ['a figure that was not measured', { quantity: 'hardPairs', atMost: 9 }],
    ['a fraction that was not measured', { quantity: 'lagrangian[0.3]', atMost: 9 }],
    [
      'a part that has settled of a run that has not',
      { quantity, during: 'settled', statistic: 'mean', atMost: 9 },
    ],
    [
      'a greatest value of which one is not known',
      { quantity, during: 'all', statistic: 'max', atMost: 9 },
    ],
    [
      'every snapshot of which one has no figure',
      { quantity, during: 'all', statistic: 'every', atMost: 9 },
    ],
    [
      'a fraction that the missing decide',
      { quantity, during: 'all', statistic: { fractionWithin: [0, 9] }, atLeast: 0.9 },
    ],
    [
      'a change of one snapshot',
      { quantity, during: { lastSnapshots: 1 }, statistic: 'change', atMost: 9 },
    ],
    [
      'a drift of two',
      { quantity, during: { lastSnapshots: 2 }, statistic: 'driftPerCrossingTime', atMost: 9 },
    ],
    [
      'a scatter of one',
      { quantity, during: { lastSnapshots: 1 }, statistic: 'scatter', atMost: 9 },
    ],
    ['a verdict on too few snapshots', { quantity: 'verdict', oneOf: ['settled'] }],
    ['a figure of energy that is not judged', { quantity: 'audit.largestStep.share', atMost: 9 }],
  ])('%s', async (_what, rule) => {
    const outcome = await judge(rule, series);
    expect(outcome.outcome).toBe('cannotTell');
    expect(outcome.reason).not.toBe('');
  });

  it('an empty series is no series', async () => {
    const settled = await readRules('settled');
    await expect(judgeRules(settled, [])).rejects.toMatchObject({
      code: 'unanswerable.emptySeries',
    });
  });

  it('what is missing is named, with the option for it', async () => {
    expect((await judge({ quantity: 'hardPairs', atMost: 9 }, series)).reason).toContain(
      '--with pairs',
    );
    expect((await judge({ quantity: 'lagrangian[0.3]', atMost: 9 }, series)).reason).toContain(
      '--fractions 0.3',
    );
  });

  it('and rules say what to measure', async () => {
    const rules: Rule[] = [
      { quantity: 'hardPairs', atMost: 9 },
      { quantity: 'lagrangian[0.3]', atMost: 9 },
      { quantity: 'lagrangian[0.5]', atMost: 9 },
    ];
    const asked: MeasureOptions = { with: ['inertia'] };
    const options = await optionsForRules([{ name: 'x', rules }], asked);
    expect(options.with).toEqual(['inertia', 'pairs']);
    expect(options.fractions).toContain(0.3);
    expect(new Set(options.fractions).size).toBe(options.fractions?.length);
    expect(await optionsForRules([{ name: 'x', rules: rules.slice(2) }], {})).toEqual({});
  });
});

describe('windows', () => {
  // Times 0, 0.5 … 4.5 with ratios 0 … 9; one crossing time is 1.
  const series = madeSeries(Array.from({ length: 10 }, (_, k) => ({ ratio: k, noise: 0 })));
  it.each<[Rule['during'], number, number]>([
    ['all', 10, 4.5],
    [{ lastSnapshots: 3 }, 3, 8],
    [{ lastSnapshots: 30 }, 10, 4.5],
    [{ lastCrossingTimes: 1 }, 3, 8],
    [{ from: 1, to: 2 }, 3, 3],
    [{ to: 0.5 }, 2, 0.5],
    [{ from: 4 }, 2, 8.5],
  ])('%j', async (during, snapshots, mean) => {
    const rule: Rule = { quantity, during: during ?? 'all', statistic: 'mean', atMost: 100 };
    expect(await judge(rule, series)).toMatchObject({ snapshots, value: mean });
  });

  it('are those of the order of time, whatever the order given', async () => {
    const rule: Rule = { quantity, during: { lastSnapshots: 2 }, statistic: 'min', atLeast: 8 };
    expect((await judge(rule, [...series].reverse())).outcome).toBe('passes');
  });

  it('of snapshots without times hold them all, as given', async () => {
    const timeless = series.map((record) => ({ ...record, time: null }));
    const rule: Rule = { quantity, during: { lastSnapshots: 2 }, statistic: 'min', atLeast: 8 };
    expect(await judge(rule, timeless)).toMatchObject({ outcome: 'passes', snapshots: 2 });
    const timed: Rule = { quantity, during: { from: 0 }, statistic: 'min', atLeast: 0 };
    expect((await judge(timed, timeless)).outcome).toBe('cannotTell');
  });

  it('of several snapshots of one time hold them all', async () => {
    const same = series.map((record) => ({ ...record, time: 0 }));
    expect(
      await judge({ quantity, statistic: 'every', during: 'all', atMost: 9 }, same),
    ).toMatchObject({ snapshots: 10 });
  });
});

describe('statistics', () => {
  const values = [1, 3, -5, 2];
  const series = madeSeries(values.map((ratio) => ({ ratio, noise: 0.1 })));
  const value = async (statistic: Rule['statistic'], rest: Partial<Rule> = {}) =>
    (
      await judge(
        { quantity, during: 'all', statistic: statistic ?? 'last', atMost: 100, ...rest },
        series,
      )
    ).value;

  it('are those of the textbook', async () => {
    expect(await value('first')).toBe(1);
    expect(await value('last')).toBe(2);
    expect(await value('min')).toBe(-5);
    expect(await value('max')).toBe(3);
    expect(await value('largest')).toBe(5);
    expect(await value('mean')).toBe(0.25);
    expect(await value('change')).toBe(1);
    // (1 + 9 + 25 + 4)/4, and the squared deviations from 0.25 over 3: rounding apart.
    expect(await value('rms')).toBeCloseTo(Math.sqrt(39 / 4), 12);
    expect(await value('scatter')).toBeCloseTo(Math.sqrt((39 - 4 * 0.25 ** 2) / 3), 12);
    expect(await value('first', { relativeTo: 'first' })).toBe(0);
    expect(await value('last', { relativeTo: 'first' })).toBe(1);
  });

  it('of one snapshot have its error, a change that of both', async () => {
    const rule: Rule = { quantity, during: 'all', statistic: 'max', atMost: 100 };
    expect((await judge(rule, series)).error).toBe(0.1);
    expect((await judge({ ...rule, statistic: 'change' }, series)).error).toBeCloseTo(
      Math.SQRT2 / 10,
      12,
    );
  });

  it('a drift is found within its error', async () => {
    const random = new Random(7);
    const noisy = madeSeries(
      Array.from({ length: 200 }, (_, k) => ({
        ratio: 1 + 0.004 * k * 0.25 + 0.02 * random.normal(),
      })),
      0.25,
    );
    const rule: Rule = {
      quantity,
      during: 'all',
      statistic: 'driftPerCrossingTime',
      atLeast: 0.003,
    };
    const { value: drift, error } = await judge(rule, noisy);
    // Least squares on 200 points over 50 crossing times: σ = 0.02/√(200 · 50²/12) = 1e-4; five of that.
    expect(Math.abs(Number(drift) - 0.004)).toBeLessThan(5e-4);
    expect(error).toBeGreaterThan(3e-5);
    expect(error).toBeLessThan(3e-4);
  });

  it('the error of a mean covers the truth as often as it says', async () => {
    // White noise about 1: the mean of 120 has σ = 0.02/√120; its error from blocks must be of that size,
    // and |mean − 1| below 2 errors in about 57 of 60 draws (Student's t with 19 degrees: 94 %).
    let covered = 0;
    for (let seed = 1; seed <= 60; seed++) {
      const random = new Random(seed);
      const points = Array.from({ length: 120 }, () => ({ ratio: 1 + 0.02 * random.normal() }));
      const rule: Rule = {
        quantity,
        during: 'all',
        statistic: 'mean',
        withinErrors: { value: 1, times: 2 },
      };
      const outcome = await judge(rule, madeSeries(points, 0.3));
      if (outcome.outcome === 'passes') covered++;
    }
    // Binomial with p = 0.94: 56.4 with an rms of 1.8; four of them, and not all.
    expect(covered).toBeGreaterThan(49);
    expect(covered).toBeLessThan(60);
  });

  it('a fraction counts those near a bound as possible', async () => {
    // 1 ± 0.2 and 2 ± 0.2 lie inside 0.5 to 2.5, 3 and −5 outside.
    const rule = (atLeast: number): Rule => ({
      quantity,
      during: 'all',
      statistic: { fractionWithin: [0.5, 2.5] },
      atLeast,
    });
    expect(await judge(rule(0.5), series)).toMatchObject({ outcome: 'passes', value: 0.5 });
    expect((await judge(rule(0.6), series)).outcome).toBe('fails');
    // 2 ± 0.2 may lie on either side of 2.1.
    const near: Rule = {
      quantity,
      during: 'all',
      statistic: { fractionWithin: [0.5, 2.1] },
      atLeast: 0.5,
    };
    expect(await judge(near, series)).toMatchObject({ outcome: 'cannotTell', bar: [0.25, 0.5] });
  });

  it('every names the worst', async () => {
    const rule: Rule = { quantity, during: 'all', statistic: 'every', between: [0, 2.5] };
    const outcome = await judge(rule, series);
    expect(outcome).toMatchObject({ outcome: 'fails', value: -5 });
    expect(outcome.reason).toContain('2 of 4 snapshots');
  });
});

describe('the verdict', () => {
  const random = new Random(3);
  const settled = madeSeries(
    Array.from({ length: 80 }, () => ({
      ratio: 1 + 0.01 * random.normal(),
      radius: 1 + 0.01 * random.normal(),
    })),
    0.25,
  );
  const short = settled.slice(0, 6);
  const collapsing = madeSeries(
    Array.from({ length: 40 }, (_, k) => ({ ratio: 0.3 + 0.005 * k, radius: 1 - 0.02 * k })),
    0.1,
  );

  it('of a settled run passes the rules for that', async () => {
    const result = await judgeRules(await readRules('settled'), settled);
    expect(result).toMatchObject({
      gate: 'passed',
      verdict: 'settled',
      passes: 3,
      lacksVerdict: false,
    });
  });

  it('of a run that is undecided cannot be told, and says what is missing', async () => {
    const result = await judgeRules(await readRules('settled'), short);
    expect(result).toMatchObject({ gate: 'passed', verdict: 'undecided', open: 1 });
    expect(result.outcomes[0]).toMatchObject({ outcome: 'cannotTell', value: 'undecided' });
    expect(result.outcomes[0].reason).toMatch(/snapshots; \d+ are needed/);
    const rule: Rule = { quantity: 'verdict', oneOf: ['undecided'] };
    expect((await judge(rule, short)).outcome).toBe('passes');
  });

  it('of another kind fails, and with it what only a settled run has', async () => {
    const result = await judgeRules(await readRules('settled'), collapsing);
    expect(result).toMatchObject({ gate: 'failed', verdict: 'collapsing' });
    const outcome = await judge({ quantity: 'settledAt', atMost: 100 }, collapsing);
    expect(outcome).toMatchObject({ outcome: 'fails', value: null });
    expect((await judge({ quantity: 'settledAt', atMost: 100 }, short)).outcome).toBe('cannotTell');
    expect((await judge({ quantity: 'settledAt', atMost: 100 }, settled)).outcome).toBe('passes');
  });

  it('is missing for one snapshot, which is told apart', async () => {
    const result = await judgeRules(await readRules('settled'), settled.slice(0, 1));
    expect(result).toMatchObject({ gate: 'passed', verdict: null, lacksVerdict: true, open: 1 });
    const equilibrium = await judgeRules(await readRules('equilibrium'), settled.slice(0, 1));
    expect(equilibrium.lacksVerdict).toBe(false);
  });

  it('spans are in units of the run', async () => {
    const rule: Rule = { quantity: 'spanInCrossingTimes', near: { value: 19.75, tolerance: 1e-9 } };
    expect((await judge(rule, settled)).outcome).toBe('passes');
    // The made relaxation time is 44.6.
    const other: Rule = {
      quantity: 'spanInRelaxationTimes',
      near: { value: 19.75 / 44.6, tolerance: 1e-9 },
    };
    expect((await judge(other, settled)).outcome).toBe('passes');
  });

  it('energy counts only with a stated softening, its floor is its error', async () => {
    const drifting = Array.from({ length: 30 }, (_, k) => ({ energy: -0.25 * (1 + 1e-4 * k) }));
    const rules = await readRules('conservation');
    const result = await judgeRules(rules, madeSeries(drifting));
    expect(result.outcomes[0]).toMatchObject({ outcome: 'fails' });
    // 1e-4 · 29 of |E_0|; the floor is 1e-6/0.25.
    expect(result.outcomes[0].value).toBeCloseTo(2.9e-3, 9);
    expect(result.outcomes[0].error).toBeCloseTo(4e-6, 12);
    const unstated = await judgeRules(rules, madeSeries(drifting, 0.5, 'default'));
    expect(unstated.outcomes[0]).toMatchObject({ outcome: 'cannotTell' });
    expect(unstated.outcomes[0].reason).toContain('--softening');
    expect(unstated.outcomes.slice(1).every(({ outcome }) => outcome === 'passes')).toBe(true);
  });
});

describe('severity', () => {
  it('warn fails nothing, and is counted apart', async () => {
    const rule: Rule = { quantity, atMost: 0.5, severity: 'warn' };
    const result = await judgeRules(
      { name: 'x', rules: [rule, { quantity, atMost: 0.9 }] },
      one(1),
    );
    expect(result).toMatchObject({ gate: 'failed', fails: 1, warns: 1, open: 0 });
    const only = await judgeRules({ name: 'x', rules: [rule] }, one(1));
    expect(only).toMatchObject({ gate: 'passed', fails: 0, warns: 1 });
    const open = await judgeRules({ name: 'x', rules: [{ ...rule, atMost: 1 }] }, one(1));
    expect(open).toMatchObject({ cannotTell: 1, open: 0 });
  });

  it('rules that a program makes are checked as those of a file', async () => {
    await expect(judge({ quantity: 'virialRato', atMost: 1 }, one(1))).rejects.toMatchObject({
      code: 'usage.rulesUnknownQuantity',
    });
    await expect(judge({ quantity }, one(1))).rejects.toMatchObject({ code: 'usage.rulesInvalid' });
  });
});
