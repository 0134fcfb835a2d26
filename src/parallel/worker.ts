/** Entry of a worker thread: unpacks a round, calls the task function, replies. */
import { parentPort } from 'node:worker_threads';
import type { TaskFunction } from './crew.ts';
import type { Reply, Round } from './protocol.ts';

const port = parentPort;
if (!port) throw new Error('parallel/worker is started by a crew, not by hand');
const loaded = new Map<string, Record<string, TaskFunction<unknown, unknown>>>();

port.on('message', (round: Round) => {
  void work(round).then((reply) => port.postMessage(reply));
});

async function work(round: Round): Promise<Reply> {
  const { roundId, counter, jobs } = round;
  try {
    let module = loaded.get(round.module);
    if (!module) {
      module = (await import(round.module)) as Record<string, TaskFunction<unknown, unknown>>;
      loaded.set(round.module, module);
    }
    const result = await module[round.name](round.argument, () => {
      const job = Atomics.add(counter, 0, 1);
      return job < jobs ? job : -1;
    });
    return { kind: 'done', roundId, result };
  } catch (error) {
    Atomics.store(counter, 0, jobs); // the round has failed: nobody needs to take another job
    return {
      kind: 'failed',
      roundId,
      message: error instanceof Error ? error.message : String(error),
      stack: error instanceof Error ? error.stack : undefined,
    };
  }
}
