/** Opening files for reading: each way to fail has its own code, and a file that changes meanwhile is noticed. */
import { constants } from 'node:fs';
import { open, type FileHandle } from 'node:fs/promises';
import { InputError, SettlemarkError } from '../errors.ts';

const NONBLOCKING = constants.O_RDONLY | (constants.O_NONBLOCK ?? 0);

/** An open file whose length and time of change were noted when it was opened. */
export interface OpenFile {
  readonly path: string;
  readonly handle: FileHandle;
  /** Length in bytes, above 0. */
  readonly size: number;
  readonly changedNs: bigint;
}

/**
 * Opens a regular file that is not empty. The caller closes `handle`.
 * @throws InputError `input.notFound`, `input.noPermission`, `input.isDirectory`,
 * `input.notAFile` (pipe, device), `input.empty` (0 bytes), `input.unreadable` (anything else)
 */
export async function openInput(path: string): Promise<OpenFile> {
  let handle: FileHandle;
  try {
    // Without O_NONBLOCK, opening a named pipe that nobody writes to would wait for ever.
    handle = await open(path, NONBLOCKING);
  } catch (error) {
    throw asReadError(path, error);
  }
  try {
    const status = await handle.stat({ bigint: true });
    if (status.isDirectory()) throw directory(path);
    if (!status.isFile()) {
      throw new InputError(
        'input.notAFile',
        `${path} is a pipe or device; expected a regular file`,
        'Write it to a file first; an Arrow stream may also come from standard input, as "-".',
      );
    }
    if (status.size === 0n) {
      throw new InputError(
        'input.empty',
        `${path} is empty: 0 bytes; expected a snapshot`,
        'Look whether the simulation ended while writing it, or the disk was full.',
      );
    }
    return { path, handle, size: Number(status.size), changedNs: status.mtimeNs };
  } catch (error) {
    await handle.close();
    throw asReadError(path, error);
  }
}

/**
 * Checks after reading that the file is as long and as old as when it was opened.
 * @throws InputError `input.changed`
 */
export async function assertUnchanged(file: OpenFile): Promise<void> {
  const status = await file.handle.stat({ bigint: true });
  if (Number(status.size) === file.size && status.mtimeNs === file.changedNs) return;
  throw new InputError(
    'input.changed',
    `${file.path} changed while it was read: ${file.size} bytes before, ${status.size} after`,
    'Read it when the simulation has finished writing it.',
  );
}

/**
 * Reads exactly `length` bytes at `position` into `target` from `targetOffset` on.
 * @throws InputError `input.changed` if the file ends before that, `input.unreadable`
 */
export async function readExactly(
  file: OpenFile,
  target: Uint8Array,
  targetOffset: number,
  length: number,
  position: number,
): Promise<void> {
  let done = 0;
  while (done < length) {
    const { bytesRead } = await file.handle
      .read(target, targetOffset + done, length - done, position + done)
      .catch((error: unknown) => {
        throw asReadError(file.path, error);
      });
    if (bytesRead === 0) {
      throw new InputError(
        'input.changed',
        `${file.path} became shorter while it was read: it had ${file.size} bytes and now ends at byte ${position + done}`,
        'Read it when the simulation has finished writing it.',
      );
    }
    done += bytesRead;
  }
}

/** File-system errors as InputError with the code of their cause; all others unchanged. */
export function asReadError(path: string, error: unknown): unknown {
  if (error instanceof SettlemarkError || !(error instanceof Error)) return error;
  const { code, syscall } = error as NodeJS.ErrnoException;
  if (code === undefined || syscall === undefined) return error;
  const options = { cause: error };
  switch (code) {
    case 'ENOENT':
    case 'ENOTDIR':
      return new InputError(
        'input.notFound',
        `${path} does not exist; expected a file`,
        'Check the spelling and the folder.',
        options,
      );
    case 'EACCES':
    case 'EPERM':
      return new InputError(
        'input.noPermission',
        `${path} may not be read: permission denied`,
        'Ask for permission to read it, or copy it.',
        options,
      );
    case 'EISDIR':
      return directory(path, options);
    default:
      return new InputError(
        'input.unreadable',
        `${path} could not be read: ${code} in ${syscall}`,
        'Check the disk or network that it lies on.',
        options,
      );
  }
}

function directory(path: string, options?: ErrorOptions): InputError {
  return new InputError(
    'input.isDirectory',
    `${path} is a folder; expected a file`,
    'Name a file inside that folder.',
    options,
  );
}
