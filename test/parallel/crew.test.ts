/** Crews of worker threads, from the built program: a worker cannot be started from TypeScript. */
import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { pathToFileURL } from 'node:url';
import { afterAll, afterEach, beforeAll, describe, expect, it } from 'vitest';
import { crewOfOne, defaultThreads, startCrew, type Crew } from '../../dist/parallel/crew.js';

/** A task module that does what tests ask of it; written to a file, as workers load it from there. */
const SOURCE = `
const ERRORS = '${new URL('../../dist/errors.js', import.meta.url).href}';
export function square({ out }, takeJob) {
  let done = 0;
  for (let job = takeJob(); job >= 0; job = takeJob()) { out[job] = job * job; done++; }
  return done;
}
export function fail({ at, what }, takeJob) {
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    if (job >= at) throw what === undefined ? new Error('job ' + job + ' has gone wrong') : what;
  }
  return 'fine';
}
export function wait({ gate }, takeJob) {
  takeJob();
  Atomics.wait(gate, 0, 0, 20000);
  return 'waited';
}
export function leave(_argument, takeJob) {
  takeJob();
  process.exit(0);
}
export function unsendable() { return () => 1; }
export async function refuse({ at }, takeJob) {
  const { InputError } = await import(ERRORS);
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    if (job >= at) throw new InputError('input.test', 'job ' + job, 'try ' + job);
  }
}
export async function linger({ out, ms }, takeJob) {
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    out[0]++;
    await new Promise((resolve) => setTimeout(resolve, ms));
    out[1] = Math.max(out[1], out[0]);
    out[0]--;
  }
}
`;

interface Tasks {
  square: (argument: { out: Float64Array }, takeJob: () => number) => number;
  fail: (argument: { at: number; what?: unknown }, takeJob: () => number) => string;
  wait: (argument: { gate: Int32Array }, takeJob: () => number) => string;
  leave: (argument: null, takeJob: () => number) => void;
  unsendable: (argument: unknown, takeJob: () => number) => unknown;
  refuse: (argument: { at: number }, takeJob: () => number) => Promise<void>;
  linger: (argument: { out: Float64Array; ms: number }, takeJob: () => number) => Promise<void>;
  missing: (argument: null, takeJob: () => number) => void;
}

let folder = '';
let tasks: { url: URL; load: () => Promise<Tasks> };
const unhandled: unknown[] = [];
const note = (reason: unknown): void => void unhandled.push(reason);

beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-crew-'));
  const file = join(folder, 'tasks.mjs');
  writeFileSync(file, SOURCE);
  const url = pathToFileURL(file);
  tasks = { url, load: () => import(url.href) as Promise<Tasks> };
  process.on('unhandledRejection', note);
});
afterAll(() => {
  process.off('unhandledRejection', note);
  rmSync(folder, { recursive: true });
});
afterEach(async () => {
  await new Promise((resolve) => setTimeout(resolve, 20)); // time for a rejection to go unhandled
  expect(unhandled).toEqual([]);
});

async function withCrew(threads: number, work: (crew: Crew) => Promise<void>): Promise<void> {
  const crew = startCrew(threads);
  try {
    await work(crew);
  } finally {
    await crew.close();
  }
}

const shared = (count: number) => new Float64Array(new SharedArrayBuffer(count * 8));
const closedGate = () => new Int32Array(new SharedArrayBuffer(4));

