/** How a command ends that cannot do what it was asked to. */
import { EXIT, exitCodeOf, InterruptedError, SettlemarkError, type ExitCode } from '../errors.ts';
import { asSentence } from './remarks.ts';
import { write, type Streams } from './streams.ts';

/** Ends a command whose errors have all been told. */
export class AlreadyReported extends Error {
  readonly exitCode: ExitCode;
  constructor(exitCode: ExitCode) {
    super('already reported');
    this.exitCode = exitCode;
  }
}

/**
 * Tells on standard error what went wrong and what to do, and returns the exit code for it.
 * Expected errors show their sentence, remedy and code; anything else is a bug and says how to report it.
 */
export async function reportFailure(error: unknown, streams: Streams): Promise<ExitCode> {
  const { stderr, env } = streams;
  if (error instanceof AlreadyReported) return error.exitCode;
  const code = exitCodeOf(error);
  if (error instanceof InterruptedError) {
    await write(stderr, 'settlemark: interrupted\n');
  } else if (error instanceof SettlemarkError) {
    const remedy = error.remedy ? `  → ${asSentence(error.remedy)}\n` : '';
    await write(stderr, `settlemark: ${asEnd(error.message)}\n${remedy}  (${error.code})\n`);
  } else {
    await write(stderr, `${bugText(error)}\n`);
  }
  if (env['SETTLEMARK_DEBUG'] === '1' && error instanceof Error) {
    await write(stderr, `${error.stack ?? String(error)}\n${causes(error)}`);
  }
  return code;
}

/** One paragraph for an error that nobody expected. */
export function bugText(error: unknown): string {
  const what = error instanceof Error ? `${error.name}: ${error.message}` : String(error);
  return (
    `settlemark: internal error, exit code ${EXIT.internal}: ${what}\n` +
    '  → This is a fault of Settlemark, not of your data. Please run the same command again with\n' +
    '    SETTLEMARK_DEBUG=1 set and report what it prints, the command, and the output of\n' +
    '    "settlemark --version" where you got Settlemark from.'
  );
}

function asEnd(message: string): string {
  return /[.!?]$/.test(message) ? message : `${message}.`;
}

function causes(error: Error): string {
  let text = '';
  let cause = error.cause;
  while (cause instanceof Error) {
    text += `caused by ${cause.stack ?? String(cause)}\n`;
    cause = cause.cause;
  }
  return typeof cause === 'string' ? `${text}caused by ${cause}\n` : text; // A worker's stack is text.
}
