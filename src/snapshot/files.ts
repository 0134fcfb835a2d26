/** Opening files for reading: each way to fail has its own code, and a file that changes meanwhile is noticed. */
import * as fs from 'node:fs';
import { promisify } from 'node:util';
import { isMainThread } from 'node:worker_threads';
import { InputError, SettlemarkError } from '../errors.ts';

const NONBLOCKING = fs.constants.O_RDONLY | (fs.constants.O_NONBLOCK ?? 0);

/** Files up to this are read in one call when they are opened. */
const WHOLE_BYTES = 2 ** 20;
/** No call may ask for 2 GiB. */
const BYTES_A_CALL = 2 ** 30;

/** An open file whose length and time of change were noted when it was opened. It can be sent to a worker. */
export interface OpenFile {
  readonly path: string;
  readonly descriptor: number;
  /** Length in bytes, above 0. */
  readonly size: number;
  readonly changedNs: bigint;
  /** The bytes of a small file, as many as there were; null for others. */
  readonly whole: Uint8Array | null;
}

const open = promisify(fs.open);
const stat = promisify(fs.stat) as (path: string, o: { bigint: true }) => Promise<fs.BigIntStats>;
const readdir = promisify(fs.readdir) as (path: string) => Promise<string[]>;
const readFile = promisify(fs.readFile) as (fd: number, o: 'utf8') => Promise<string>;
const fstat = promisify(fs.fstat) as (fd: number, o: { bigint: true }) => Promise<fs.BigIntStats>;
const close = promisify(fs.close);
const read = (fd: number, into: Uint8Array, offset: number, length: number, position: number) =>
  new Promise<number>((resolve, reject) => {
    fs.read(fd, into, offset, length, position, (error, bytes) =>
      error ? reject(error) : resolve(bytes),
    );
  });

/**
 * The main thread must hear the user while a disk or network is slow, so that helpers read for it.
 * A worker reads by itself, which takes a tenth of the time where the file is in memory.
 */
export const disk = isMainThread
  ? { open, stat, fstat, read, readdir, readFile, close }
  : {
      open: fs.openSync,
      stat: fs.statSync as (path: string, o: { bigint: true }) => fs.BigIntStats,
      fstat: fs.fstatSync as (fd: number, o: { bigint: true }) => fs.BigIntStats,
      read: fs.readSync as (...parameters: Parameters<typeof read>) => number,
      readdir: fs.readdirSync as (path: string) => string[],
      readFile: fs.readFileSync as (fd: number, o: 'utf8') => string,
      close: fs.closeSync,
    };

/** Length of a regular file; null for anything else and for what cannot be looked at. */
export async function fileBytes(path: string): Promise<number | null> {
  try {
    const status = await disk.stat(path, { bigint: true });
    return status.isFile() ? Number(status.size) : null;
  } catch {
    return null;
  }
}

/** Runs `work` on an open file and closes it; errors as {@link openInput}. */
export async function withInput<T>(path: string, work: (file: OpenFile) => Promise<T>): Promise<T> {
  const file = await openInput(path);
  try {
    return await work(file);
  } finally {
    await closeInput(file);
  }
}

/**
 * Opens a regular file that is not empty. The caller closes it with {@link closeInput}.
 * @throws InputError `input.notFound`, `input.noPermission`, `input.isDirectory`,
 * `input.notAFile` (pipe, device), `input.empty` (0 bytes), `input.unreadable` (anything else)
 */
export async function openInput(path: string): Promise<OpenFile> {
  let descriptor: number;
  try {
    // Without O_NONBLOCK, opening a named pipe that nobody writes to would wait for ever.
    descriptor = await disk.open(path, NONBLOCKING);
  } catch (error) {
    throw asReadError(path, error);
  }
  try {
    const status = await disk.fstat(descriptor, { bigint: true });
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
    const size = Number(status.size);
    const whole = size <= WHOLE_BYTES ? await readWhole(descriptor, size) : null;
    return { path, descriptor, size, changedNs: status.mtimeNs, whole };
  } catch (error) {
    await disk.close(descriptor);
    throw asReadError(path, error);
  }
}

/** Closes what {@link openInput} opened; its bytes may not be used any more. */
export async function closeInput(file: OpenFile): Promise<void> {
  if (file.whole !== null) spare = new Uint8Array(file.whole.buffer);
  await disk.close(file.descriptor);
}

/** Room for the next small file: new memory costs more than the reading. */
let spare: Uint8Array | null = null;

async function readWhole(descriptor: number, size: number): Promise<Uint8Array> {
  const room = spare !== null && spare.length >= size ? spare : new Uint8Array(size);
  spare = null;
  let done = 0;
  while (done < size) {
    const bytes = await disk.read(descriptor, room, done, size - done, done);
    if (bytes === 0) break;
    done += bytes;
  }
  return room.subarray(0, done);
}

/**
 * Checks after reading that the file is as long and as old as when it was opened.
 * @throws InputError `input.changed`
 */
export async function assertUnchanged(file: OpenFile): Promise<void> {
  const status = await disk.fstat(file.descriptor, { bigint: true });
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
  const { whole } = file;
  if (whole !== null) {
    if (position + length > whole.length) throw shorter(file, whole.length);
    target.set(whole.subarray(position, position + length), targetOffset);
    return;
  }
  let done = 0;
  while (done < length) {
    let bytes: number;
    try {
      const [at, wanted] = [targetOffset + done, Math.min(length - done, BYTES_A_CALL)];
      bytes = await disk.read(file.descriptor, target, at, wanted, position + done);
    } catch (error) {
      throw asReadError(file.path, error);
    }
    if (bytes === 0) throw shorter(file, position + done);
    done += bytes;
  }
}

function shorter(file: OpenFile, end: number): InputError {
  return new InputError(
    'input.changed',
    `${file.path} became shorter while it was read: it had ${file.size} bytes and now ends at byte ${end}`,
    'Read it when the simulation has finished writing it.',
  );
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
