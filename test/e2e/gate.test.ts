/** The gate as a user has it: files in, exit code out. */
import { existsSync, mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import type { GateResult } from '../../src/index.ts';
import { settlemark } from './run.ts';

let folder: string;
const at = (name: string): string => join(folder, name);
const gate = (...argv: string[]) => settlemark(['gate', ...argv]);

beforeAll(async () => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-gate-'));
  const made = ['make', 'plummer', '--count', '1000', '--seed', '3', '--quiet', '--out'];
  const outcomes = await Promise.all([
    settlemark([...made, at('start.arrow')]),
    settlemark([...made, at('cold.arrow'), '--virial-ratio', '0.7', '--velocity', '1,0,0']),
  ]);
  for (const { code, err } of outcomes) expect({ code, err }).toMatchObject({ code: 0 });
  writeFileSync(at('cut.bin'), Uint8Array.from([1, 2, 3]));
  // The ratio of 1000 bodies has a noise of about 0.025: no bar of ± 2σ fits between these.
  writeFileSync(
    at('narrow.yaml'),
    'rules:\n  - quantity: virialRatio\n    between: [0.5, 1.001]\n  - quantity: virialRatio\n    between: [0.999, 2]\n',
  );
  writeFileSync(at('wrong.yaml'), 'rules:\n  - quantity: virialRato\n    atMost: 1\n');
});
afterAll(() => rmSync(folder, { recursive: true }));

describe('gate', () => {
  it('passes initial conditions in equilibrium, and leaves nothing beside them', async () => {
    const before = readdirSync(folder);
    const { code, out, err } = await gate(at('start.arrow'), '--rules', 'equilibrium');
    expect({ code, err }).toEqual({ code: 0, err: '' });
    expect(out).toMatch(/^passed: all 7 rules\n/);
    expect(out.split('\n').filter((line) => line.length > 80)).toEqual([]);
    expect(readdirSync(folder)).toEqual(before);
  });

  it('fails others with 1, says why on one line of stderr, and writes the reports', async () => {
    const [junit, markdown] = [at('gate.xml'), at('gate.md')];
    const { code, out, err } = await gate(
      ...[at('cold.arrow'), '--rules', 'equilibrium', '--format', 'json'],
      ...['--junit', junit, '--markdown', markdown],
    );
    expect(code).toBe(1);
    expect(err).toBe('settlemark: gate failed: 2 of 7 rules fail (in equilibrium, at rest)\n');
    const result = JSON.parse(out) as GateResult;
    expect(result).toMatchObject({ gate: 'failed', fails: 2, passes: 5, snapshots: 1 });
    expect(result.outcomes[0]).toMatchObject({ outcome: 'fails', name: 'in equilibrium' });
    expect(Math.abs(Number(result.outcomes[0].value) - 0.7)).toBeLessThan(1e-9);
    expect(readFileSync(junit, 'utf8').match(/<failure /g)).toHaveLength(2);
    expect(readFileSync(markdown, 'utf8')).toContain('| **fails** | in equilibrium |');
  });

  it('judges each of several snapshots that are no series', async () => {
    const { code, out } = await gate(
      ...[at('cold.arrow'), at('start.arrow'), '--rules', 'equilibrium', '--no-ledger'],
    );
    expect(code).toBe(1);
    expect(out).toContain('1 of 2 snapshots');
  });

  it('ends with 0 and a warning where it cannot tell, with 1 if strict', async () => {
    const argv = [at('start.arrow'), '--rules', at('narrow.yaml')];
    const plain = await gate(...argv);
    expect(plain.code).toBe(0);
    expect(plain.err).toMatch(/^settlemark: warning: gate passed: .* cannot be told .*\n$/);
    expect((await gate(...argv, '--quiet')).err).toBe('');
    const junit = at('strict.xml');
    const strict = await gate(...argv, '--strict', '--junit', junit);
    expect(strict.code).toBe(1);
    expect(strict.err).toMatch(/^settlemark: gate failed: .*\n$/);
    expect(readFileSync(junit, 'utf8')).toContain('<failure ');
  });

  it('ends with 2 for rules that are wrong, before anything is read', async () => {
    const { code, out, err } = await gate(at('cut.bin'), '--rules', at('wrong.yaml'));
    expect({ code, out }).toEqual({ code: 2, out: '' });
    expect(err).toContain('wrong.yaml, line 2, column 5: rules[0].quantity');
    expect(err).toContain('Did you mean "virialRatio"?');
    expect(err).not.toContain('cut.bin');
    for (const argv of [
      [at('start.arrow')],
      ['--rules', 'settled'],
      [at('start.arrow'), '--rules', 'setled'],
      [at('start.arrow'), '--ruels', 'settled'],
      [at('start.arrow'), '--rules', 'settled', '--junit', at('start.arrow')],
      [at('start.arrow'), '--rules', 'settled', '--junit', at('x'), '--markdown', at('x')],
    ]) {
      const outcome = await gate(...argv);
      expect({ argv, code: outcome.code, out: outcome.out }).toEqual({ argv, code: 2, out: '' });
    }
  });

  it('ends with 3 for a snapshot that cannot be read, and does not call the rest passed', async () => {
    const argv = ['--rules', 'equilibrium', '--no-ledger'];
    const alone = await gate(at('cut.bin'), ...argv, '--junit', at('none.xml'));
    expect(alone.code).toBe(3);
    expect(existsSync(at('none.xml'))).toBe(false);
    const both = await gate(at('start.arrow'), at('cut.bin'), ...argv);
    expect(both.code).toBe(3);
    expect(both.out).toMatch(/^not answered: /);
    expect(both.err.trimEnd().split('\n').at(-1)).toMatch(/^settlemark: gate not answered: 1 of/);
    expect((await gate(at('no.bin'), at('start.arrow'), ...argv)).code).toBe(3);
  });

  it('ends with 4 without snapshots, or with one for a verdict', async () => {
    writeFileSync(at('none.ndjson'), '');
    const none = await gate(at('none.ndjson'), '--rules', 'settled');
    expect(none.code).toBe(4);
    expect(none.err).toContain('unanswerable.emptySeries');
    const one = await gate(at('start.arrow'), '--rules', 'settled');
    expect(one.code).toBe(4);
    expect(one.err).toMatch(
      /^settlemark: gate not answered: .*a verdict needs at least two snapshots/,
    );
  });

  it('measures what rules name', async () => {
    writeFileSync(
      at('more.json'),
      JSON.stringify({
        rules: [
          { quantity: 'lagrangian[0.37]', atLeast: 0.1 },
          { quantity: 'radialToTangential', atLeast: 0.1 },
        ],
      }),
    );
    const { code, out } = await gate(at('start.arrow'), '--rules', at('more.json'));
    expect({ code, head: out.split('\n')[0] }).toEqual({ code: 0, head: 'passed: all 2 rules' });
  });

  it('lists the built-in rules and prints files to start from', async () => {
    const { code, out } = await gate('--list');
    expect(code).toBe(0);
    const names = out.split('\n').flatMap((line) => /^[a-z]+/.exec(line) ?? []);
    expect(names).toEqual(['equilibrium', 'conservation', 'settled', 'collisionless']);
    await gate('--list', 'equilibrium', '--out', at('mine.yaml'));
    const again = await gate(at('start.arrow'), '--rules', at('mine.yaml'));
    expect(again.code).toBe(0);
    expect((await gate('--list', 'equilibrum')).code).toBe(2);
  });
});
