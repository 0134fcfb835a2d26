/** The way in: any file to particles, whatever its format. */
import { UsageError } from '../errors.ts';
import { openInput, readExactly } from './files.ts';
import type { Particles } from './particles.ts';
import type { ReadOptions, SnapshotDescription } from './reading.ts';
import { screenParticles } from './screen.ts';

/**
 * Reads a snapshot, raw or Arrow, and screens its values.
 * @param path - a file, or `-` for an Arrow stream on standard input
 * @throws InputError of the reader or of `screenParticles`; UsageError `usage.standardInput`;
 * InterruptedError
 */
export async function readSnapshot(path: string, options: ReadOptions = {}): Promise<Particles> {
  const particles = (await isArrow(path, options))
    ? await (await import('./arrow/read.ts')).readArrow(path, options)
    : await (await import('./raw/read.ts')).readRaw(path, options);
  screenParticles(particles);
  return particles;
}

/** Says what is in a snapshot and reads no more of it than that takes; errors as {@link readSnapshot}. */
export async function describeSnapshot(
  path: string,
  options: ReadOptions = {},
): Promise<SnapshotDescription> {
  return (await isArrow(path, options))
    ? await (await import('./arrow/read.ts')).describeArrow(path, options)
    : await (await import('./raw/describe.ts')).describeRaw(path, options);
}

/** Bytes that tell an Arrow file or stream from others. */
const HEAD_BYTES = 64;

async function isArrow(path: string, options: ReadOptions): Promise<boolean> {
  if (path === '-') {
    if (options.layout === undefined) return true;
    throw new UsageError(
      'usage.standardInput',
      `--layout ${options.layout} with "-": standard input is read as an Arrow stream, which needs no layout`,
      'Write the raw data to a file, or leave --layout out.',
    );
  }
  const head = await readHead(path);
  const { looksLikeArrow } = await import('./arrow/magic.ts');
  // With a layout named, a name's ending or four bytes 0xff are no evidence; the magic string is.
  if (options.layout !== undefined)
    return Buffer.from(head).toString('latin1').startsWith('ARROW1');
  return looksLikeArrow(head, path) !== null;
}

async function readHead(path: string): Promise<Uint8Array> {
  const file = await openInput(path);
  try {
    const head = new Uint8Array(Math.min(HEAD_BYTES, file.size));
    await readExactly(file, head, 0, head.length, 0);
    return head;
  } finally {
    await file.handle.close();
  }
}