describe.each([1, 2, 3, 7])('a crew of %i', (threads) => {
  it('does every job once, and says how many of them each worker did', async () => {
    await withCrew(threads, async (crew) => {
      expect(crew.threads).toBe(threads);
      for (const jobs of [1, 2, 100, 1000]) {
        const out = shared(jobs);
        const done = await crew.run(tasks, 'square', { out }, jobs);
        expect(done.reduce((sum, n) => sum + n, 0)).toBe(jobs);
        expect([...out]).toEqual(Array.from({ length: jobs }, (_, job) => job * job));
        expect(crew.progress()).toEqual({ done: jobs, jobs });
      }
    });
  });

  it('returns from a round without jobs', async () => {
    await withCrew(threads, async (crew) => {
      const done = await crew.run(tasks, 'square', { out: shared(0) }, 0);
      expect(done).toEqual([0]);
    });
  });

  it('rejects with the message of a task that throws, and goes on', async () => {
    await withCrew(threads, async (crew) => {
      for (const at of [0, 5, 99]) {
        const round = crew.run(tasks, 'fail', { at }, 100);
        await expect(round).rejects.toThrow(/job \d+ has gone wrong/);
      }
      await expect(crew.run(tasks, 'fail', { at: 100 }, 100)).resolves.toContain('fine');
      const out = shared(10);
      await crew.run(tasks, 'square', { out }, 10);
      expect(out[9]).toBe(81);
    });
  });

  it('rejects for a function or a module that is not there', async () => {
    await withCrew(threads, async (crew) => {
      await expect(crew.run(tasks, 'missing', null, 3)).rejects.toThrow();
      const url = new URL('./none.mjs', tasks.url);
      const none = { url, load: () => import(url.href) as Promise<Tasks> };
      await expect(crew.run(none, 'square', { out: shared(1) }, 1)).rejects.toThrow(/none\.mjs/);
    });
  });

  it('hands on an error that a user can cause as it is, and that of the lowest job', async () => {
    await withCrew(threads, async (crew) => {
      for (let again = 0; again < 20; again++) {
        const round = crew.run(tasks, 'refuse', { at: 30 }, 100);
        await expect(round).rejects.toMatchObject({
          name: 'InputError',
          code: 'input.test',
          message: 'job 30',
          remedy: 'try 30',
        });
      }
    });
  });

  it('tells its progress up to the last job', async () => {
    await withCrew(threads, async (crew) => {
      const told: number[] = [];
      const watch = { onProgress: (done: number) => void told.push(done) };
      await crew.run(tasks, 'linger', { out: shared(2), ms: 8 }, 60, watch);
      expect(told.length).toBeGreaterThan(1);
      expect(told).toEqual([...told].sort((a, b) => a - b));
      expect(told.at(-1)).toBe(60);
    });
  });

  it('begins no further job once the signal is aborted', async () => {
    await withCrew(threads, async (crew) => {
      const control = new AbortController();
      const watch = { signal: control.signal, onProgress: () => control.abort() };
      const round = crew.run(tasks, 'linger', { out: shared(2), ms: 5 }, 1e6, watch);
      await expect(round).rejects.toMatchObject({ code: 'interrupted' });
      const late = crew.run(tasks, 'linger', { out: shared(2), ms: 5 }, 1e6, watch);
      await expect(late).rejects.toMatchObject({ code: 'interrupted' });
      const out = shared(10);
      await crew.run(tasks, 'square', { out }, 10);
      expect(out[9]).toBe(81);
    });
  });

  it('hands on what its watcher throws', async () => {
    await withCrew(threads, async (crew) => {
      const watch = {
        onProgress: () => {
          throw new Error('enough');
        },
      };
      const round = crew.run(tasks, 'linger', { out: shared(2), ms: 5 }, 1e6, watch);
      await expect(round).rejects.toThrow('enough');
    });
  });

  it('runs rounds that are asked for at once', async () => {
    await withCrew(threads, async (crew) => {
      const outs = [10, 20, 30].map(shared);
      await Promise.all(outs.map((out) => crew.run(tasks, 'square', { out }, out.length)));
      for (const out of outs) expect([...out]).toEqual(Array.from(out, (_, job) => job * job));
    });
  });
});

describe('a crew of workers', () => {
  it('does one round after the other in each worker', async () => {
    await withCrew(2, async (crew) => {
      const out = shared(2);
      await Promise.all([1, 2, 3].map(() => crew.run(tasks, 'linger', { out, ms: 10 }, 1)));
      expect(out[1]).toBe(1); // never two at once
    });
  });

  it('stops the others when one task has failed', async () => {
    await withCrew(2, async (crew) => {
      await expect(crew.run(tasks, 'fail', { at: 3 }, 1e9)).rejects.toThrow(/job \d has gone/);
      // A billion jobs would have taken minutes: the counter was put at its end.
      expect(crew.progress().done).toBe(1e9);
    });
  });

  it('tells what was thrown even if it is no Error', async () => {
    await withCrew(2, async (crew) => {
      await expect(crew.run(tasks, 'fail', { at: 0, what: 'a word' }, 2)).rejects.toThrow('a word');
    });
  });

  it('rejects an open round when it is closed, and any later one', async () => {
    const crew = startCrew(2);
    const gate = closedGate();
    const round = crew.run(tasks, 'wait', { gate }, 2);
    const outcome = round.catch((reason: unknown) => reason);
    await new Promise((resolve) => setTimeout(resolve, 50));
    await crew.close();
    // By name: the built program has an error class of its own.
    await expect(outcome).resolves.toMatchObject({ name: 'InterruptedError', code: 'interrupted' });
    const later = crew.run(tasks, 'square', { out: shared(1) }, 1);
    await expect(later).rejects.toMatchObject({ code: 'interrupted' });
    await crew.close(); // twice is once
  });

  it('rejects an open round when a worker exits', async () => {
    const crew = startCrew(2);
    const round = crew.run(tasks, 'leave', null, 2);
    await expect(round).rejects.toMatchObject({ name: 'InterruptedError' });
    await expect(round).rejects.toThrow(/worker thread ended/);
    await crew.close();
  });

  it('rejects a round whose result cannot be sent', async () => {
    const crew = startCrew(2);
    // What the worker threw cannot be sent either, so that there is no message to ask for.
    await expect(crew.run(tasks, 'unsendable', null, 1)).rejects.toBeTruthy();
    await crew.close();
  });

  it('rejects a round whose argument cannot be sent', async () => {
    const crew = startCrew(2);
    const round = crew.run(tasks, 'unsendable', () => 1, 1);
    await expect(round).rejects.toThrow(/could not be cloned/);
    await crew.close();
  });
});

it('one thread needs no worker, and the machine offers at least one', () => {
  expect(defaultThreads()).toBeGreaterThanOrEqual(1);
  expect(startCrew(1).threads).toBe(1);
  expect(startCrew(0).threads).toBe(1);
  expect(crewOfOne().progress()).toEqual({ done: 0, jobs: 0 });
});
