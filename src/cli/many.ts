/** Several inputs, one after the other: one that fails does not keep the others from being done. */
import { EXIT, InputError, UnanswerableError, type ExitCode } from '../index.ts';
import { AlreadyReported, reportFailure } from './failure.ts';
import type { Streams } from './streams.ts';

/**
 * Does the work for each path. An error of one input is told on standard error and the next is done.
 * @param before - exit code of what went wrong before, if anything
 * @returns the exit code of the first error, 0 without one
 * @throws what is not an error of one input: wrong usage, an interruption, a bug; AlreadyReported if
 *   no path could be done, so that no empty result is written
 */
export async function eachPath(
  paths: readonly string[],
  streams: Streams,
  work: (path: string) => Promise<void>,
  before: ExitCode = EXIT.done,
): Promise<ExitCode> {
  let code = before;
  let done = 0;
  for (const path of paths) {
    try {
      await work(path);
      done++;
    } catch (error) {
      if (!(error instanceof InputError || error instanceof UnanswerableError)) throw error;
      const failed = await reportFailure(error, streams);
      if (code === EXIT.done) code = failed;
    }
  }
  if (done === 0) throw new AlreadyReported(code);
  return code;
}
