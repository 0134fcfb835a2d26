import { execFile } from 'node:child_process';
import { join } from 'node:path';
import { promisify } from 'node:util';
import { expect, it } from 'vitest';
import { InputError, InterruptedError } from '../../src/errors.ts';
import { asReadError, closeInput, openInput, readExactly } from '../../src/snapshot/files.ts';
import { newFolder, put } from './raw/samples.ts';

// Source: names of errors, POSIX.1-2017 <errno.h>. Made by hand, since root may read everything.
it.each([
  ['EACCES', 'input.noPermission', 'permission denied'],
  ['EPERM', 'input.noPermission', 'permission denied'],
  ['ENOENT', 'input.notFound', 'does not exist'],
  ['ENOTDIR', 'input.notFound', 'does not exist'],
  ['EISDIR', 'input.isDirectory', 'is a folder'],
  ['EIO', 'input.unreadable', 'EIO in read'],
])('turns %s into %s', (code, ours, text) => {
  const cause = Object.assign(new Error(code), { code, syscall: 'read' });
  const error = asReadError('run/a.bin', cause);
  expect(error).toBeInstanceOf(InputError);
  expect(error).toMatchObject({ code: ours, cause, remedy: expect.any(String) as string });
  expect((error as Error).message).toMatch(new RegExp(`^run/a.bin .*${text}`));
});

it('passes on what is not an error of the file system', () => {
  for (const error of [new TypeError('a bug'), new InterruptedError(), 'text']) {
    expect(asReadError('a.bin', error)).toBe(error);
  }
});

it('does not wait for a named pipe that nobody writes to', async () => {
  const pipe = join(await newFolder(), 'pipe');
  await promisify(execFile)('mkfifo', [pipe]);
  await expect(openInput(pipe)).rejects.toMatchObject({
    code: 'input.notAFile',
    message: expect.stringContaining('pipe') as string,
  });
});

it('keeps the bytes of small files that are open at once apart, and gives those of each', async () => {
  const folder = await newFolder();
  const named = (name: string, length: number, value: number) =>
    put(folder, name, Buffer.alloc(length, value));
  const paths = [await named('a', 1000, 1), await named('b', 3000, 2), await named('c', 500, 3)];
  for (let again = 0; again < 3; again++) {
    const open = await Promise.all(paths.map(openInput));
    const bytes = open.map(({ size }) => Buffer.alloc(size));
    for (const [i, file] of open.entries()) await readExactly(file, bytes[i], 0, file.size, 0);
    expect(bytes.map((one) => [one.length, new Set(one).size, one[0]])).toEqual([
      [1000, 1, 1],
      [3000, 1, 2],
      [500, 1, 3],
    ]);
    for (const file of open) await closeInput(file);
  }
});

it('says that a small file became shorter while it was read', async () => {
  const path = await put(await newFolder(), 'a.bin', Buffer.alloc(100));
  const file = await openInput(path);
  const cut = { ...file, whole: new Uint8Array(60) };
  await readExactly(cut, new Uint8Array(20), 0, 20, 40);
  await expect(readExactly(cut, new Uint8Array(21), 0, 21, 40)).rejects.toMatchObject({
    code: 'input.changed',
    message: `${path} became shorter while it was read: it had 100 bytes and now ends at byte 60`,
  });
  await closeInput(file);
});
