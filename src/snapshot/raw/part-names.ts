/** Names of the files that a snapshot in parts consists of. */
import { basename, dirname, join } from 'node:path';
import { InputError } from '../../errors.ts';
import { asReadError, disk } from '../files.ts';

/** A file of a snapshot in parts. */
interface Part {
  readonly name: string;
  readonly number: bigint;
  /** What `*` stands for: the same in all parts of one snapshot. */
  readonly rest: string;
}

/** What a name says by a pattern, or null if it does not fit. */
function partOf(name: string, pattern: string): Part | null {
  const escaped = pattern.replace(/[.+?^${}()|[\]\\]/g, '\\$&');
  const source = escaped.replaceAll('*', '(.*)').replace('\\{part\\}', '(?<part>\\d+)');
  const found = new RegExp(`^${source}$`, 's').exec(name);
  if (found === null) return null;
  const number = found.groups?.['part'] ?? '';
  const [, ...texts] = found;
  const at = texts.length - [...pattern.slice(pattern.indexOf('{part}'))].filter(isStar).length - 1;
  return { name, number: BigInt(number), rest: texts.filter((_, k) => k !== at).join('\n') };
}

const isStar = (letter: string): boolean => letter === '*';

/** Those of the names that are parts of the snapshot of one of them, by number; null if that does not fit. */
function together(own: string, pattern: string, names: readonly string[]): Part[] | null {
  const part = partOf(own, pattern);
  if (part === null) return null;
  return names
    .flatMap((name) => partOf(name, pattern) ?? [])
    .filter(({ rest }) => rest === part.rest)
    .sort((a, b) => (a.number < b.number ? -1 : a.number > b.number ? 1 : 0));
}

/** Paths of the parts that there are, whether or not they are complete; null if the name is none of a part. */
export function presentParts(
  path: string,
  pattern: string,
  names: readonly string[],
): string[] | null {
  const folder = dirname(path);
  return together(basename(path), pattern, names)?.map(({ name }) => join(folder, name)) ?? null;
}

/**
 * All parts of the snapshot that a file belongs to, in the order of their numbers.
 * @param pattern - the key `parts` of the layout
 * @throws InputError `input.partName` if the file's own name does not fit or two files have one
 * number, `input.missingPart` for a number that is left out, and those of reading the folder
 */
export async function partPaths(path: string, pattern: string): Promise<string[]> {
  const folder = dirname(path);
  const own = basename(path);
  const parts = together(own, pattern, await namesIn(folder));
  if (parts === null) {
    throw new InputError(
      'input.partName',
      `the name of ${path} does not fit ${pattern}, the key "parts" of its layout; expected a whole number for {part}`,
      'Correct "parts" in the layout: * stands for what differs between snapshots. Remove it if each file is a snapshot.',
    );
  }
  // A file that is not in its folder is told of when it is opened.
  if (!parts.some(({ name }) => name === own)) return [path];
  parts.forEach(({ name, number }, index) => {
    const before = index === 0 ? (number > 1n ? 0n : number - 1n) : parts[index - 1].number;
    if (number === before) {
      throw new InputError(
        'input.partName',
        `${join(folder, name)} and ${join(folder, parts[index - 1].name)} both have the part number ${number}; expected one file for each`,
        'Move the one that is not meant to another folder.',
      );
    }
    if (number !== before + 1n || (index === 0 && number > 1n)) {
      throw missingPart(path, index === 0 ? before : before + 1n, number, folder);
    }
  });
  return parts.map(({ name }) => join(folder, name));
}

function missingPart(path: string, missing: bigint, next: bigint, folder: string): InputError {
  return new InputError(
    'input.missingPart',
    `${path} belongs to a snapshot in parts, of which part ${missing} is not in ${folder}: the next that is there is part ${next}; expected numbers without a gap, from 0 or 1 on`,
    'Put all parts into one folder, or look whether the simulation wrote them all.',
  );
}

/** @throws InputError of the file system */
export async function namesIn(folder: string): Promise<string[]> {
  try {
    return await disk.readdir(folder);
  } catch (error) {
    throw asReadError(folder, error);
  }
}
