/** Files of rules → checked rules; every error names file, line, column and key. */
import { basename } from 'node:path';
import { InputError, UsageError } from '../errors.ts';
import { nearestName } from '../numerics/nearest.ts';
import { jsonPlaces, parseJson, type JsonPlaces, type TextPlace } from '../snapshot/jsonText.ts';
import {
  expectation,
  foundText,
  keyPath,
  lookUp,
  offer,
  type Issue,
} from '../snapshot/schemaIssues.ts';
import { readTextFile } from '../snapshot/textFile.ts';
import { BUILT_IN_RULES } from './builtIn.ts';
import { checkRule, type Refuse } from './checkRule.ts';
import type { Rule, RuleSet } from './rules.ts';

/**
 * The rules of a file, or the built-in set of this name. A name without a dot or slash is that of a
 * built-in set if there is one.
 * @throws UsageError `usage.rulesNotFound`, `usage.rulesNotYaml`, `usage.rulesUnknownKey`,
 * `usage.rulesUnknownQuantity`, `usage.rulesInvalid`; InputError if the file is there but cannot be read
 */
export async function readRules(nameOrPath: string): Promise<RuleSet> {
  if (Object.hasOwn(BUILT_IN_RULES, nameOrPath)) {
    return parseRules(BUILT_IN_RULES[nameOrPath], `the built-in rules ${nameOrPath}`);
  }
  return parseRules(await textOf(nameOrPath), nameOrPath);
}

async function textOf(path: string): Promise<string> {
  try {
    return await readTextFile(path, 'rules in JSON or YAML');
  } catch (error) {
    if (!(error instanceof InputError) || error.code !== 'input.notFound') throw error;
    const names = Object.keys(BUILT_IN_RULES);
    const nearest = nearestName(path, names);
    throw new UsageError(
      'usage.rulesNotFound',
      `${path} is neither a file nor the name of built-in rules, which are ${names.join(', ')}`,
      nearest === null ? 'Check the spelling and the folder.' : `Did you mean "${nearest}"?`,
      { cause: error },
    );
  }
}

/**
 * Parses and checks rules: strict JSON if the name ends in `.json`, else YAML, which JSON is part of.
 * @param path - what messages call the text
 * @throws UsageError as {@link readRules}
 */
export async function parseRules(text: string, path: string): Promise<RuleSet> {
  const plain = text.replace(/^\uFEFF/, '');
  const isJson = path.toLowerCase().endsWith('.json');
  const value = isJson ? jsonIn(plain, path) : await yamlIn(plain, path);
  const places = await jsonPlaces(plain);
  if (places.twice !== null) {
    throw invalid(
      path,
      places.twice,
      `${places.twice.key || 'a key'} stands there twice; expected each key once`,
      'Remove the one that is not meant.',
    );
  }
  const { rulesSchema, keysAt } = await import('./rulesSchema.ts');
  const result = rulesSchema.safeParse(value);
  if (!result.success) throw ofIssue(path, places, value, result.error.issues, keysAt);
  const { name, description, sigmas, rules } = result.data;
  for (const [index, rule] of (rules as Rule[]).entries()) {
    const refuse: Refuse = (key, code, problem, remedy) => {
      const at =
        key === null ? places.valueAt(['rules', index]) : places.keyAt(['rules', index], key);
      const where = keyPath(['rules', index, ...(key === null ? [] : [key])], '');
      throw new UsageError(code, `${placeText(path, at)}${where}: ${problem}`, remedy);
    };
    await checkRule(rule, refuse);
  }
  return {
    name: name ?? basename(path).replace(/\.(json|ya?ml)$/i, ''),
    ...(description !== undefined && { description }),
    ...(sigmas !== undefined && { sigmas }),
    rules: rules as Rule[],
  };
}

function jsonIn(text: string, path: string): unknown {
  return parseJson(text, ({ line, column, found }, cause) => {
    throw new UsageError(
      'usage.rulesNotYaml',
      `${placeText(path, { line, column })}expected JSON, found ${found}`,
      'Correct the rules there; JSON knows no comments and no comma after the last item (YAML does: name the file .yaml).',
      { cause },
    );
  });
}

