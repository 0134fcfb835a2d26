/** Runs a command of the user's with a verdict on its standard input. */
import { spawn } from 'node:child_process';
import type { Verdict } from '../index.ts';

/** A command that hangs must not keep the watch from going on. */
const SECONDS_AT_MOST = 60;

/**
 * Gives the verdict as one JSON object to a command of the shell and waits for it.
 * @returns what went wrong, in words, or null
 */
export async function runOnVerdict(
  command: string,
  verdict: Partial<Verdict>,
  interrupt: AbortSignal,
): Promise<string | null> {
  return new Promise((resolve) => {
    const child = spawn(command, {
      shell: true,
      // What it prints is no result of ours.
      stdio: ['pipe', 'ignore', 'inherit'],
      timeout: 1000 * SECONDS_AT_MOST,
    });
    const stop = (): void => void child.kill();
    interrupt.addEventListener('abort', stop, { once: true });
    const end = (failure: string | null): void => {
      interrupt.removeEventListener('abort', stop);
      resolve(failure);
    };
    child.on('error', (error) => end(`--on-verdict could not be run: ${error.message}`));
    child.on('close', (code, signal) => {
      if (code === 0 || interrupt.aborted) end(null);
      else if (signal !== null)
        end(`--on-verdict was ended by ${signal} (it may take ${SECONDS_AT_MOST} s)`);
      else end(`--on-verdict ended with exit code ${code}`);
    });
    // A command that does not read is no fault.
    child.stdin.on('error', () => undefined);
    child.stdin.end(`${JSON.stringify(verdict)}\n`);
  });
}
