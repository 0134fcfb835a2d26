/** What a schema finds wrong in a file of settings, in words for the person who wrote the file. */
import type { z } from 'zod';
import { nearestName } from '../numerics/nearest.ts';

export type Issue = z.core.$ZodIssue;

/** `fields[0].type`, or `whole` for the path of length 0. */
export function keyPath(path: readonly PropertyKey[], whole: string): string {
  if (path.length === 0) return whole;
  return path
    .map((key) => (typeof key === 'number' ? `[${key}]` : `.${String(key)}`))
    .join('')
    .replace(/^\./, '');
}

/** What stands at `path` in a parsed file; undefined if nothing does. */
export function lookUp(value: unknown, path: readonly PropertyKey[]): unknown {
  let at = value;
  for (const key of path) {
    if (typeof at !== 'object' || at === null) return undefined;
    at = (at as Record<PropertyKey, unknown>)[key];
  }
  return at;
}

const KINDS: Readonly<Record<string, string>> = {
  int: 'a whole number',
  number: 'a number',
  string: 'a text',
  array: 'a list',
  object: 'an object',
  boolean: 'true or false',
};

/** What the schema expected instead. */
export function expectation(issue: Issue): string {
  if (issue.code === 'invalid_type') return KINDS[issue.expected] ?? `a ${issue.expected}`;
  if (issue.code === 'invalid_value') {
    return issue.values.map((one) => JSON.stringify(one)).join(' or ');
  }
  if (issue.code === 'too_small') {
    if (issue.origin === 'array') return 'at least one item';
    if (issue.origin === 'string') return 'a name';
    return issue.inclusive ? `at least ${issue.minimum}` : `more than ${issue.minimum}`;
  }
  if (issue.code === 'too_big')
    return `${issue.inclusive === false ? 'less than' : 'at most'} ${issue.maximum}`;
  return issue.message;
}

/** A remedy that names the nearest of the values allowed; null if none is near. */
export function offer(issue: Issue, found: unknown): string | null {
  if (issue.code !== 'invalid_value' || typeof found !== 'string') return null;
  const nearest = nearestName(found, issue.values.map(String));
  return nearest === null ? null : `Did you mean "${nearest}"?`;
}

/** What was found, as JSON and not too long. */
export function foundText(found: unknown): string {
  if (found === undefined) return 'nothing';
  const text = JSON.stringify(found);
  return text.length > 60 ? `${text.slice(0, 57)}...` : text;
}