async function yamlIn(text: string, path: string): Promise<unknown> {
  const { LineCounter, parseDocument } = await import('yaml');
  const lines = new LineCounter();
  const document = parseDocument(text, {
    lineCounter: lines,
    logLevel: 'error',
    prettyErrors: false,
  });
  const [error] = document.errors;
  if (error !== undefined) {
    const { line, col } = lines.linePos(error.pos[0]);
    const at = { line: Math.max(1, line), column: Math.max(1, col) };
    if (error.code === 'DUPLICATE_KEY') {
      const key = /^[^:\n]*/.exec(text.slice(error.pos[0]))?.[0].trim() ?? '';
      throw invalid(
        path,
        at,
        `${key} stands there twice; expected each key once`,
        'Remove the one that is not meant.',
      );
    }
    throw new UsageError(
      'usage.rulesNotYaml',
      `${placeText(path, at)}expected YAML or JSON: ${error.message.replace(/\s+/g, ' ')}`,
      'Correct the rules there; look at indentation, quotes and brackets.',
      { cause: error },
    );
  }
  try {
    return document.toJS() as unknown;
  } catch (cause) {
    // Aliases that are not defined, or that would unfold without end.
    throw invalid(
      path,
      { line: 1, column: 1 },
      `expected plain YAML: ${cause instanceof Error ? cause.message : 'it cannot be resolved'}`,
      'Write the rules without anchors and aliases.',
    );
  }
}

type KeysAt = (path: readonly PropertyKey[]) => readonly string[];

function ofIssue(
  path: string,
  places: JsonPlaces,
  value: unknown,
  issues: readonly Issue[],
  keysAt: KeysAt,
): UsageError {
  const all = issues.map((issue) => innermost(issue, value));
  // A misspelt key is the cause of what is missing.
  const issue = all.find(({ code }) => code === 'unrecognized_keys') ?? all[0];
  if (issue.code === 'unrecognized_keys') {
    const [key] = issue.keys;
    const known = keysAt(issue.path);
    const nearest = nearestName(key, known);
    const where = issue.path.length === 0 ? '' : `${keyPath(issue.path, '')}: `;
    return new UsageError(
      'usage.rulesUnknownKey',
      `${placeText(path, places.keyAt(issue.path, key))}${where}found the unknown key "${key}"; expected only ${known.join(', ')}`,
      nearest === null ? 'Remove it.' : `Did you mean "${nearest}"?`,
    );
  }
  const found = lookUp(value, issue.path);
  return invalid(
    path,
    places.valueAt(issue.path),
    `${keyPath(issue.path, 'the rules')}: found ${foundText(found)}; expected ${isPair(issue) ? 'two numbers' : expectation(issue)}`,
    offer(issue, found) ?? 'Correct the rules there; docs/gate.md explains every key.',
  );
}

/** Lists of a fixed length are pairs of bounds. */
const isPair = (issue: Issue): boolean =>
  (issue.code === 'too_small' && issue.origin === 'array' && Number(issue.minimum) === 2) ||
  (issue.code === 'too_big' && issue.origin === 'array');

/** Of a value that may be one of several things: what is wrong with the one it was meant to be. */
function innermost(issue: Issue, value: unknown): Issue {
  if (issue.code !== 'invalid_union') return issue;
  for (const branch of issue.errors) {
    const [first] = branch;
    const isMeant =
      first !== undefined && (first.path.length > 0 || first.code === 'unrecognized_keys');
    if (isMeant) return innermost({ ...first, path: [...issue.path, ...first.path] }, value);
  }
  // A word that is none of those allowed: the nearest can be named.
  const word = issue.errors.flat().find(({ code }) => code === 'invalid_value');
  if (word?.code === 'invalid_value' && typeof lookUp(value, issue.path) === 'string') {
    return { ...word, path: issue.path };
  }
  return issue;
}

function invalid(path: string, at: TextPlace, text: string, remedy: string): UsageError {
  return new UsageError('usage.rulesInvalid', `${placeText(path, at)}${text}`, remedy);
}

function placeText(path: string, { line, column }: TextPlace): string {
  return `${path}, line ${line}, column ${column}: `;
}
