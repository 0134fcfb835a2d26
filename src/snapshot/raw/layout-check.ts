/** From the text of a layout file to a layout, or to an error that names file, key, found and expected. */
import type { z } from 'zod';
import { InputError } from '../../errors.ts';
import { nearestName } from '../../numerics/nearest.ts';
import { parseJson } from '../jsonText.ts';
import { expectation, foundText, keyPath, lookUp, offer, type Issue } from '../schemaIssues.ts';
import { checkMeaning } from './layout-meaning.ts';
import { LAYOUT_KEYS, layoutSchema, type Layout } from './layout.ts';

/**
 * Parses and checks a layout.
 * @param text - JSON
 * @param file - name for messages
 * @throws InputError `input.layoutNotJson`, `input.layoutInvalid`
 */
export function parseLayout(text: string, file: string): Layout {
  const value = parseJson(text, (at, cause) => {
    throw new InputError(
      'input.layoutNotJson',
      `${file}, line ${at.line}, column ${at.column}: expected JSON, found ${at.found}`,
      'Correct the layout file there; JSON knows no comments and no comma after the last item.',
      { cause },
    );
  });
  return checkLayout(value, file);
}

/** Checks a layout given as an object; errors as {@link parseLayout}. */
export function checkLayout(value: unknown, file: string): Layout {
  const result = layoutSchema.safeParse(value);
  if (!result.success) throw invalid(file, value, result.error.issues);
  checkMeaning(result.data, file);
  return result.data;
}

/**
 * An item of `fields` is a field or a gap, a number may stand in the header: take the errors of the
 * kind it was meant to be.
 */
function unwrap(issue: Issue, value: unknown): Issue[] {
  if (issue.code !== 'invalid_union') return [issue];
  const item = lookUp(value, issue.path);
  const isObject = typeof item === 'object' && item !== null;
  const isSecond = isObject && (issue.path[0] !== 'fields' || 'skip' in item);
  const branch = issue.errors[isSecond ? 1 : 0] ?? [];
  return branch.map((inner) => ({ ...inner, path: [...issue.path, ...inner.path] }));
}

function invalid(file: string, value: unknown, issues: readonly Issue[]): InputError {
  const all = issues.flatMap((issue) => unwrap(issue, value));
  // A misspelt key is the cause, and the key that is missing instead only its consequence.
  const issue = all.find((one) => one.code === 'unrecognized_keys') ?? all[0];
  if (issue.code === 'unrecognized_keys') return unknownKey(file, issue);
  const found = lookUp(value, issue.path);
  return new InputError(
    'input.layoutInvalid',
    `${file}: ${keyPath(issue.path, 'the layout')}: found ${foundText(found)}; expected ${expectation(issue)}`,
    offer(issue, found) ?? 'Correct the layout file there.',
  );
}

function unknownKey(file: string, issue: z.core.$ZodIssueUnrecognizedKeys): InputError {
  const [key] = issue.keys;
  const known = knownKeys(issue.path).filter((name) => name !== '$schema');
  const nearest = nearestName(key, known);
  return new InputError(
    'input.layoutInvalid',
    `${file}: ${keyPath(issue.path, 'the layout')}: found the unknown key "${key}"; expected only ${known.join(', ')}`,
    nearest === null ? 'Remove it.' : `Did you mean "${nearest}"?`,
  );
}

/** Keys of the object at a place of the layout. */
function knownKeys(path: readonly PropertyKey[]): readonly string[] {
  const [kind = 'layout', index, ...deeper] = path;
  const isReference = deeper.length > 0 || (kind === 'comoving' && index !== undefined);
  if (!isReference) return LAYOUT_KEYS[kind as keyof typeof LAYOUT_KEYS];
  return deeper[0] === 'count' ? ['header'] : LAYOUT_KEYS.reference;
}
