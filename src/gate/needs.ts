/** Rules → what must be measured so that they can be judged. */
import type { ExtraName } from '../dynamics/extras.ts';
import { DEFAULT_FRACTIONS, type MeasureOptions } from '../dynamics/settings.ts';
import { resolveQuantity } from './quantities.ts';
import type { RuleSet } from './rules.ts';

/** The options of a measurement with the extras and the mass fractions added that rules ask for. */
export async function optionsForRules<O extends Pick<MeasureOptions, 'with' | 'fractions'>>(
  sets: readonly RuleSet[],
  options: O,
): Promise<O> {
  const extras = new Set<ExtraName>();
  const fractions = new Set<number>();
  const stated = options.fractions ?? DEFAULT_FRACTIONS;
  for (const { quantity } of sets.flatMap(({ rules }) => rules)) {
    const found = await resolveQuantity(quantity);
    if ('problem' in found) continue;
    if (found.extra !== null) extras.add(found.extra);
    if (found.fraction !== null && !stated.includes(found.fraction)) fractions.add(found.fraction);
  }
  return {
    ...options,
    ...(extras.size > 0 && { with: [...(options.with ?? []), ...extras] }),
    ...(fractions.size > 0 && { fractions: [...stated, ...fractions] }),
  };
}
