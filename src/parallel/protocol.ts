/** Messages between a crew and its workers: one round out, exactly one reply back, failure included. */
import { InputError, SettlemarkError, UnanswerableError, UsageError } from '../errors.ts';

export interface Round {
  readonly roundId: number;
  /** URL of the task module. */
  readonly module: string;
  readonly name: string;
  /** Cloned to each worker; big arrays in it lie on shared memory and are not copied. */
  readonly argument: unknown;
  readonly jobs: number;
  /** One shared number: the next job to take. Its high value after a failure stops the others. */
  readonly counter: Int32Array;
}

export type Reply =
  | { readonly kind: 'done'; readonly roundId: number; readonly result: unknown }
  | {
      readonly kind: 'failed';
      readonly roundId: number;
      /** The job that failed; -1 if none had been taken. */
      readonly job: number;
      readonly message: string;
      readonly stack: string | undefined;
      /** Set if the error is one that a user's input can cause. */
      readonly expected: SentError | null;
    };

/** An error that a user's input can cause, in a form that can be sent; its cause stays behind. */
export interface SentError {
  readonly kind: 'usage' | 'input' | 'unanswerable';
  readonly code: string;
  readonly message: string;
  readonly remedy: string | undefined;
}

/** The error to send, or null for one that no input causes. */
export function sendable(error: unknown): SentError | null {
  if (!(error instanceof SettlemarkError)) return null;
  const { code, message, remedy } = error;
  const kind =
    error instanceof UsageError
      ? 'usage'
      : error instanceof InputError
        ? 'input'
        : error instanceof UnanswerableError
          ? 'unanswerable'
          : null;
  return kind === null ? null : { kind, code, message, remedy };
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
