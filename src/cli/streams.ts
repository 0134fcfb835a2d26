/** What a command may touch of the world: given to it, so that tests can stand in for a process. */
import type { Writable } from 'node:stream';

export type OutStream = Writable & { readonly isTTY?: boolean };

export interface Streams {
  /** Results, and nothing else. */
  readonly stdout: OutStream;
  /** Progress, remarks, errors. */
  readonly stderr: OutStream;
  readonly env: Readonly<Record<string, string | undefined>>;
  /** Aborted when the user wants the work to end. */
  readonly interrupt: AbortSignal;
}

/** The streams of this process; SIGINT, SIGTERM and SIGHUP interrupt, a second SIGINT ends at once. */
export function processStreams(): Streams {
  const controller = new AbortController();
  for (const signal of ['SIGINT', 'SIGTERM', 'SIGHUP'] as const) {
    process.once(signal, () => controller.abort());
  }
  return {
    stdout: process.stdout,
    stderr: process.stderr,
    env: process.env,
    interrupt: controller.signal,
  };
}

/** Writes a piece and waits until the stream has taken it; a stream that fails says so by its `error` event. */
export function write(stream: OutStream, piece: string | Uint8Array): Promise<void> {
  return new Promise((resolve) => {
    stream.write(piece, () => resolve());
  });
}
