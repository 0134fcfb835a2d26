/** What the README shows is what the program prints: its commands are run, in order, and compared. */
import { execFile } from 'node:child_process';
import { mkdirSync, mkdtempSync, readFileSync, rmSync, symlinkSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { promisify } from 'node:util';
import { afterAll, beforeAll, expect, it } from 'vitest';
import { ROOT } from './run.ts';

const run = promisify(execFile);
const README = readFileSync(join(ROOT, 'README.md'), 'utf8');
let folder = '';

beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-readme-'));
  symlinkSync(join(ROOT, 'fixtures'), join(folder, 'fixtures'));
  mkdirSync(join(folder, 'node_modules'));
  symlinkSync(ROOT, join(folder, 'node_modules', 'settlemark'));
});
afterAll(() => rmSync(folder, { recursive: true }));

/** Fences of one kind and what follows them up to the next fence, with the output if that follows. */
interface Example {
  readonly source: string;
  readonly output: string | null;
}

function examples(language: string): Example[] {
  const fences = [...README.matchAll(/^```(\w*)\n([\s\S]*?)^```$/gm)];
  return fences.flatMap(([, kind, source], index) => {
    if (kind !== language) return [];
    const [, next, output] = fences[index + 1] ?? [];
    return [{ source: source.trim(), output: next === 'text' ? output : null }];
  });
}

/** Threads and times are the machine's; with them the wrapping of that line changes. */
function comparable(text: string): string {
  return text
    .replace(/\s+/g, ' ')
    .replace(/\d+ threads?, [\d.]+ m?s/, 'THREADS')
    .trim();
}

it('shows the pages that the commands print', async () => {
  // Files that a user has and the README only names.
  const made = /lantern\.arrow|cold\.arrow|fixtures\//;
  let compared = 0;
  for (const { source, output } of examples('sh')) {
    if (source.includes('\n') || !source.startsWith('settlemark ') || !made.test(source)) continue;
    const argv = [join(ROOT, 'bin/settlemark.js'), ...source.split(' ').slice(1)];
    const { stdout } = await run(process.execPath, argv, { cwd: folder });
    if (output === null) continue;
    expect(comparable(stdout), source).toBe(comparable(output));
    compared++;
  }
  expect(compared).toBe(2);
});

it('has a cold start with the ratio that it says', async () => {
  const argv = [join(ROOT, 'bin/settlemark.js'), 'measure', 'cold.arrow', '--format', 'ndjson'];
  const { stdout } = await run(process.execPath, argv, { cwd: folder });
  const { whole } = JSON.parse(stdout) as { whole: { clausiusRatio: number } };
  // Scaled to it: only rounding is left.
  expect(Math.abs(whole.clausiusRatio - 0.5)).toBeLessThan(1e-12);
});

it('has a program that prints what stands below it', async () => {
  const [{ source, output }] = examples('js');
  writeFileSync(join(folder, 'program.mjs'), source);
  const { stdout } = await run(process.execPath, ['program.mjs'], { cwd: folder });
  // Direct sums: the digits printed do not depend on the machine, apart from the last of the rounding error.
  expect(stdout).toBe(output);
});
