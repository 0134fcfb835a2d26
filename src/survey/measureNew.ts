/** Many snapshots with a ledger: only those that it does not know are measured. */
import type { Crew } from '../parallel/crew.ts';
import type { Source } from './fingerprint.ts';
import type { Ledger } from './ledger.ts';
import { measureMany, type FileOutcome } from './many.ts';
import type { SurveyOptions } from './measure.ts';
import type { PreparedSnapshot } from './prepare.ts';

/** Snapshots that are looked up before the workers get some: enough for several rounds of theirs. */
const LOOKED_UP = 256;
/** Fewer small files at a time than without a ledger: what is at the workers is what a crash loses. */
const FILES_A_WORKER = 4;
/** Files that are open at a time. */
const OPEN_FILES = 16;

/**
 * {@link measureMany} with records of the ledger where there are such; new ones are kept in it as
 * soon as they are made, so that a crash loses no more than what is at the workers.
 */
export async function* measureNew(
  snapshots: readonly PreparedSnapshot[],
  options: SurveyOptions,
  crew: Crew,
  ledger: Ledger,
): AsyncGenerator<FileOutcome> {
  for (let at = 0; at < snapshots.length; at += LOOKED_UP) {
    const some = snapshots.slice(at, at + LOOKED_UP);
    const known = await inGroups(some, (snapshot) => ledger.find(snapshot));
    const unknown = some.filter((_, k) => known[k] === null);
    const before = await inGroups(unknown, (snapshot) => ledger.look(snapshot));
    const measured = keeping(
      measureMany(unknown, options, crew, FILES_A_WORKER),
      unknown,
      before,
      ledger,
    );
    for (const [k, { file }] of some.entries()) {
      const record = known[k];
      if (record !== null) yield { file, record, error: null, isKnown: true };
      else {
        const next = await measured.next();
        if (next.done === true) throw new Error(`nothing came of ${file}`);
        yield { ...next.value, isKnown: false };
      }
    }
  }
}

async function* keeping(
  outcomes: AsyncIterable<FileOutcome>,
  snapshots: readonly PreparedSnapshot[],
  before: readonly (readonly Source[] | null)[],
  ledger: Ledger,
): AsyncGenerator<FileOutcome> {
  let k = 0;
  for await (const outcome of outcomes) {
    if (outcome.record !== null) await ledger.keep(snapshots[k], before[k], outcome.record);
    k++;
    yield outcome;
  }
}

async function inGroups<T, R>(items: readonly T[], of: (item: T) => Promise<R>): Promise<R[]> {
  const results: R[] = [];
  for (let at = 0; at < items.length; at += OPEN_FILES) {
    results.push(...(await Promise.all(items.slice(at, at + OPEN_FILES).map(of))));
  }
  return results;
}
