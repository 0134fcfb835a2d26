/** Runs as a user keeps them: their units, run files, times, and parts of them. */
import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { dirname, join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/index.ts';
import { settlemark } from './run.ts';

const folder = mkdtempSync(join(tmpdir(), 'settlemark-runs-'));
afterAll(() => rmSync(folder, { recursive: true }));

const at = (name: string): string => join(folder, name);
/** Writes text, or a JSON of anything else, or bodies as raw float64 mass x y z vx vy vz. */
function put(name: string, content: string | object | readonly number[]): string {
  mkdirSync(dirname(at(name)), { recursive: true });
  const bytes = Array.isArray(content)
    ? new Uint8Array(Float64Array.from(content as number[]).buffer)
    : typeof content === 'string'
      ? content
      : JSON.stringify(content);
  writeFileSync(at(name), bytes);
  return at(name);
}
/** Two unit masses 1 apart on a circular orbit for G = 1: T = 1/2, U = −1. */
const PAIR = [1, 0.5, 0, 0, 0, Math.SQRT1_2, 0, 1, -0.5, 0, 0, 0, -Math.SQRT1_2, 0];

async function records(...argv: string[]): Promise<MeasureRecord[]> {
  const { code, out, err } = await settlemark([
    'measure',
    ...argv,
    '--format',
    'ndjson',
    '--quiet',
  ]);
  expect({ code, err }).toEqual({ code: 0, err: '' });
  return out
    .trim()
    .split('\n')
    .map((line) => JSON.parse(line) as MeasureRecord);
}

/** Runs a command that must fail: nothing on stdout, a remedy, no stack. Returns its stderr, unwrapped. */
async function failure(expected: number, ...argv: string[]): Promise<string> {
  const { code, out, err } = await settlemark(argv);
  expect({ code, out, err }).toMatchObject({ code: expected, out: '' });
  expect(err).toContain('→');
  expect(err).not.toMatch(/\n +at /);
  return err;
}

describe('--units FILE.json', () => {
  beforeAll(() => {
    put('pair.bin', PAIR);
    put('units.json', { length: 'kpc', mass: '1e10 Msun', velocity: 'km/s' });
  });

  it('sets G, and the page has its symbols', async () => {
    const [record] = await records(at('pair.bin'), '--units', at('units.json'));
    // G of kpc-kms-msun in docs/record.md, 4.300917270036e-6, times 1e10.
    expect(record.settings.gravity.from).toBe('option');
    expect(record.settings.gravity.value / 43009.17270036 - 1).toBeLessThan(1e-12);
    expect(record.whole.potential / -43009.17270036 - 1).toBeLessThan(1e-12);
    expect(record.settings.units).toMatchObject({
      value: 'own',
      from: 'option',
      system: { mass: '1e10 Msun', length: 'kpc', velocity: 'km/s' },
    });
    const { out } = await settlemark(['measure', at('pair.bin'), '--units', at('units.json')]);
    expect(out).toContain('units own (option)');
    expect(out).toContain('energies in (1e10 Msun) (km/s)²');
    expect(out.split('\n').filter((line) => line.length > 80)).toEqual([]);
  });

  it('must agree with --gravity to 1e-4', async () => {
    const argv = [at('pair.bin'), '--units', at('units.json'), '--gravity'];
    expect((await records(...argv, '43010'))[0].settings.gravity.value).toBe(43010);
    expect(await failure(2, 'measure', ...argv, '43020')).toContain('(usage.gravityClash)');
  });

  it('is kept by an Arrow file', async () => {
    const made = ['make', 'plummer', '--count', '20', '--out', at('own.arrow'), '--quiet'];
    expect(await settlemark([...made, '--units', at('units.json')])).toMatchObject({ code: 0 });
    const [stated] = await records(at('own.arrow'));
    expect(stated.settings.units.from).toBe('snapshot');
    const [given] = await records(at('own.arrow'), '--units', at('units.json'));
    expect(stated.settings.units.system).toEqual(given.settings.units.system);
    expect(stated.settings.gravity.value).toBe(given.settings.gravity.value);
    expect(stated.whole).toEqual(given.whole);
  });

  it.each([
    ['nowhere.json', undefined, 'input.notFound'],
    ['text.json', 'kpc', 'input.units'],
    ['twice.json', { length: 1, mass: 1, velocity: 1, time: 1 }, 'input.units'],
  ])('%s ends with 3', async (name, content, errorCode) => {
    if (content !== undefined) put(name, content);
    const err = await failure(3, 'measure', at('pair.bin'), '--units', at(name));
    expect(err).toContain(at(name));
    expect(err).toContain(`(${errorCode})`);
  });

  it('a name that is none says that files end in .json', async () => {
    const err = await failure(2, 'measure', at('pair.bin'), '--units', 'units.txt');
    expect(err).toMatch(/\.json/);
    expect(err).toContain('(usage.units)');
  });
});
