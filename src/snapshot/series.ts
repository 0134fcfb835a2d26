/** From the arguments of a command to the snapshot files they mean, in order. */
import { readdir, stat } from 'node:fs/promises';
import { join } from 'node:path';
import { UnanswerableError } from '../errors.ts';
import { asReadError } from './files.ts';

/** Files that lie in the folders of runs and are no snapshots. */
const NO_SNAPSHOT = ['.json', '.ledger', '.csv', '.ndjson', '.md', '.txt'];

/**
 * Files as they are named and the snapshots in the folders named (not in their subfolders), in the
 * natural order of names: `run_9` before `run_10`. `-` stands for standard input and is kept.
 * A file that is meant twice stands there once.
 * @throws InputError `input.notFound`, `input.noPermission`; UnanswerableError
 * `unanswerable.emptySeries` if a folder holds no snapshot
 */
export async function expandPaths(args: readonly string[]): Promise<string[]> {
  const files: string[] = [];
  for (const arg of args) files.push(...(await filesOf(arg)));
  return inNaturalOrder([...new Set(files)]);
}

async function filesOf(arg: string): Promise<string[]> {
  if (arg === '-') return [arg];
  try {
    if (!(await stat(arg)).isDirectory()) return [arg];
    const entries = await readdir(arg, { withFileTypes: true });
    const files = entries
      .filter((entry) => isSnapshotName(entry.name) && !entry.isDirectory())
      .map((entry) => join(arg, entry.name));
    if (files.length > 0) return files;
  } catch (error) {
    throw asReadError(arg, error);
  }
  throw new UnanswerableError(
    'unanswerable.emptySeries',
    `the folder ${arg} holds no snapshots; expected files that do not begin with a dot or end in ${NO_SNAPSHOT.join(' ')}`,
    'Name the folder in which the simulation writes its snapshots; subfolders are not searched.',
  );
}

/** Whether a file of this name in a folder is taken for a snapshot. */
export function isSnapshotName(name: string): boolean {
  return (
    !name.startsWith('.') && !NO_SNAPSHOT.some((ending) => name.toLowerCase().endsWith(ending))
  );
}

/** Sorts names so that numbers in them count as numbers; the order does not depend on the locale. */
export function inNaturalOrder(paths: readonly string[]): string[] {
  const collator = new Intl.Collator('en', { numeric: true });
  return [...paths].sort((a, b) => collator.compare(a, b) || (a < b ? -1 : a > b ? 1 : 0));
}
