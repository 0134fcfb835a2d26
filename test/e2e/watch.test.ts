/** Watching a folder while another process writes into it: slowly, in pieces, out of order. */
import { spawn } from 'node:child_process';
import { mkdirSync, mkdtempSync, readFileSync, renameSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { makeModel, openLedger, writeSnapshot, type Verdict } from '../../dist/index.js';
import { settlemark, type Outcome } from './run.ts';

const COUNT = 24;
let folder: string;
let run = 0;
/** Snapshots of a sphere in equilibrium whose velocities flicker a little: a run that is settled. */
let bytes: Buffer[] = [];

beforeAll(async () => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-watch-'));
  for (let k = 0; k < COUNT; k++) {
    const particles = await makeModel({ model: 'plummer', count: 200, seed: 1, masses: 'equal' });
    const flicker = 1 + 0.002 * (((k * 7) % 5) - 2);
    for (const v of [particles.vx, particles.vy, particles.vz])
      v.forEach((value, body) => (v[body] = value * flicker));
    const path = join(folder, 'one.arrow');
    await writeSnapshot(path, { ...particles, time: 2 * k }, 'arrow');
    bytes.push(readFileSync(path));
  }
});
afterAll(() => {
  bytes = [];
  rmSync(folder, { recursive: true });
});

function newRun(): string {
  const path = join(folder, `run-${run++}`);
  mkdirSync(path);
  return path;
}
const nameOf = (k: number) => `snap_${String(k).padStart(3, '0')}.arrow`;
const writeAll = (path: string, from = 0, to = COUNT) => {
  for (let k = from; k < to; k++) writeFileSync(join(path, nameOf(k)), bytes[k]);
};
const FAST = ['--poll', '0.2', '--still', '0.2', '--threads', '1', '--softening', '0'];
const linesOf = ({ out }: Outcome) =>
  out
    .trim()
    .split('\n')
    .map((line) => JSON.parse(line) as { file: string; time: number; verdict: Verdict | null });
const pause = (ms: number) => new Promise((resolve) => setTimeout(resolve, ms));

/** A process of its own that writes the files in pieces, the second of each pair before the first. */
const WRITER = `
const { appendFileSync, readFileSync, readdirSync, writeFileSync } = require('node:fs');
const [from, to] = process.argv.slice(1);
const names = readdirSync(from).sort();
const order = names.map((_, k) => k ^ 1).filter((k) => k < names.length);
const pause = (ms) => new Promise((resolve) => setTimeout(resolve, ms));
(async () => {
  for (const k of order) {
    const bytes = readFileSync(from + '/' + names[k]);
    const cut = Math.floor(bytes.length * (0.1 + 0.8 * ((k * 7) % 10) / 10));
    writeFileSync(to + '/' + names[k], bytes.subarray(0, cut));
    await pause(60);
    appendFileSync(to + '/' + names[k], bytes.subarray(cut));
    await pause(20);
  }
})();`;

it('reads each snapshot once it is whole, whatever the order, and ends when the run is settled', async () => {
  const from = newRun();
  const to = newRun();
  writeAll(from);
  const writer = spawn(process.execPath, ['-e', WRITER, from, to], { stdio: 'inherit' });
  const outcome = await settlemark(
    ['watch', to, '--until', 'settled', '--format', 'ndjson', ...FAST],
    undefined,
  );
  writer.kill();
  expect(outcome.code).toBe(0);
  const lines = linesOf(outcome);
  expect(lines.at(-1)?.verdict).toMatchObject({ verdict: 'settled' });
  // Nothing half written was taken: each was measured once, with all its bodies.
  expect(new Set(lines.map(({ file }) => file)).size).toBe(lines.length);
  expect(lines.length).toBeGreaterThanOrEqual(20);
  for (const { file, time } of lines) expect(file).toBe(join(to, nameOf(time / 2)));
  expect(outcome.err).not.toContain('left out');
  expect((await openLedger(join(to, 'settlemark.ledger'))).size).toBe(lines.length);
}, 60_000);

