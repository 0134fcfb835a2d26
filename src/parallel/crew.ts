/**
 * A crew runs one function of a task module over numbered jobs, on worker threads or in place.
 *
 * A call to {@link Crew.run} is a *round*: every worker gets the same argument and takes job numbers
 * from a shared counter until none is left, then replies once with what its function returned. Work
 * is cut by the data and never by the number of threads, and a job writes only to its own part of
 * shared memory, so results do not depend on who did which job.
 */
import { availableParallelism } from 'node:os';
import { Worker } from 'node:worker_threads';
import { InterruptedError } from '../errors.ts';
import { received, type Reply, type Round } from './protocol.ts';

/** Gives the next job number, or -1 when none is left. */
export type TakeJob = () => number;

/** A function of a task module: takes the round's argument, does jobs, returns what it counted. */
export type TaskFunction<A, R> = (argument: A, takeJob: TakeJob) => R | Promise<R>;

/** A task module as its owner names it: where a worker finds it, and how to load it in place. */
export interface TaskModule<M> {
  readonly url: URL;
  readonly load: () => Promise<M>;
}

/** Names of the functions of module M that fit {@link TaskFunction}. */
type TaskNames<M> = {
  [K in keyof M]: M[K] extends (argument: never, takeJob: TakeJob) => unknown ? K : never;
}[keyof M] &
  string;
type ArgumentOf<F> = F extends (argument: infer A, takeJob: TakeJob) => unknown ? A : never;
type ResultOf<F> = F extends (...parameters: never[]) => infer R ? Awaited<R> : never;

/** What the caller of a long round may want of it while it runs. */
export interface RoundWatch {
  /** Once it is aborted no further job begins, and the round rejects with InterruptedError. */
  readonly signal?: AbortSignal | undefined;
  /** Called now and then with the number of jobs done, and when all are. */
  readonly onProgress?: (done: number) => void;
}

export interface Crew {
  /** Number of threads that work; 1 means in place, on the calling thread. */
  readonly threads: number;
  /**
   * Runs one round and resolves with each worker's return value, in no meaningful order.
   * @param jobs - number of jobs; job numbers run from 0 to jobs - 1
   * @throws what the task function threw, of several failures that of the lowest job: errors that
   *   a user's input can cause as they are, others as an Error with the worker's stack in `cause`;
   *   InterruptedError if the crew was closed meanwhile or the watch's signal aborted
   */
  run<M, K extends TaskNames<M>>(
    module: TaskModule<M>,
    name: K,
    argument: ArgumentOf<M[K]>,
    jobs: number,
    watch?: RoundWatch,
  ): Promise<ResultOf<M[K]>[]>;
  /** Jobs taken so far in the first round under way, else in the last one, and its jobs: for progress. */
  progress(): { readonly done: number; readonly jobs: number };
  /** Ends the workers; open rounds reject with InterruptedError. */
  close(): Promise<void>;
}

/** The number of threads that the machine offers this process. */
export function defaultThreads(): number {
  return availableParallelism();
}

/** A round of a few jobs is over sooner than a turn of the event loop is. */
const TURN_EVERY_MS = 10;
let turnedAt = -Infinity;
/** What task modules gave that were loaded in place: asking for one again takes some turns too. */
const loadedInPlace = new WeakMap<TaskModule<unknown>, unknown>();

/** A crew of one: the calling thread does all jobs in order. */
export function crewOfOne(): Crew {
  // A counter for each round, since rounds may be asked for before earlier ones have begun.
  let latest = { next: 0, jobs: 0 };
  let closed = false;
  return {
    threads: 1,
    async run<M, K extends TaskNames<M>>(
      module: TaskModule<M>,
      name: K,
      argument: ArgumentOf<M[K]>,
      jobs: number,
      watch: RoundWatch = {},
    ) {
      if (performance.now() - turnedAt > TURN_EVERY_MS) {
        // Signals and timers get their turn: all else in a round happens on this thread.
        await new Promise((resolve) => setImmediate(resolve));
        turnedAt = performance.now();
      }
      if (closed) throw new InterruptedError();
      const loaded = (loadedInPlace.get(module) as M | undefined) ?? (await module.load());
      loadedInPlace.set(module, loaded);
      const task = loaded[name] as TaskFunction<unknown, ResultOf<M[K]>>;
      const round = { next: 0, jobs };
      latest = round;
      const takeJob = (): number => {
        if (round.next > 0) watch.onProgress?.(round.next);
        if (watch.signal?.aborted === true) throw new InterruptedError();
        return round.next < jobs ? round.next++ : -1;
      };
      return [await task(argument, takeJob)];
    },
    progress: () => ({ done: latest.next, jobs: latest.jobs }),
    close: () => {
      closed = true;
      return Promise.resolve();
    },
  };
}

/** Starts a crew; its workers live until {@link Crew.close}. */
export function startCrew(threads = defaultThreads()): Crew {
  return threads <= 1 ? crewOfOne() : new WorkerCrew(threads);
}

