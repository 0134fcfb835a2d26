/**
 * The error classes of Settlemark, their codes, and the one table from class to exit code.
 *
 * Every expected failure is a {@link SettlemarkError}: `message` says where, what was found and what
 * was expected, in one sentence; `remedy` says what to do; `code` is stable and may be tested.
 * Anything else that is thrown is a bug and ends in exit code 5.
 */

export abstract class SettlemarkError extends Error {
  readonly code: string;
  readonly remedy: string | undefined;

  constructor(code: string, message: string, remedy?: string, options?: ErrorOptions) {
    super(message, options);
    this.code = code;
    this.remedy = remedy;
  }
}

/** The call itself is wrong: unknown option, contradictory options, a value out of its domain. */
export class UsageError extends SettlemarkError {
  override readonly name = 'UsageError';
  constructor(code: `usage.${string}`, message: string, remedy?: string, options?: ErrorOptions) {
    super(code, message, remedy, options);
  }
}

/** A file could not be read, or what is in it is not usable. The message names file and place. */
export class InputError extends SettlemarkError {
  override readonly name = 'InputError';
  constructor(code: `input.${string}`, message: string, remedy?: string, options?: ErrorOptions) {
    super(code, message, remedy, options);
  }
}

/** The question is well put and the input readable, but the input cannot answer the question. */
export class UnanswerableError extends SettlemarkError {
  override readonly name = 'UnanswerableError';
  constructor(
    code: `unanswerable.${string}`,
    message: string,
    remedy?: string,
    options?: ErrorOptions,
  ) {
    super(code, message, remedy, options);
  }
}

/** The user (or a signal) ended the work. */
export class InterruptedError extends SettlemarkError {
  override readonly name = 'InterruptedError';
  constructor(message = 'interrupted') {
    super('interrupted', message);
  }
}

/** Exit codes, the same for every command. `docs/exit-codes.md` explains them to users. */
export const EXIT = {
  done: 0,
  gateFailed: 1,
  usage: 2,
  input: 3,
  unanswerable: 4,
  internal: 5,
  interrupted: 130,
} as const;

export type ExitCode = (typeof EXIT)[keyof typeof EXIT];

/** The one table from error class to exit code. */
export function exitCodeOf(error: unknown): ExitCode {
  if (error instanceof UsageError) return EXIT.usage;
  if (error instanceof InputError) return EXIT.input;
  if (error instanceof UnanswerableError) return EXIT.unanswerable;
  if (error instanceof InterruptedError) return EXIT.interrupted;
  return EXIT.internal;
}
