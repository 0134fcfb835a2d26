/** Small text files that people write: settings, units, tables of times. */
import { constants } from 'node:fs';
import { InputError } from '../errors.ts';
import { asReadError, disk } from './files.ts';

/** Settings are some lines; anything larger is another file named by mistake. */
export const SETTINGS_BYTES = 1 << 20;

/**
 * Reads a regular file as UTF-8, without a byte order mark.
 * @param what - what was expected in it, for messages
 * @throws InputError `input.notFound`, `input.noPermission`, `input.isDirectory`, `input.notAFile`,
 * `input.tooLarge` (beyond `mostBytes`), `input.unreadable`
 */
export async function readTextFile(
  path: string,
  what: string,
  mostBytes = SETTINGS_BYTES,
): Promise<string> {
  try {
    // Without O_NONBLOCK, opening a named pipe that nobody writes to would wait for ever.
    const descriptor = await disk.open(path, constants.O_RDONLY | (constants.O_NONBLOCK ?? 0));
    try {
      const status = await disk.fstat(descriptor, { bigint: true });
      if (status.isDirectory()) {
        throw new InputError(
          'input.isDirectory',
          `${path} is a folder; expected a file with ${what}`,
          'Name a file inside that folder.',
        );
      }
      if (!status.isFile()) {
        throw new InputError(
          'input.notAFile',
          `${path} is a pipe or device; expected a regular file with ${what}`,
          'Write it to a file first.',
        );
      }
      if (status.size > mostBytes) {
        throw new InputError(
          'input.tooLarge',
          `${path} has ${status.size} bytes; expected a small file with ${what}`,
          'Look whether another file was meant.',
        );
      }
      return (await disk.readFile(descriptor, 'utf8')).replace(/^\uFEFF/, '');
    } finally {
      await disk.close(descriptor);
    }
  } catch (error) {
    throw asReadError(path, error);
  }
}
