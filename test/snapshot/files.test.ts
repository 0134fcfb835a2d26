import { execFile } from 'node:child_process';
import { join } from 'node:path';
import { promisify } from 'node:util';
import { expect, it } from 'vitest';
import { InputError, InterruptedError } from '../../src/errors.ts';
import { asReadError, openInput } from '../../src/snapshot/files.ts';
import { newFolder } from './raw/samples.ts';

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