describe('a watch', () => {
  it('ends at a time, in plain lines of time, ratio, radius and verdict', async () => {
    const path = newRun();
    writeAll(path);
    const { code, out } = await settlemark([
      'watch',
      path,
      '--until',
      '20',
      '--no-ledger',
      ...FAST,
    ]);
    expect(code).toBe(0);
    const lines = out.trim().split('\n');
    expect(lines[0]).toMatch(/^time 0 {2}2T\/\|U\| \d\.\d+ ± 0\.\d+ {2}r_h \d\.\d+/);
    expect(lines.at(-1)).toMatch(/^time (20|46) .*/);
  }, 30_000);

  it('is ended by Ctrl-C, cleanly', async () => {
    const path = newRun();
    writeAll(path, 0, 3);
    const { code, out, err } = await settlemark(['watch', path, ...FAST], (child) => {
      child.stdout?.once('data', () => setTimeout(() => child.kill('SIGINT'), 300));
    });
    expect([code, err]).toEqual([130, 'settlemark: interrupted\n']);
    expect(out.trim().split('\n')).toHaveLength(3);
    expect((await openLedger(join(path, 'settlemark.ledger'))).size).toBe(3);
  }, 30_000);

  it('goes on when its folder is moved away and back, and measures what was written anew', async () => {
    const path = newRun();
    writeAll(path, 0, 3);
    let told = '';
    const { code, out, err } = await settlemark(
      ['watch', path, '--until', '8', ...FAST],
      (child) => {
        child.stderr?.on('data', (text: string) => (told += text));
        child.stdout?.once('data', () => {
          void (async () => {
            await pause(500);
            renameSync(path, `${path}-away`);
            while (!told.includes('is gone')) await pause(50);
            renameSync(`${path}-away`, path);
            writeFileSync(join(path, nameOf(2)), bytes[5]); // A restart wrote this one again, for time 10.
          })();
        });
      },
    );
    expect(code).toBe(0);
    expect(err).toContain('is gone; waiting');
    expect(err).toContain('is back');
    expect(out.trim().split('\n').at(-1)).toMatch(/^time 10 /);
  }, 30_000);

  it('gives the verdict to a command when it changes, and says how that failed', async () => {
    const path = newRun();
    writeAll(path);
    const told = join(folder, 'told.ndjson');
    const { code, err } = await settlemark([
      'watch',
      path,
      '--until',
      'settled',
      '--on-verdict',
      `cat >> '${told}'; exit 3`,
      ...FAST,
    ]);
    expect(code).toBe(0);
    const verdicts = readFileSync(told, 'utf8').trim().split('\n');
    const last = JSON.parse(verdicts.at(-1) ?? '') as Verdict;
    expect(last.verdict).toBe('settled');
    expect(last.snapshots).toBeGreaterThanOrEqual(20);
    expect(err).toContain('--on-verdict ended with exit code 3');
  }, 30_000);

  it('ends with the code of the gate once a rule can no longer pass, and tells the command', async () => {
    const path = newRun();
    writeAll(path);
    const rules = join(folder, 'rules.json');
    const rule = { quantity: 'virialRatio', during: 'all', statistic: 'max', atMost: 0.5 };
    writeFileSync(rules, JSON.stringify({ rules: [rule] }));
    const told = join(folder, 'hopeless.ndjson');
    const argv = ['watch', path, '--rules', rules, '--on-verdict', `cat >> '${told}'`, ...FAST];
    const { code, err } = await settlemark(argv);
    expect(code).toBe(1);
    expect(err).toMatch(/^settlemark: gate failed: greatest virialRatio .* can no longer pass/m);
    const last = readFileSync(told, 'utf8').trim().split('\n').at(-1) ?? '';
    expect(JSON.parse(last)).toMatchObject({ hopeless: [{ outcome: 'fails' }] });
    const passing = await settlemark([
      'watch',
      path,
      '--rules',
      'settled',
      '--until',
      '20',
      ...FAST,
    ]);
    expect(passing.code).toBe(0);
  }, 60_000);

  it.each([
    [['--until', 'soon'], 2, 'usage.until'],
    [['--poll', 'x'], 2, '--poll'],
  ])('refuses %j', async (argv, code, text) => {
    const outcome = await settlemark(['watch', newRun(), ...argv]);
    expect(outcome.code).toBe(code);
    expect(outcome.err).toContain(text);
  });

  it('refuses a folder that is not there', async () => {
    const outcome = await settlemark(['watch', join(folder, 'nowhere')]);
    expect(outcome.code).toBe(3);
    expect(outcome.err).toContain('input.notFound');
  });
});
