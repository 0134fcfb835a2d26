/** The program as a function of arguments and streams that returns an exit code. */
import { CommanderError } from 'commander';
import { EXIT, InputError, UsageError, type ExitCode } from '../errors.ts';
import { reportFailure } from './failure.ts';
import { buildProgram } from './program.ts';
import { processStreams, type Streams } from './streams.ts';

/**
 * Runs one command.
 * @param argv - arguments after the program's name
 * @returns the exit code; never rejects and never ends the process
 */
export async function main(
  argv: readonly string[],
  streams: Streams = processStreams(),
): Promise<ExitCode> {
  let closed: NodeJS.ErrnoException | null = null;
  const own = new AbortController();
  const interrupt = AbortSignal.any([streams.interrupt, own.signal]);
  const onError = (error: NodeJS.ErrnoException): void => {
    closed ??= error;
    own.abort();
  };
  streams.stdout.on('error', onError);
  streams.stderr.on('error', () => undefined); // Nobody is left to tell.
  let code: ExitCode = EXIT.done;
  let failure: unknown = null;
  try {
    const program = buildProgram({ ...streams, interrupt }, (result) => (code = result));
    await program.parseAsync([...argv], { from: 'user' });
  } catch (error) {
    failure = error;
  }
  await new Promise((resolve) => setImmediate(resolve)); // Lets a failed write report itself.
  const closedBy = closed as NodeJS.ErrnoException | null;
  if (closedBy !== null) {
    // The reader of our output has seen enough: no failure of ours.
    return closedBy.code === 'EPIPE' ? EXIT.done : reportFailure(outputError(closedBy), streams);
  }
  if (failure instanceof CommanderError) {
    if (failure.exitCode === 0) return EXIT.done;
    if (failure.code === 'commander.help') return EXIT.usage; // No command: the help was printed.
    return reportFailure(usageError(failure), streams);
  }
  return failure === null ? code : reportFailure(failure, streams);
}

/** commander's error as ours: same sentence, its suggestion as remedy. */
function usageError(error: CommanderError): UsageError {
  const [sentence, suggestion] = error.message
    .replace(/^error: /, '')
    .split('\n')
    .map((line) => line.trim());
  const kind = error.code.replace(/^commander\./, '');
  const remedy =
    suggestion?.replace(/^\(|\)$/g, '') ?? 'See settlemark --help, or settlemark help COMMAND.';
  return new UsageError(`usage.${kind}`, sentence, remedy, { cause: error });
}

function outputError(error: NodeJS.ErrnoException): InputError {
  const reason = error.code === 'ENOSPC' ? 'the disk is full' : (error.code ?? error.message);
  return new InputError(
    'input.cannotWrite',
    `standard output could not be written: ${reason}`,
    'Send the output somewhere else.',
    { cause: error },
  );
}
