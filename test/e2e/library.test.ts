import { execFile } from 'node:child_process';
import { promisify } from 'node:util';
import { expect, it } from 'vitest';
import { ROOT } from './run.ts';

/** Runs an async body that imports the built package by its name, as a program that depends on it does. */
async function program(lines: string[]): Promise<string> {
  const argv = ['-e', `(async () => {\n${lines.join('\n')}\n})()`];
  const { stdout } = await promisify(execFile)(process.execPath, argv, { cwd: ROOT });
  return stdout;
}

it('measures with a crew of its own, and lets the process end', async () => {
  const out = await program([
    "const { measure } = await import('settlemark');",
    "const record = await measure('fixtures/solar/arrow/2000-01-01.arrow', { threads: 2 });",
    'console.log(JSON.stringify(record.whole.particles));',
  ]);
  expect(out).toBe('9\n');
});

it('rejects with the errors it exports', async () => {
  const out = await program([
    "const { InputError, measure, exitCodeOf } = await import('settlemark');",
    "const error = await measure('no.bin').catch((reason) => reason);",
    'console.log(error instanceof InputError, error.code, exitCodeOf(error));',
  ]);
  expect(out).toBe('true input.notFound 3\n');
});

it('is interrupted by a signal', async () => {
  const out = await program([
    "const { makeSnapshot, measure, startCrew, writeSnapshot } = await import('settlemark');",
    "const { mkdtempSync, rmSync } = await import('node:fs');",
    "const { tmpdir } = await import('node:os');",
    "const folder = mkdtempSync(tmpdir() + '/settlemark-library-');",
    'const crew = startCrew(1);',
    "const made = await makeSnapshot({ model: 'plummer', count: 200000, seed: 1 }, crew);",
    "await writeSnapshot(folder + '/big.bin', made, 'raw');",
    'const controller = new AbortController();',
    'setTimeout(() => controller.abort(), 500);',
    'const read = { signal: controller.signal };',
    "const wait = measure(folder + '/big.bin', { exact: true, threads: 2, read });",
    'console.log(await wait.then(() => "done", (error) => error.code));',
    'rmSync(folder, { recursive: true });',
  ]);
  expect(out).toBe('interrupted\n');
});
