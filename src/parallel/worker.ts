/** Entry of a worker thread: unpacks a round, calls the task function, replies. */
import { parentPort } from 'node:worker_threads';
import type { TaskFunction } from './crew.ts';
import { sendable, type Reply, type Round } from './protocol.ts';

const port = parentPort;
if (!port) throw new Error('parallel/worker is started by a crew, not by hand');
const loaded = new Map<string, Record<string, TaskFunction<unknown, unknown>>>();

let busy: Promise<void> = Promise.resolve();
port.on('message', (round: Round) => {
  // One round after the other: a task that waits for something must not meet the next one.
  busy = busy.then(async () => port.postMessage(await work(round)));
});

async function work(round: Round): Promise<Reply> {
  const { roundId, counter, jobs } = round;
  let latest = -1;
  try {
    let module = loaded.get(round.module);
    if (!module) {
      module = (await import(round.module)) as Record<string, TaskFunction<unknown, unknown>>;
      loaded.set(round.module, module);
    }
    const result = await module[round.name](round.argument, () => {
      const job = Atomics.add(counter, 0, 1);
      if (job >= jobs) return -1;
      latest = job;
      return job;
    });
    return { kind: 'done', roundId, result };
  } catch (error) {
    Atomics.store(counter, 0, jobs); // the round has failed: nobody needs to take another job
    return {
      kind: 'failed',
      roundId,
      job: latest,
      message: error instanceof Error ? error.message : String(error),
      stack: error instanceof Error ? error.stack : undefined,
      expected: sendable(error),
    };
  }
}
