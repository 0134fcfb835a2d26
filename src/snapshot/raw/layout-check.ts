/** From the text of a layout file to a layout, or to an error that names file, key, found and expected. */
import type { z } from 'zod';
import { InputError } from '../../errors.ts';
import { nearestName } from '../../numerics/nearest.ts';
import { parseJson } from '../jsonText.ts';
import { expectation, foundText, keyPath, lookUp, offer, type Issue } from '../schemaIssues.ts';
import { isSkip, LAYOUT_KEYS, layoutSchema, type Layout } from './layout.ts';
import { TYPE_BYTES } from './types.ts';

/** Keys of the format that this version does not read yet. */
const NOT_YET: Readonly<Record<string, string>> = {
  components: 'Give each body its component as a field, or write one file a component.',
  parts: 'Join the parts to one file, or measure them one by one.',
};

/**
 * Parses and checks a layout.
 * @param text - JSON
 * @param file - name for messages
 * @throws InputError `input.layoutNotJson`, `input.layoutInvalid`, `input.layoutUnsupported`
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
  if (typeof value === 'object' && value !== null) {
    for (const [key, remedy] of Object.entries(NOT_YET)) {
      if (key in value) {
        throw new InputError(
          'input.layoutUnsupported',
          `${file}: "${key}" is not supported by this version`,
          remedy,
        );
      }
    }
  }
  const result = layoutSchema.safeParse(value);
  if (!result.success) throw invalid(file, value, result.error.issues);
  checkNames(result.data, file);
  checkHeader(result.data, file);
  return result.data;
}

/** An item of `fields` matches one of two kinds: take the errors of the kind it was meant to be. */
function unwrap(issue: Issue, value: unknown): Issue[] {
  if (issue.code !== 'invalid_union') return [issue];
  const item = lookUp(value, issue.path);
  const isObject = typeof item === 'object' && item !== null;
  const branch = issue.errors[isObject && 'skip' in item ? 1 : 0] ?? [];
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
  const kind = issue.path[0] as keyof typeof LAYOUT_KEYS | undefined;
  const known = LAYOUT_KEYS[kind ?? 'layout'].filter((name) => name !== '$schema');
  const nearest = nearestName(key, known);
  return new InputError(
    'input.layoutInvalid',
    `${file}: ${keyPath(issue.path, 'the layout')}: found the unknown key "${key}"; expected only ${known.join(', ')}`,
    nearest === null ? 'Remove it.' : `Did you mean "${nearest}"?`,
  );
}

const VECTORS: Readonly<Record<string, readonly string[]>> = {
  position: ['x', 'y', 'z'],
  velocity: ['vx', 'vy', 'vz'],
  acceleration: ['ax', 'ay', 'az'],
};

function checkNames(layout: Layout, file: string): void {
  const seen = new Map<string, string>();
  layout.fields.forEach((entry, index) => {
    if (isSkip(entry)) return;
    const at = `fields[${index}]`;
    if (entry.scale === 0) {
      throw wrong(file, `${at}.scale`, 'found 0; expected another number', 'Remove the scale.');
    }
    const name = entry.name === 'm' ? 'mass' : entry.name;
    const earlier = seen.get(name);
    if (earlier !== undefined) {
      throw wrong(
        file,
        `${at}.name`,
        `"${entry.name}" stands there already as ${earlier}; expected each quantity once`,
        'Rename the one that is not wanted.',
      );
    }
    seen.set(name, at);
    const width = Object.hasOwn(VECTORS, name) ? 3 : SCALARS.has(name) ? 1 : entry.width;
    if (entry.width !== width) {
      throw wrong(
        file,
        `${at}.width`,
        `found ${entry.width} for ${entry.name}; expected ${width}`,
        width === 3
          ? 'Or give the three components as separate fields.'
          : 'Give each number its own field.',
      );
    }
  });
  for (const [vector, scalars] of Object.entries(VECTORS)) {
    const both = scalars.find((scalar) => seen.has(scalar));
    if (seen.has(vector) && both !== undefined) {
      throw wrong(
        file,
        'fields',
        `found both "${vector}" and "${both}"; expected one of them`,
        'Rename the one that is not wanted.',
      );
    }
  }
  if (seen.has('mass') && layout.constants?.mass !== undefined) {
    throw wrong(
      file,
      'constants.mass',
      `found, although ${seen.get('mass')} holds masses; expected one of them`,
      'Remove constants.mass, or rename the field.',
    );
  }
}

const SCALARS = new Set([
  'mass',
  ...Object.values(VECTORS).flat(),
  ...[
    'id',
    'component',
    'softening',
    'potential',
    'specificEnergy',
    'density',
    'group',
    'subgroup',
  ],
]);

function checkHeader(layout: Layout, file: string): void {
  const seen = new Set<string>();
  layout.header.forEach((item, index) => {
    const end = item.offset + TYPE_BYTES[item.type];
    if (end > layout.headerBytes) {
      throw wrong(
        file,
        `header[${index}]`,
        `"${item.name}" ends at byte ${end}, but headerBytes is ${layout.headerBytes}`,
        `Correct the offset, or set headerBytes to at least ${end}.`,
      );
    }
    if (seen.has(item.name)) {
      throw wrong(
        file,
        `header[${index}].name`,
        `"${item.name}" stands there twice; expected each name once`,
        'Rename one of them.',
      );
    }
    seen.add(item.name);
  });
  for (const name of Object.keys(layout.constants ?? {})) {
    if (seen.has(name)) {
      throw wrong(
        file,
        `constants.${name}`,
        `found, although the header holds ${name}; expected one of them`,
        'Remove the constant, or rename the item of the header.',
      );
    }
  }
}

function wrong(file: string, key: string, text: string, remedy: string): InputError {
  return new InputError('input.layoutInvalid', `${file}: ${key}: ${text}`, remedy);
}
