import {
  chmod,
  mkdir,
  mkdtemp,
  readdir,
  readFile,
  stat,
  symlink,
  writeFile,
} from 'node:fs/promises';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { beforeEach, describe, expect, it } from 'vitest';
import { InterruptedError } from '../../src/errors.ts';
import { writeAtomically } from '../../src/snapshot/atomic.ts';

// No source: common practice of tools that must not leave half a file behind.
let folder: string;
beforeEach(async () => {
  folder = await mkdtemp(join(tmpdir(), 'atomic-'));
});

describe('writeAtomically', () => {
  it('shows the file under its name only when it is whole', async () => {
    const path = join(folder, 'out.bin');
    const result = await writeAtomically(path, async (handle) => {
      await handle.write(Buffer.from('first half, '));
      expect((await readdir(folder)).includes('out.bin')).toBe(false);
      await handle.write(Buffer.from('second half'));
      return 7;
    });
    expect(result).toBe(7);
    expect(await readFile(path, 'utf8')).toBe('first half, second half');
    expect(await readdir(folder)).toEqual(['out.bin']);
  });

  it('leaves the old file and no temporary file when writing fails', async () => {
    const path = join(folder, 'out.bin');
    await writeFile(path, 'old');
    const failure = new InterruptedError();
    await expect(
      writeAtomically(path, async (handle) => {
        await handle.write(Buffer.from('half'));
        throw failure;
      }),
    ).rejects.toBe(failure);
    expect(await readFile(path, 'utf8')).toBe('old');
    expect(await readdir(folder)).toEqual(['out.bin']);
  });

  it('leaves nothing where nothing was when writing fails', async () => {
    await expect(
      writeAtomically(join(folder, 'out.bin'), () => Promise.reject(new TypeError('a bug'))),
    ).rejects.toThrow(TypeError);
    expect(await readdir(folder)).toEqual([]);
  });

  it('keeps the permissions of a file that it replaces and follows a link to it', async () => {
    const path = join(folder, 'out.bin');
    await writeFile(path, 'old');
    await chmod(path, 0o640);
    await symlink(path, join(folder, 'link.bin'));
    await writeAtomically(join(folder, 'link.bin'), (handle) => handle.write('new'));
    expect(await readFile(path, 'utf8')).toBe('new');
    expect((await stat(path)).mode & 0o777).toBe(0o640);
    expect((await readdir(folder)).sort()).toEqual(['link.bin', 'out.bin']);
  });

  it('writes a device directly', async () => {
    await writeAtomically('/dev/null', (handle) => handle.write('gone'));
    expect((await stat('/dev/null')).isFile()).toBe(false);
  });

  it.each([
    ['a folder that does not exist', 'nowhere/out.bin', 'folder does not exist'],
    ['a file taken for a folder', 'plain/out.bin', 'not a folder'],
    ['the name of a folder', 'sub', 'is a folder'],
    ['a name that is too long', 'n'.repeat(300), 'too long'],
  ])('refuses %s with file and reason', async (_, name, reason) => {
    await writeFile(join(folder, 'plain'), '');
    await mkdir(join(folder, 'sub'));
    const path = join(folder, name);
    await expect(writeAtomically(path, () => Promise.resolve())).rejects.toMatchObject({
      code: 'input.cannotWrite',
      message: expect.stringMatching(new RegExp(`${name.slice(0, 20)}.*${reason}`)) as string,
      remedy: expect.any(String) as string,
    });
  });

  // /dev/full refuses every write with ENOSPC (Linux manual page full(4)).
  it('says that the disk is full', async () => {
    await expect(writeAtomically('/dev/full', (handle) => handle.write('x'))).rejects.toMatchObject(
      { code: 'input.cannotWrite', message: expect.stringContaining('disk is full') as string },
    );
  });
});
