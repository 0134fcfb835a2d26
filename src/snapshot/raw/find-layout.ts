/** Which layout a raw file has: named, found beside it, or the default. */
import { constants } from 'node:fs';
import { basename, dirname, extname, join } from 'node:path';
import { InputError } from '../../errors.ts';
import { asReadError, disk } from '../files.ts';
import type { Remark } from '../particles.ts';
import { DEFAULT_LAYOUT, type Layout } from './layout.ts';
import { parseLayout } from './layout-check.ts';

export interface FoundLayout {
  readonly layout: Layout;
  /** Path of the layout file, or null for the default. */
  readonly file: string | null;
  readonly remarks: readonly Remark[];
}

/** A layout is some lines of JSON; anything larger is another file named by mistake. */
const LAYOUT_BYTES_AT_MOST = 1 << 20;

/**
 * The layout of `path`: `given` if there is one; else `NAME.layout.json` beside `NAME.EXT`; else the
 * only `*.layout.json` in the folder; else `layout.json` there; else {@link DEFAULT_LAYOUT}.
 * @throws InputError `input.layoutNotFound`, and those of {@link parseLayout}
 */
export async function findLayout(path: string, given: string | undefined): Promise<FoundLayout> {
  if (given !== undefined) {
    return { layout: await loadLayout(given), file: given, remarks: [] };
  }
  const { file, candidates } = await besideData(path);
  if (file === null) {
    const remarks = candidates.length > 1 ? [ambiguous(path, candidates)] : [];
    return { layout: DEFAULT_LAYOUT, file: null, remarks };
  }
  const remark: Remark = {
    code: 'layout.found',
    text: `${path} was read with the layout ${file}, found beside it`,
    remedy: `If that is not its layout, name the right one with --layout FILE.`,
  };
  return { layout: await loadLayout(file), file, remarks: [remark] };
}

/** Path of the layout file that {@link findLayout} takes, or null for the default. */
export async function layoutFileOf(
  path: string,
  given: string | undefined,
): Promise<string | null> {
  return given ?? (await besideData(path)).file;
}

function ambiguous(path: string, candidates: readonly string[]): Remark {
  return {
    code: 'layout.ambiguous',
    text: `${path} was read as 7 little-endian float64 a body: of the ${candidates.length} layouts beside it (${candidates.slice(0, 3).join(', ')}${candidates.length > 3 ? ', ...' : ''}) none bears its name`,
    remedy: 'Name the right one with --layout FILE.',
  };
}

interface Beside {
  readonly file: string | null;
  /** Names of the layouts in the folder that bear the name of some data. */
  readonly candidates: readonly string[];
}

async function besideData(path: string): Promise<Beside> {
  const folder = dirname(path);
  let names: readonly string[];
  try {
    names = await layoutsIn(folder);
  } catch {
    return { file: null, candidates: [] }; // Files in it may still be readable by name, or the data's own error tells.
  }
  const own = `${basename(path, extname(path))}.layout.json`;
  const candidates = names.filter((name) => name !== COMMON);
  const name = candidates.includes(own)
    ? own
    : candidates.length === 1
      ? candidates[0]
      : names.includes(COMMON)
        ? COMMON
        : null;
  return { file: name === null ? null : join(folder, name), candidates };
}

const COMMON = 'layout.json';
/** Changes that follow each other faster than this may leave a folder the same time of change. */
const CLOCK_TICK_MS = 2000;

let listed: { folder: string; layouts: readonly string[] } | null = null;

/**
 * Names of the layouts in a folder, in order. A series lies in one folder, which takes long to list
 * for each of its snapshots: it is listed again only if it has changed.
 */
async function layoutsIn(path: string): Promise<readonly string[]> {
  const { dev, ino, mtimeMs, mtimeNs } = await disk.stat(path, { bigint: true });
  const folder = `${dev} ${ino} ${mtimeNs}`;
  if (listed?.folder === folder) return listed.layouts;
  const isSettled = Date.now() - Number(mtimeMs) > CLOCK_TICK_MS;
  const layouts = (await disk.readdir(path))
    .filter((name) => name === COMMON || (name.endsWith('.layout.json') && !name.startsWith('.')))
    .sort();
  listed = isSettled ? { folder, layouts } : null;
  return layouts;
}

/** The layout read last: the snapshots of a series share theirs. */
let parsed: { file: string; text: string; layout: Layout } | null = null;

/** Reads and checks a layout file. */
export async function loadLayout(file: string): Promise<Layout> {
  const text = await readText(file);
  if (parsed?.file !== file || parsed.text !== text) {
    parsed = { file, text, layout: parseLayout(text, file) };
  }
  return parsed.layout;
}

async function readText(file: string): Promise<string> {
  try {
    const descriptor = await disk.open(file, constants.O_RDONLY);
    try {
      const { size } = await disk.fstat(descriptor, { bigint: true });
      if (size > LAYOUT_BYTES_AT_MOST) {
        throw new InputError(
          'input.layoutNotJson',
          `${file} has ${size} bytes; expected a layout of some lines of JSON`,
          'Name the layout file with --layout, not the data.',
        );
      }
      return await disk.readFile(descriptor, 'utf8');
    } finally {
      await disk.close(descriptor);
    }
  } catch (error) {
    const known = asReadError(file, error);
    if (known instanceof InputError && known.code === 'input.notFound') {
      throw new InputError(
        'input.layoutNotFound',
        `the layout ${file} does not exist; expected a JSON file`,
        'Check the spelling and the folder of --layout.',
        { cause: error },
      );
    }
    throw known;
  }
}
