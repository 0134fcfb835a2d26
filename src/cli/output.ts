/** Where results go: to standard output as they come, or to a file that appears whole or not at all. */
import type { FileHandle } from 'node:fs/promises';
import { InterruptedError, UsageError } from '../index.ts';
import { write, type Streams } from './streams.ts';

export const FORMATS = ['table', 'json', 'ndjson', 'csv', 'arrow'] as const;
export type Format = (typeof FORMATS)[number];

/** Takes pieces of text or bytes; resolves when each is written. */
export type Sink = (piece: string | Uint8Array) => Promise<void>;

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
  if (out === undefined) return produce((piece) => write(streams.stdout, piece));
  const { writeAtomically } = await import('../snapshot/atomic.ts');
  return writeAtomically(out, async (handle: FileHandle) => {
    const result = await produce(async (piece) => {
      await handle.appendFile(piece);
    });
    if (streams.interrupt.aborted) throw new InterruptedError();
    return result;
  });
}

const ENDINGS: Readonly<Record<string, Format>> = {
  table: 'table',
  json: 'json',
  ndjson: 'ndjson',
  jsonl: 'ndjson',
  csv: 'csv',
  arrow: 'arrow',
  arrows: 'arrow',
  feather: 'arrow',
  ipc: 'arrow',
};

/**
 * The format asked for, whatever the ending of `out`; else the one that the ending names; else a table.
 * @param known - formats that the command has
 * @throws UsageError `usage.format` for an ending that names a format that the command does not have
 */
export function formatOf<F extends Format>(
  asked: F | undefined,
  out: string | undefined,
  known: readonly F[],
): F | 'table' {
  if (asked !== undefined) return asked;
  const ending = /\.([^./\\]+)$/.exec(out ?? '')?.[1].toLowerCase() ?? '';
  const named = Object.hasOwn(ENDINGS, ending) ? ENDINGS[ending] : 'table';
  const format = known.find((one) => one === named);
  if (format !== undefined || named === 'table') return format ?? 'table';
  throw new UsageError(
    'usage.format',
    `the ending of --out ${out} names the format ${named}, which this command does not write; it writes ${known.join(', ')}`,
    'Give another name, or say with --format which format is wanted.',
  );
}

/** Refuses bytes that would garble a terminal. @throws UsageError `usage.terminal` */
export function refuseTerminal(format: Format, out: string | undefined, streams: Streams): void {
  if (format !== 'arrow' || out !== undefined || streams.stdout.isTTY !== true) return;
  throw new UsageError(
    'usage.terminal',
    '--format arrow gives bytes, and standard output is a terminal',
    'Add --out FILE, or send the output to a file or another program.',
  );
}

/** Refuses an output (`--out`, or the option named) that would overwrite one of the inputs. */
export async function refuseOverwriting(
  out: string | undefined,
  inputs: readonly string[],
  option = '--out',
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
        `${option} ${out} is the ${option === '--out' ? 'snapshot' : 'input'} ${input} itself, which would be overwritten`,
        'Give another name for the results.',
      );
    }
  }
}
