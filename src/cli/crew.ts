/** A crew for the time of one command, which ends when the user wants the work to end. */
import { InterruptedError, startCrew, type Crew } from '../index.ts';

/**
 * Runs `work` with a crew and closes it after.
 * @throws InterruptedError once `interrupt` is aborted
 */
export async function withCrew<T>(
  threads: number | undefined,
  interrupt: AbortSignal,
  work: (crew: Crew) => Promise<T>,
): Promise<T> {
  const crew = startCrew(threads);
  const stop = (): void => void crew.close();
  interrupt.addEventListener('abort', stop, { once: true });
  try {
    return await work(crew);
  } finally {
    interrupt.removeEventListener('abort', stop);
    await crew.close();
  }
}

/** Lets signals and timers have their turn. @throws InterruptedError if one of them was the user's */
export async function turn(interrupt: AbortSignal): Promise<void> {
  await new Promise((resolve) => setImmediate(resolve));
  if (interrupt.aborted) throw new InterruptedError();
}
