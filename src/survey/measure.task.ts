/** Whole snapshots as jobs: each is read and measured by one worker alone. */
import type { MeasureRecord } from '../dynamics/record.ts';
import { crewOfOne, type TakeJob } from '../parallel/crew.ts';
import { sendable, type SentError } from '../parallel/protocol.ts';
import { measurePrepared } from './measure.ts';
import type { PreparedSnapshot } from './prepare.ts';

export interface FilesRound {
  /** Without functions and signals, which cannot be sent to a worker. */
  readonly snapshots: readonly PreparedSnapshot[];
}

/** What became of one path: its record, or its error in a form that can be sent. */
export type SentOutcome =
  | { readonly job: number; readonly record: MeasureRecord }
  | { readonly job: number; readonly error: SentError };

export async function measureFiles(round: FilesRound, takeJob: TakeJob): Promise<SentOutcome[]> {
  const crew = crewOfOne();
  const outcomes: SentOutcome[] = [];
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    try {
      outcomes.push({ job, record: await measurePrepared(round.snapshots[job], {}, crew) });
    } catch (error) {
      const expected = sendable(error);
      if (expected === null) throw error;
      outcomes.push({ job, error: expected });
    }
  }
  return outcomes;
}
