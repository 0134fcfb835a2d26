/** What `--with` adds to a record, by name. */
import { UsageError } from '../errors.ts';
import { nearestName } from '../numerics/nearest.ts';
import { EXTRA_QUANTITIES } from './registryExtras.ts';

/** The extras in the order of the record, with what each is in a few words. */
export const EXTRAS = {
  inertia: 'second time derivative of the moment of inertia, from the virial theorem',
  shells: 'streaming, dispersions, anisotropy and rotation in shells of equal number',
  profiles: 'density, mass, circular and escape velocity, relaxation time by radius',
  pairs: 'hard pairs, and the balance in which each of them is one body',
} as const;

export type ExtraName = keyof typeof EXTRAS;

export const EXTRA_NAMES = Object.keys(EXTRAS) as ExtraName[];

/** Stands for all extras. */
const ALL = 'all';

/**
 * The extras that names mean: `all`, an extra's own name, or a key of the record that comes with it.
 * @returns each once, in the order of the record
 * @throws UsageError `usage.with` for a name that is not known, with the nearest one that is
 */
export function extrasNamed(names: readonly string[]): ExtraName[] {
  const byKey = new Map<string, ExtraName>(EXTRA_NAMES.map((name) => [name, name]));
  for (const { key, extra } of EXTRA_QUANTITIES) {
    if (extra !== null) byKey.set(key, extra).set(key.split('.')[0], extra);
  }
  const wanted = new Set<ExtraName>();
  for (const name of names) {
    const extra = byKey.get(name);
    if (name === ALL) for (const each of EXTRA_NAMES) wanted.add(each);
    else if (extra !== undefined) wanted.add(extra);
    else throw unknownName(name, [ALL, ...byKey.keys()]);
  }
  return EXTRA_NAMES.filter((name) => wanted.has(name));
}

function unknownName(name: string, known: readonly string[]): UsageError {
  const near = nearestName(name, known);
  const list = `known are ${EXTRA_NAMES.join(', ')} and ${ALL}`;
  return new UsageError(
    'usage.with',
    `--with ${name} is not a known quantity`,
    near === null ? list : `did you mean ${near}? (${list})`,
  );
}
