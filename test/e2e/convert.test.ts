/** `settlemark convert` as a user has it. */
import { spawnSync } from 'node:child_process';
import { mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, expect, it } from 'vitest';
import { BIN, settlemark } from './run.ts';

let folder: string;
beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-convert-'));
});
afterAll(() => rmSync(folder, { recursive: true }));

const run = (...argv: string[]) => settlemark(argv, undefined, folder);

it('goes to raw and back, says what it did, and gives the same record', async () => {
  await run('make', 'plummer', '--count', '3000', '--units', 'pc-kms-msun', '--out', 'a.arrow');
  const there = await run('convert', 'a.arrow', 'b.bin');
  expect(there).toMatchObject({ code: 0, out: '' });
  expect(there.err).toContain('b.bin: 3,000 bodies, raw; read again, the same to the bit');
  expect(there.err).toContain('its layout is b.layout.json');
  expect(await run('convert', 'b.bin', 'c.arrow', '--quiet')).toMatchObject({ code: 0, err: '' });
  expect(readFileSync(join(folder, 'c.arrow'))).toEqual(readFileSync(join(folder, 'a.arrow')));
  const records = await Promise.all(
    ['a.arrow', 'b.bin'].map(async (name) => {
      const { out } = await run('measure', name, '--format', 'json', '--quiet');
      const { whole, settings } = JSON.parse(out) as Record<string, unknown>;
      return { whole, units: (settings as Record<string, unknown>)['units'] };
    }),
  );
  expect(records[1]).toEqual(records[0]);
});

it('tells what would be lost, with exit code 3, and keeps the old file', async () => {
  writeFileSync(join(folder, 'old.bin'), 'old');
  writeFileSync(
    join(folder, 'seven.json'),
    JSON.stringify({
      settlemark: 'layout/1',
      fields: [
        { name: 'mass', type: 'float64' },
        { name: 'position', type: 'float64', width: 3 },
        { name: 'velocity', type: 'float64', width: 3 },
      ],
    }),
  );
  const outcome = await run('convert', 'a.arrow', 'old.bin', '--to-layout', 'seven.json');
  expect(outcome).toMatchObject({ code: 3, out: '' });
  expect(outcome.err).toContain('would not hold the time 0, G ');
  expect(outcome.err).toContain('--drop time,gravity,units');
  expect(readFileSync(join(folder, 'old.bin'), 'utf8')).toBe('old');
  const itself = await run('convert', 'a.arrow', './a.arrow');
  expect(itself).toMatchObject({ code: 2, out: '' });
  expect(itself.err).toContain('(usage.convertTarget)');
});

it('leaves the old file when the disk takes no more', () => {
  writeFileSync(join(folder, 'full.arrow'), 'old');
  const before = readdirSync(folder).sort();
  // A limit on the length of files (POSIX setrlimit, RLIMIT_FSIZE) ends a write as a full disk does.
  const command = `ulimit -f 64; exec "${process.execPath}" "${BIN}" convert a.arrow full.arrow`;
  const { status, stderr } = spawnSync('bash', ['-c', command], { cwd: folder, encoding: 'utf8' });
  expect(status).toBe(3);
  expect(stderr).toMatch(/full\.arrow could not be written: .*\n.*\n {2}\(input\.cannotWrite\)/);
  expect(readFileSync(join(folder, 'full.arrow'), 'utf8')).toBe('old');
  expect(readdirSync(folder).sort()).toEqual(before);
});
