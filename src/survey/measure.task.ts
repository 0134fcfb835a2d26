/** Whole snapshots as jobs: each is read and measured by one worker alone. */
import { InputError, SettlemarkError, UnanswerableError, UsageError } from '../errors.ts';
import type { MeasureRecord } from '../dynamics/record.ts';
import { crewOfOne, type TakeJob } from '../parallel/crew.ts';
import { measureFile, type SurveyOptions } from './measure.ts';

export interface FilesRound {
  readonly paths: readonly string[];
  /** Without functions and signals, which cannot be sent to a worker. */
  readonly options: SurveyOptions;
}

/** What became of one path: its record, or its error in a form that can be sent. */
export type SentOutcome =
  | { readonly job: number; readonly record: MeasureRecord }
  | { readonly job: number; readonly error: SentError };

export interface SentError {
  readonly kind: 'usage' | 'input' | 'unanswerable';
  readonly code: string;
  readonly message: string;
  readonly remedy: string | undefined;
}

export async function measureFiles(round: FilesRound, takeJob: TakeJob): Promise<SentOutcome[]> {
  const crew = crewOfOne();
  const outcomes: SentOutcome[] = [];
  for (let job = takeJob(); job >= 0; job = takeJob()) {
    try {
      outcomes.push({ job, record: await measureFile(round.paths[job], round.options, crew) });
    } catch (error) {
      outcomes.push({ job, error: sent(error) });
    }
  }
  return outcomes;
}

/** @throws the error itself if it is none that a user's input can cause */
function sent(error: unknown): SentError {
  if (!(error instanceof SettlemarkError)) throw error;
  const { code, message, remedy } = error;
  const kind =
    error instanceof UsageError
      ? 'usage'
      : error instanceof InputError
        ? 'input'
        : error instanceof UnanswerableError
          ? 'unanswerable'
          : null;
  if (kind === null) throw error;
  return { kind, code, message, remedy };
}

/** The error that was sent. */
export function received({ kind, code, message, remedy }: SentError): SettlemarkError {
  switch (kind) {
    case 'usage':
      return new UsageError(code as `usage.${string}`, message, remedy);
    case 'input':
      return new InputError(code as `input.${string}`, message, remedy);
    case 'unanswerable':
      return new UnanswerableError(code as `unanswerable.${string}`, message, remedy);
  }
}
