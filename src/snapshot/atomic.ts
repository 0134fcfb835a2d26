/** Output files appear whole or not at all: a hidden temporary name in the same folder, then a rename. */
import { randomBytes } from 'node:crypto';
import { open, realpath, rename, stat, unlink, type FileHandle } from 'node:fs/promises';
import { dirname, join } from 'node:path';
import { InputError, SettlemarkError } from '../errors.ts';

/**
 * Writes a file that appears under its final name only when all of it is safely on disk.
 *
 * `write` gets the open handle of a temporary file in the folder of `path`; when it has returned,
 * the file is fsynced and renamed. If anything fails, the temporary file is removed and whatever
 * stood under `path` before is untouched. A symbolic link is followed, the permissions of a file
 * that is replaced are kept, and a device or pipe (`/dev/null`) is written directly.
 *
 * @param path - final name, in a folder that exists
 * @param write - must not close the handle
 * @param check - gets the name of the temporary file when all is written; if it throws, the file does
 * not appear. Not called for a device or pipe
 * @returns what `write` returned
 * @throws InputError `input.cannotWrite` (no permission, no folder, disk full, a folder of that
 * name); errors of `write` that are not the file system's pass unchanged
 */
export async function writeAtomically<T>(
  path: string,
  write: (handle: FileHandle) => Promise<T>,
  check?: (temporary: string) => Promise<void>,
): Promise<T> {
  try {
    const target = await realpath(path).catch((error: unknown) => {
      if (codeOf(error) === 'ENOENT') return path;
      throw error;
    });
    const before = await stat(target).catch((error: unknown) => {
      if (codeOf(error) === 'ENOENT') return null;
      throw error;
    });
    if (before?.isDirectory()) {
      throw new InputError(
        'input.cannotWrite',
        `${path} is a folder; expected the name of a file to write`,
        'Give a file name inside that folder.',
      );
    }
    if (before && !before.isFile()) return await writeDirectly(target, write);
    return await writeAndRename(target, before ? before.mode & 0o777 : null, write, check);
  } catch (error) {
    throw asWriteError(path, error);
  }
}

async function writeDirectly<T>(
  target: string,
  write: (handle: FileHandle) => Promise<T>,
): Promise<T> {
  const handle = await open(target, 'w');
  try {
    return await write(handle);
  } finally {
    await handle.close();
  }
}

async function writeAndRename<T>(
  target: string,
  mode: number | null,
  write: (handle: FileHandle) => Promise<T>,
  check?: (temporary: string) => Promise<void>,
): Promise<T> {
  const folder = dirname(target);
  const temporary = join(folder, `.settlemark-${randomBytes(8).toString('hex')}.partial`);
  const handle = await open(temporary, 'wx');
  try {
    let result: T;
    try {
      if (mode !== null) await handle.chmod(mode);
      result = await write(handle);
      await handle.sync();
    } finally {
      await handle.close();
    }
    await check?.(temporary);
    await rename(temporary, target);
    await syncFolder(folder);
    return result;
  } catch (error) {
    await unlink(temporary).catch(() => undefined);
    throw error;
  }
}

/** Makes the rename itself survive a power cut, where the file system lets a folder be synced. */
async function syncFolder(folder: string): Promise<void> {
  try {
    const handle = await open(folder, 'r');
    try {
      await handle.sync();
    } finally {
      await handle.close();
    }
  } catch {
    // Some file systems refuse it; the file itself is already synced and in place.
  }
}

const REASONS: Readonly<Record<string, readonly [reason: string, remedy: string]>> = {
  EACCES: ['permission denied', 'Choose a folder that you may write to.'],
  EPERM: ['permission denied', 'Choose a folder that you may write to.'],
  EROFS: ['the file system is read-only', 'Choose a folder that you may write to.'],
  ENOSPC: ['the disk is full', 'Free some space or write to another disk.'],
  EDQUOT: ['your quota on this disk is used up', 'Free some space or write to another disk.'],
  EFBIG: ['the file would be larger than allowed here', 'Write to another file system.'],
  ENOENT: ['its folder does not exist', 'Create the folder first.'],
  ENOTDIR: ['its folder is not a folder', 'Correct the path.'],
  ENAMETOOLONG: ['the name is too long', 'Choose a shorter name.'],
};

const WRITING_CALLS = new Set([
  'open',
  'write',
  'writev',
  'fsync',
  'ftruncate',
  'fchmod',
  'close',
  'rename',
  'stat',
  'realpath',
]);

/** Errors of the file system become `input.cannotWrite`; everything else is passed on as it is. */
function asWriteError(path: string, error: unknown): unknown {
  if (error instanceof SettlemarkError || !(error instanceof Error)) return error;
  const { code, syscall } = error as NodeJS.ErrnoException;
  if (code === undefined || syscall === undefined || !WRITING_CALLS.has(syscall)) return error;
  const [reason, remedy] = REASONS[code] ?? [`${code} in ${syscall}`, 'Write somewhere else.'];
  return new InputError('input.cannotWrite', `${path} could not be written: ${reason}`, remedy, {
    cause: error,
  });
}

function codeOf(error: unknown): string | undefined {
  return error instanceof Error ? (error as NodeJS.ErrnoException).code : undefined;
}