class WorkerCrew implements Crew {
  readonly threads: number;
  private readonly workers: Worker[] = [];
  private readonly pending = new Map<number, Pending>();
  private nextRound = 1;
  private latest: Pick<Round, 'counter' | 'jobs'> = { counter: new Int32Array(1), jobs: 0 };
  private ended: Error | null = null;

  constructor(threads: number) {
    this.threads = threads;
    const ending = import.meta.url.endsWith('.ts') ? '.ts' : '.js';
    const entry = new URL(`./worker${ending}`, import.meta.url);
    for (let i = 0; i < threads; i++) {
      const worker = new Worker(entry, { execArgv: [] }); // not the caller's --input-type and the like
      worker.on('message', (reply: Reply) => this.settle(reply));
      worker.on('error', (error) => this.end(error));
      worker.on('messageerror', (error) => this.end(error));
      worker.on('exit', () => this.end(new InterruptedError('a worker thread ended early')));
      worker.unref();
      this.workers.push(worker);
    }
  }

  run<M, K extends TaskNames<M>>(
    module: TaskModule<M>,
    name: K,
    argument: ArgumentOf<M[K]>,
    jobs: number,
    watch: RoundWatch = {},
  ): Promise<ResultOf<M[K]>[]> {
    if (this.ended) return Promise.reject(this.ended);
    const roundId = this.nextRound++;
    const counter = new Int32Array(new SharedArrayBuffer(4));
    const wanted = Math.min(this.threads, Math.max(1, jobs));
    const round: Round = { roundId, module: module.url.href, name, argument, jobs, counter };
    this.latest = { counter, jobs };
    const settled = new Promise<unknown[]>((resolve, reject) => {
      const pending = { round: this.latest, results: [], wanted, failure: null, resolve, reject };
      for (let i = 0; i < wanted; i++) {
        this.workers[i].postMessage(round); // throws for what cannot be sent, at the first worker
        this.workers[i].ref();
      }
      this.pending.set(roundId, pending);
    }) as Promise<ResultOf<M[K]>[]>;
    return watch.signal || watch.onProgress ? watched(settled, round, wanted, watch) : settled;
  }

  progress(): { done: number; jobs: number } {
    const [under] = this.pending.values();
    const { counter, jobs } = under?.round ?? this.latest;
    return { done: Math.min(Atomics.load(counter, 0), jobs), jobs };
  }

  async close(): Promise<void> {
    this.end(new InterruptedError());
    await Promise.all(this.workers.map((worker) => worker.terminate()));
  }

  /** One reply a worker and round; the round settles when all its workers have replied. */
  private settle(reply: Reply): void {
    const round = this.pending.get(reply.roundId);
    if (!round) return;
    if (reply.kind === 'done') round.results.push(reply.result);
    else if (round.failure === null || reply.job < round.failure.job) {
      const { job, message, stack, expected } = reply;
      const error = expected ? received(expected) : new Error(message, { cause: stack });
      round.failure = { job, error };
    }
    if (--round.wanted > 0) return;
    this.pending.delete(reply.roundId);
    if (this.pending.size === 0) for (const worker of this.workers) worker.unref();
    if (round.failure) round.reject(round.failure.error);
    else round.resolve(round.results);
  }

  private end(reason: Error): void {
    if (this.ended) return;
    this.ended = reason;
    for (const round of this.pending.values()) round.reject(reason);
    this.pending.clear();
  }
}

interface Pending {
  readonly round: Pick<Round, 'counter' | 'jobs'>;
  readonly results: unknown[];
  wanted: number;
  failure: { readonly job: number; readonly error: Error } | null;
  readonly resolve: (results: unknown[]) => void;
  readonly reject: (reason: Error) => void;
}

const PROGRESS_EVERY_MS = 50;

/** The same round, with its progress told and an end to it when the signal says so. */
async function watched<T>(
  settled: Promise<T>,
  { counter, jobs }: Round,
  workers: number,
  { signal, onProgress }: RoundWatch,
): Promise<T> {
  const failures: unknown[] = [];
  const stop = (): void => void Atomics.store(counter, 0, jobs);
  const tell = (): void => {
    try {
      // Each worker is still at the job that it took last.
      onProgress?.(Math.max(0, Math.min(Atomics.load(counter, 0), jobs) - workers));
    } catch (error) {
      failures.push(error);
      stop();
    }
  };
  const timer = onProgress ? setInterval(tell, PROGRESS_EVERY_MS) : undefined;
  signal?.addEventListener('abort', stop, { once: true });
  if (signal?.aborted === true) stop();
  try {
    const results = await settled;
    if (failures.length > 0) throw failures[0];
    if (signal?.aborted !== true) onProgress?.(jobs);
    if (signal?.aborted === true) throw new InterruptedError();
    return results;
  } finally {
    clearInterval(timer);
    signal?.removeEventListener('abort', stop);
  }
}
