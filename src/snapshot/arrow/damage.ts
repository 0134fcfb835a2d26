/** The two errors of Arrow files that are not what they say. */
import { InputError } from '../../errors.ts';

/** `input.arrowDamaged`: what was found at which place does not agree with the format. */
export function damaged(file: string, place: string, found: string, cause?: unknown): InputError {
  return new InputError(
    'input.arrowDamaged',
    `${file}: ${place} is not valid Arrow: ${found}`,
    'The file is damaged or was not written completely; copy or write it again.',
    cause === undefined ? undefined : { cause },
  );
}

/** `input.arrowCut`: the end is missing. */
export function cut(file: string, found: string, expected: string): InputError {
  return new InputError(
    'input.arrowCut',
    `${file} is cut off: ${found}; expected ${expected}`,
    'Wait until its writer has finished and closed it, or write it again.',
  );
}
