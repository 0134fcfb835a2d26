/**
 * Follows a folder into which a simulation writes: which snapshots are whole and new.
 *
 * The folder is looked at again and again, because network file systems send no notice of changes; where
 * notices do come they only make the next look come sooner.
 */
import { watch as watchFolder, type FSWatcher } from 'node:fs';
import { readdir, stat } from 'node:fs/promises';
import { join } from 'node:path';
import { SettlemarkError } from '../errors.ts';
import { InputError } from '../errors.ts';
import { asReadError } from '../snapshot/files.ts';
import { describeSnapshot } from '../snapshot/read.ts';
import { inNaturalOrder, isSnapshotName } from '../snapshot/series.ts';
import type { SurveyOptions } from './measure.ts';
import { prepareSnapshots, type PreparedSnapshot } from './prepare.ts';

export interface FollowOptions {
  /** Seconds between two looks. */
  readonly pollSeconds: number;
  /** Seconds for which a file must not have changed before it is taken for whole. */
  readonly stillSeconds: number;
  /** Seconds after which a file that does not fit its layout, and does not grow, is told of. */
  readonly patienceSeconds: number;
  readonly signal: AbortSignal;
}

/** What a look at the folder found. */
export type Sighting =
  | { readonly kind: 'ready'; readonly snapshots: readonly PreparedSnapshot[] }
  /** Nothing new; comes once after each time of work, and once at the start if nothing is there. */
  | { readonly kind: 'idle' }
  /** A file that stopped growing before it fits its layout. */
  | { readonly kind: 'incomplete'; readonly file: string; readonly error: SettlemarkError }
  | { readonly kind: 'gone'; readonly folder: string }
  | { readonly kind: 'back'; readonly folder: string };

interface Seen {
  /** Length and times of change. */
  state: string;
  /** When that state was first seen [ms]. */
  since: number;
  /** In which state the file was given out, or told of. */
  given: string | null;
  told: string | null;
}

/**
 * Gives new and changed snapshots as they become whole, in natural order within one look, until the
 * signal comes. A file is whole when it has not changed for a while and fits its layout; one that is
 * written anew later is given again.
 * @throws InputError `input.notFound`, `input.noPermission` if the folder is not there at the start;
 *   UsageError and InputError of a run file that is wrong
 */
export async function* follow(
  folder: string,
  options: SurveyOptions,
  { pollSeconds, stillSeconds, patienceSeconds, signal }: FollowOptions,
): AsyncGenerator<Sighting> {
  const seen = new Map<string, Seen>();
  const bell = new Bell(signal);
  let isHere = true;
  let wasIdle = false;
  let lastTrouble = '';
  try {
    await readdir(folder).catch((error: unknown) => {
      throw asReadError(folder, error);
    });
    while (!signal.aborted) {
      const names = await readdir(folder).catch(() => null);
      if (names === null) {
        if (isHere) yield { kind: 'gone', folder };
        bell.deafen();
        isHere = false;
      } else {
        if (!isHere) yield { kind: 'back', folder };
        isHere = true;
        bell.listen(folder);
        const files = inNaturalOrder(names.filter(isSnapshotName)).map((name) =>
          join(folder, name),
        );
        const still = await stillFiles(files, seen, stillSeconds);
        const ready: PreparedSnapshot[] = [];
        const prepared = await prepare(files, still, options);
        if (prepared instanceof SettlemarkError) {
          if (prepared.message !== lastTrouble)
            yield { kind: 'incomplete', file: folder, error: prepared };
          lastTrouble = prepared.message;
        }
        for (const snapshot of prepared instanceof SettlemarkError ? [] : prepared) {
          const error = await whyNotWhole(snapshot);
          const parts = snapshot.parts ?? [snapshot.file];
          if (error === null) {
            ready.push(snapshot);
            for (const part of parts) markGiven(seen.get(part));
          } else {
            const entry = seen.get(snapshot.file);
            const isLate = entry && Date.now() - entry.since > 1000 * patienceSeconds;
            if (!isLate || entry.told === entry.state) continue;
            entry.told = entry.state;
            yield { kind: 'incomplete', file: snapshot.file, error };
          }
        }
        if (ready.length > 0) yield { kind: 'ready', snapshots: ready };
        else if (!wasIdle) yield { kind: 'idle' };
        wasIdle = ready.length === 0;
      }
      await bell.wait(1000 * pollSeconds);
    }
  } finally {
    bell.close();
  }
}

