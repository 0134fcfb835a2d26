/** Which layout a raw file has: named, found beside it, or the default. */
import { open, readdir } from 'node:fs/promises';
import { basename, dirname, extname, join } from 'node:path';
import { InputError } from '../../errors.ts';
import { asReadError } from '../files.ts';
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
  let names: string[];
  try {
    names = await readdir(folder);
  } catch {
    return { file: null, candidates: [] }; // Files in it may still be readable by name, or the data's own error tells.
  }
  const own = `${basename(path, extname(path))}.layout.json`;
  const candidates = names
    .filter((name) => name.endsWith('.layout.json') && !name.startsWith('.'))
    .sort();
  const name = candidates.includes(own)
    ? own
    : candidates.length === 1
      ? candidates[0]
      : names.includes('layout.json')
        ? 'layout.json'
        : null;
  return { file: name === null ? null : join(folder, name), candidates };
}

/** Reads and checks a layout file. */
export async function loadLayout(file: string): Promise<Layout> {
  let text: string;
  try {
    const handle = await open(file, 'r');
    try {
      const { size } = await handle.stat();
      if (size > LAYOUT_BYTES_AT_MOST) {
        throw new InputError(
          'input.layoutNotJson',
          `${file} has ${size} bytes; expected a layout of some lines of JSON`,
          'Name the layout file with --layout, not the data.',
        );
      }
      text = await handle.readFile('utf8');
    } finally {
      await handle.close();
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
  return parseLayout(text, file);
}
