/** Where results go: to standard output as they come, or to a file that appears whole or not at all. */
import type { FileHandle } from 'node:fs/promises';
import { InterruptedError, UsageError } from '../index.ts';
import { write, type Streams } from './streams.ts';

export const FORMATS = ['table', 'json', 'ndjson'] as const;
export type Format = (typeof FORMATS)[number];

/** Takes pieces of text; resolves when each is written. */
export type Sink = (text: string) => Promise<void>;

/**
 * Runs `produce` with a sink for its results.
 * @param out - a file, or undefined for standard output
 * @throws InputError `input.cannotWrite`; errors of `produce`, after which no file is left
 */
export async function withOutput<T>(
  out: string | undefined,
  streams: Streams,
  produce: (sink: Sink) => Promise<T>,
): Promise<T> {
  if (out === undefined) return produce((text) => write(streams.stdout, text));
  const { writeAtomically } = await import('../snapshot/atomic.ts');
  return writeAtomically(out, async (handle: FileHandle) => {
    const result = await produce(async (text) => {
      await handle.appendFile(text);
    });
    if (streams.interrupt.aborted) throw new InterruptedError();
    return result;
  });
}

/** The format asked for; else the one that the ending of `out` names; else a table. */
export function formatOf(asked: Format | undefined, out: string | undefined): Format {
  if (asked !== undefined) return asked;
  const ending = out?.split('.').at(-1)?.toLowerCase();
  return FORMATS.find((format) => format === ending) ?? 'table';
}

/** Refuses `--out` that would overwrite one of the inputs. */
export async function refuseOverwriting(
  out: string | undefined,
  inputs: readonly string[],
): Promise<void> {
  if (out === undefined) return;
  const { stat } = await import('node:fs/promises');
  const identity = async (path: string): Promise<string | null> => {
    const found = await stat(path, { bigint: true }).catch(() => null);
    return found === null || !found.isFile() ? null : `${found.dev}:${found.ino}`;
  };
  const target = await identity(out);
  if (target === null) return;
  for (const input of inputs) {
    if ((await identity(input)) === target) {
      throw new UsageError(
        'usage.outIsInput',
        `--out ${out} is the snapshot ${input} itself, which would be overwritten`,
        'Give another name for the results.',
      );
    }
  }
}