/**
 * The snapshots that consist of files that are still; all files are looked at, because times may go by
 * the place in the series. Gives the error of times or a run file that do not fit (yet).
 */
async function prepare(
  files: readonly string[],
  still: readonly string[],
  options: SurveyOptions,
): Promise<PreparedSnapshot[] | SettlemarkError> {
  if (still.length === 0) return [];
  const isStill = new Set(still);
  try {
    return (await prepareSnapshots(files, options)).filter(({ file, parts }) =>
      (parts ?? [file]).some((part) => isStill.has(part)),
    );
  } catch (error) {
    if (error instanceof SettlemarkError) return error;
    throw error;
  }
}

function markGiven(entry: Seen | undefined): void {
  if (entry) entry.given = entry.state;
}

/** Files that have not changed for a while and were not given out as they are. */
async function stillFiles(
  files: readonly string[],
  seen: Map<string, Seen>,
  stillSeconds: number,
): Promise<string[]> {
  const still: string[] = [];
  for (const file of files) {
    const status = await stat(file, { bigint: true }).catch(() => null);
    if (!status?.isFile()) continue;
    const state = `${status.size} ${status.mtimeNs} ${status.ino}`;
    const now = Date.now();
    let entry = seen.get(file);
    if (entry?.state !== state) {
      // What was there before we came is as old as it says.
      const since = entry ? now : Math.min(now, Number(status.mtimeMs));
      entry = { state, since, given: entry?.given ?? null, told: entry?.told ?? null };
      seen.set(file, entry);
    }
    const isStill = now - entry.since >= 1000 * stillSeconds;
    if (isStill && status.size > 0n && entry.given !== state) still.push(file);
  }
  return still;
}

/** Null if a snapshot fits its layout and says all that is needed. */
async function whyNotWhole(snapshot: PreparedSnapshot): Promise<SettlemarkError | null> {
  try {
    await describeSnapshot(snapshot.file, snapshot.options.read ?? {}, 'no values');
    return null;
  } catch (error) {
    if (error instanceof InputError) return error;
    throw error;
  }
}

/** Changes come in swarms: what follows a notice within this is seen in the same look [ms]. */
const SWARM_MS = 100;

/** Waits, and is woken by changes of the folder and by the signal. */
class Bell {
  readonly #signal: AbortSignal;
  #watcher: FSWatcher | null = null;
  #wakeUp: (() => void) | null = null;
  #rang = false;

  constructor(signal: AbortSignal) {
    this.#signal = signal;
    signal.addEventListener('abort', this.#ring);
  }

  readonly #ring = (): void => {
    this.#rang = true;
    this.#wakeUp?.();
  };

  listen(folder: string): void {
    if (this.#watcher !== null) return;
    try {
      this.#watcher = watchFolder(folder, { persistent: false }, this.#ring);
      this.#watcher.on('error', () => this.deafen());
    } catch {
      this.deafen(); // Looking again and again does without notices.
    }
  }

  /** A folder that went away takes its notices with it. */
  deafen(): void {
    this.#watcher?.close();
    this.#watcher = null;
  }

  /** Until the next notice, but at most `ms`. */
  async wait(ms: number): Promise<void> {
    if (!this.#rang) await this.#sleep(ms);
    this.#rang = false;
    await this.#sleep(SWARM_MS);
  }

  async #sleep(ms: number): Promise<void> {
    if (this.#signal.aborted) return;
    await new Promise<void>((resolve) => {
      const timer = setTimeout(resolve, ms);
      this.#wakeUp = () => {
        clearTimeout(timer);
        resolve();
      };
    });
    this.#wakeUp = null;
  }

  close(): void {
    this.#signal.removeEventListener('abort', this.#ring);
    this.deafen();
  }
}
