/** What the keys of a rule mean together: a rule that cannot be judged, or can never pass, is refused. */
import { nearestName } from '../numerics/nearest.ts';
import { resolveQuantity, WORDS, type GateQuantity } from './quantities.ts';
import { BOUNDS, intervalOf, STATISTICS, type Rule } from './rules.ts';

export type RuleErrorCode = 'usage.rulesInvalid' | 'usage.rulesUnknownQuantity';

/**
 * Throws the error for a key of a rule.
 * @param key - null for the rule as a whole
 */
export type Refuse = (
  key: string | null,
  code: RuleErrorCode,
  problem: string,
  remedy: string,
) => never;

/** @returns what the rule's quantity means */
export async function checkRule(rule: Rule, refuse: Refuse): Promise<GateQuantity> {
  const quantity = await resolveQuantity(rule.quantity);
  if ('problem' in quantity) {
    return refuse(
      'quantity',
      'usage.rulesUnknownQuantity',
      quantity.problem,
      quantity.nearest === null
        ? 'docs/record.md lists the quantities of a snapshot, docs/gate.md those of a run.'
        : `Did you mean "${quantity.nearest}"?`,
    );
  }
  checkBounds(rule, quantity, refuse);
  checkWindow(rule, refuse);
  checkStatistic(rule, quantity, refuse);
  return quantity;
}

function checkBounds(rule: Rule, { type, name }: GateQuantity, refuse: Refuse): void {
  const given = BOUNDS.filter((key) => rule[key] !== undefined);
  const wrong = (key: string | null, problem: string, remedy: string) =>
    refuse(key, 'usage.rulesInvalid', problem, remedy);
  if (given.length === 0) {
    wrong(
      null,
      `found no bound; expected one of ${BOUNDS.join(', ')}`,
      'Say what the quantity must be.',
    );
  }
  const isOpenPair = given.length === 2 && given[0] === 'atLeast' && given[1] === 'atMost';
  if (given.length > 1 && !isOpenPair) {
    wrong(
      given[1],
      `found ${given.join(' and ')}; expected one bound, or atLeast with atMost`,
      'Make a rule of each.',
    );
  }
  if (type === 'number' && rule.oneOf !== undefined) {
    wrong(
      'oneOf',
      `${name} is a number; expected between, atLeast, atMost, near or withinErrors`,
      'Give a bound for numbers.',
    );
  }
  if (type !== 'number' && rule.oneOf === undefined) {
    const what = type === 'text' ? 'a word' : 'true or false';
    wrong(
      given[0],
      `${name} is ${what}; expected oneOf`,
      `Name what is allowed: oneOf: [${type === 'text' ? 'settled' : 'true'}].`,
    );
  }
  const words = type === 'boolean' ? 'boolean' : 'string';
  if (rule.oneOf?.some((one) => typeof one !== words) === true) {
    wrong(
      'oneOf',
      `${name} is ${type === 'boolean' ? 'true or false' : 'a word'}, and some of oneOf is not`,
      'Correct the list.',
    );
  }
  checkWords(rule, name, wrong);
  const interval = intervalOf(rule);
  if (interval !== null && interval[0] > interval[1]) {
    wrong(
      given[0],
      `the bounds contradict each other: nothing is at least ${interval[0]} and at most ${interval[1]}`,
      'Put the smaller number first.',
    );
  }
  const { statistic } = rule;
  if (typeof statistic !== 'object') return;
  const [low, high] = statistic.fractionWithin;
  if (low > high) {
    wrong(
      'statistic',
      `the bounds contradict each other: nothing is at least ${low} and at most ${high}`,
      'Put the smaller number first.',
    );
  }
  if (interval === null) {
    wrong(given[0], 'a fraction has no error of its own', 'Use between, atLeast or atMost.');
  } else if (interval[0] > 1 || interval[1] < 0) {
    wrong(
      given[0],
      'the bounds contradict the statistic: a fraction lies between 0 and 1',
      'Give the share of snapshots, such as atLeast: 0.9.',
    );
  }
}

function checkWords(
  { oneOf = [] }: Rule,
  name: string,
  wrong: (key: string, problem: string, remedy: string) => never,
): void {
  if (!Object.hasOwn(WORDS, name)) return;
  const known = WORDS[name];
  const unknown = oneOf.find((word) => typeof word === 'string' && !known.includes(word));
  if (typeof unknown !== 'string') return;
  const nearest = nearestName(unknown, known);
  wrong(
    'oneOf',
    `${name} is never "${unknown}"; expected some of ${known.join(', ')}`,
    nearest === null ? 'Name some of these.' : `Did you mean "${nearest}"?`,
  );
}

function checkWindow({ during }: Rule, refuse: Refuse): void {
  if (typeof during !== 'object') return;
  const wrong = (problem: string, remedy: string) =>
    refuse('during', 'usage.rulesInvalid', problem, remedy);
  const keys = Object.keys(during);
  if (keys.length === 0) {
    wrong(
      'found no key; expected from, to, lastSnapshots or lastCrossingTimes',
      'Say which part of the series is meant, or "all".',
    );
  }
  const isPair = keys.every((key) => key === 'from' || key === 'to');
  if (keys.length > 1 && !isPair) {
    wrong(
      `found ${keys.join(' and ')}; expected one of them, or from with to`,
      'Choose one window.',
    );
  }
  if ('from' in during && 'to' in during && Number(during.from) > Number(during.to)) {
    wrong(
      `the window ends (${during.to}) before it begins (${during.from})`,
      'Put the earlier time under from.',
    );
  }
}

function checkStatistic(rule: Rule, { of, name, type }: GateQuantity, refuse: Refuse): void {
  const { during, statistic, relativeTo } = rule;
  const wrong = (key: string | null, problem: string, remedy: string) =>
    refuse(key, 'usage.rulesInvalid', problem, remedy);
  if (of === 'run') {
    for (const key of ['during', 'statistic', 'relativeTo'] as const) {
      if (rule[key] !== undefined) {
        wrong(
          key,
          `${name} is one figure of the whole run; expected no ${key}`,
          'Remove it, or name a quantity of the snapshots.',
        );
      }
    }
    return;
  }
  if (type !== 'number') {
    const allowed = ['first', 'last', 'every'];
    if (statistic !== undefined && !allowed.includes(statistic as string)) {
      wrong(
        'statistic',
        `${name} is no number; expected ${allowed.join(', ')}`,
        'Without a statistic every snapshot in the window counts.',
      );
    }
    if (relativeTo !== undefined) {
      wrong('relativeTo', `${name} is no number`, 'Remove relativeTo.');
    }
    return;
  }
  if (during !== undefined && statistic === undefined) {
    wrong(
      'during',
      `found during without statistic; expected one of ${STATISTICS.join(', ')}, or fractionWithin`,
      'Say what is made of the values in the window, such as statistic: mean.',
    );
  }
}
