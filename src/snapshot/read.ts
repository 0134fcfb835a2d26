/** The way in: any file to particles, whatever its format. */
import { UsageError } from '../errors.ts';
import type { Crew } from '../parallel/crew.ts';
import { looksLikeArrow } from './arrow/magic.ts';
import type * as ArrowReader from './arrow/read.ts';
import { readExactly, withInput, type OpenFile } from './files.ts';
import type { Particles } from './particles.ts';
import type * as RawReader from './raw/read.ts';
import type { ReadOptions, SnapshotDescription } from './reading.ts';
import { screenParticles, screenSample } from './screen.ts';
import { checkSelection, isSelecting, selectBodies, withSelectingColumns } from './select.ts';

/**
 * Reads a snapshot, raw or Arrow, selects bodies if options say so, and screens their values.
 * Coordinates stay those of the file: see `toPhysical` for comoving ones.
 * @param path - a file, or `-` for an Arrow stream on standard input
 * @param crew - workers that load a large file together; without it the calling thread does
 * @throws InputError of the reader or of `screenParticles`; UsageError `usage.standardInput`; errors
 * of `selectBodies`; InterruptedError
 */
export async function readSnapshot(
  path: string,
  options: ReadOptions = {},
  crew?: Crew,
): Promise<Particles> {
  if (!isSelecting(options)) {
    const particles = await readWhole(path, options, crew);
    screenParticles(particles);
    return particles;
  }
  checkSelection(options);
  const whole = await readWhole(path, withSelectingColumns(options), crew);
  const { particles, indices } = selectBodies(whole, options);
  screenSample(particles, (index) => indices[index]);
  return particles;
}

async function readWhole(path: string, options: ReadOptions, crew?: Crew): Promise<Particles> {
  return isStandardInput(path, options)
    ? (await arrow()).readArrow(path, options)
    : withInput(path, async (file) =>
        (await isArrow(file, options))
          ? (await arrow()).readArrowFile(file, options, crew)
          : (await raw()).readRawFile(file, options, crew),
      );
}

/**
 * The time that a snapshot states, or null; no body is read, and standard input not at all.
 * @throws InputError as {@link readSnapshot}, of what has to be read
 */
export async function readStatedTime(
  path: string,
  options: ReadOptions = {},
): Promise<number | null> {
  if (path === '-') return null;
  return withInput(path, async (file) => {
    const facts = (await isArrow(file, options))
      ? await (await arrow()).readArrowFacts(file, options)
      : await (await raw()).readRawFacts(file, options);
    return facts.time;
  });
}

/**
 * Says what is in a snapshot and reads no more of it than that takes; errors as {@link readSnapshot}.
 * @param values - whether values are looked at, which means to decompress them in a compressed file
 */
export async function describeSnapshot(
  path: string,
  options: ReadOptions = {},
  values: 'values' | 'no values' = 'values',
): Promise<SnapshotDescription> {
  if (isStandardInput(path, options) || (await withInput(path, (file) => isArrow(file, options))))
    return (await arrow()).describeArrow(path, options, values);
  return (await import('./raw/describe.ts')).describeRaw(path, options);
}

// Loaded when first needed, and asked for once: each import costs a small snapshot some turns.
let arrowReader: Promise<typeof ArrowReader> | undefined;
let rawReader: Promise<typeof RawReader> | undefined;
const arrow = () => (arrowReader ??= import('./arrow/read.ts'));
const raw = () => (rawReader ??= import('./raw/read.ts'));

/** Bytes that tell an Arrow file or stream from others. */
const HEAD_BYTES = 64;

function isStandardInput(path: string, options: ReadOptions): boolean {
  if (path !== '-') return false;
  if (options.layout === undefined) return true;
  throw new UsageError(
    'usage.standardInput',
    `--layout ${options.layout} with "-": standard input is read as an Arrow stream, which needs no layout`,
    'Write the raw data to a file, or leave --layout out.',
  );
}

async function isArrow(file: OpenFile, options: ReadOptions): Promise<boolean> {
  const head = new Uint8Array(Math.min(HEAD_BYTES, file.size));
  await readExactly(file, head, 0, head.length, 0);
  // With a layout named, a name's ending or four bytes 0xff are no evidence; the magic string is.
  if (options.layout !== undefined)
    return Buffer.from(head).toString('latin1').startsWith('ARROW1');
  return looksLikeArrow(head, file.path) !== null;
}
