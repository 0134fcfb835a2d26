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

describe('settlemark.json in the folder of a run', () => {
  beforeAll(() => {
    // Positions before masses, so that nothing fits without the layout that the run file names.
    put('run/one.dat', [0.5, 0, 0, 0, Math.SQRT1_2, 0, 1, -0.5, 0, 0, 0, -Math.SQRT1_2, 0, 1]);
    put('run/forms/moved.json', {
      settlemark: 'layout/1',
      fields: [
        { name: 'position', type: 'float64', width: 3 },
        { name: 'velocity', type: 'float64', width: 3 },
        { name: 'weight', type: 'float64' },
      ],
    });
    put('run/settlemark.json', {
      settlemark: 'run/1',
      layout: 'forms/moved.json',
      columns: { mass: 'weight' },
      gravity: 2,
      softening: 0.75,
      centre: 'mass',
      threads: 1,
    });
  });

  it('decides what the command line leaves open, and the record says so', async () => {
    const [record] = await records(at('run'));
    expect(record.runFile).toBe(at('run/settlemark.json'));
    // Two unit masses 1 apart, G = 2, ε = 0.75: U = −2/√(1 + 0.5625) = −1.6.
    expect(record.whole.potential).toBeCloseTo(-1.6, 14);
    expect(record.settings).toMatchObject({
      gravity: { value: 2, from: 'run file' },
      softening: { value: { length: 0.75, kernel: 'plummer' }, from: 'run file' },
      centre: { value: 'mass', from: 'run file' },
      error: { from: 'default' },
      units: { value: 'natural', from: 'default' },
    });
    expect(record.engine.threads).toBe(1);
  });

  it('yields to the command line and goes before the snapshot', async () => {
    put('arrow/settlemark.json', { gravity: 3, units: 'henon' });
    const made = ['make', 'plummer', '--count', '30', '--units', 'pc-kms-msun', '--quiet', '--out'];
    await settlemark([...made, at('arrow/a.arrow')]);
    // henon means G = 1 and contradicts 3.
    expect(await failure(2, 'measure', at('arrow'))).toContain('(usage.gravityClash)');
    put('arrow/settlemark.json', { gravity: 3 });
    const [over] = await records(at('arrow'));
    expect(over.settings.gravity).toEqual({ value: 3, from: 'run file' });
    expect(over.settings.units).toEqual({ value: 'pc-kms-msun', from: 'snapshot' });
    const [option] = await records(at('arrow'), '--units', 'henon', '--threads', '2');
    // Units on the command line speak last: they set G.
    expect(option.settings.gravity).toEqual({ value: 1, from: 'option' });
    expect(option.engine.threads).toBe(2);
    const [none] = await records(at('arrow'), '--no-run-file');
    expect(none.settings.gravity.from).toBe('snapshot');
    expect(none.runFile).toBeNull();
  });

  it('of another place may be named', async () => {
    const elsewhere = put('elsewhere/other.json', { gravity: 5 });
    const [record] = await records(at('arrow/a.arrow'), '--run-file', elsewhere);
    expect(record.settings.gravity).toEqual({ value: 5, from: 'run file' });
    expect(record.runFile).toBe(elsewhere);
  });

  it('is named on the page, and used by describe', async () => {
    const page = await settlemark(['measure', at('run/one.dat')], undefined, folder);
    expect(page.out).toContain('G = 2 (run file)');
    expect(page.out).toContain('with the run file');
    expect(page.out.split('\n').filter((line) => line.length > 80)).toEqual([]);
    const { code, out } = await settlemark(['describe', at('run/one.dat')]);
    expect(code).toBe(0);
    expect(out).toMatch(/weight +mass/);
  });

  it('that is wrong stops the command before anything is measured', async () => {
    put('wrong/settlemark.json', '{\n  "sofetning": 0.1\n}');
    put('wrong/one.bin', PAIR);
    const err = await failure(2, 'measure', at('pair.bin'), at('wrong'));
    expect(err).toContain(`${at('wrong/settlemark.json')}, line 2, column 3`);
    expect(err).toContain('"softening"');
    expect(err).toContain('(usage.runFileUnknownKey)');
    expect(await failure(2, 'describe', at('wrong/one.bin'))).toContain(
      '(usage.runFileUnknownKey)',
    );
    const missing = await failure(3, 'measure', at('pair.bin'), '--run-file', at('none.json'));
    expect(missing).toContain('(input.notFound)');
  });
});

describe('some of the bodies', () => {
  beforeAll(() => {
    // A pair of stars on a circular orbit, 5 from a heavy body of dark matter at rest.
    put('kinds/a.bin', [...PAIR, 50, 5, 0, 0, 0, 0, 0]);
    put('kinds/layout.json', {
      settlemark: 'layout/1',
      components: [
        { name: 'stars', count: 2 },
        { name: 'dark', count: 1 },
      ],
      fields: ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'].map((name) => ({ name, type: 'float64' })),
    });
  });

  it('are chosen on the command line, and page and record say so', async () => {
    const file = at('kinds/a.bin');
    const [record] = await records(file, '--only', 'stars', '--within', '2', '--about', '0,0,0');
    expect(record.whole).toMatchObject({
      particles: 2,
      kinetic: expect.closeTo(0.5, 12) as number,
    });
    expect(record.selection).toEqual({
      only: 'stars',
      group: null,
      within: 2,
      about: [0, 0, 0],
      of: 3,
    });
    const { out, err } = await settlemark(['measure', file, '--only', 'stars']);
    expect(out).toContain('selected of 3: component stars');
    expect(out + err).toContain('(selection)');
    expect(await failure(3, 'measure', file, '--only', 'star')).toContain('mean "stars"');
    expect(await failure(4, 'measure', file, '--within', '1', '--about', '99,0,0')).toContain(
      '(unanswerable.emptySelection)',
    );
  });

  it('are chosen by the run file, over which the command line goes', async () => {
    put('kinds/settlemark.json', { only: 'dark' });
    const [record] = await records(at('kinds/a.bin'));
    expect(record.selection?.only).toBe('dark');
    const [other] = await records(at('kinds/a.bin'), '--only', 'stars');
    expect(other.selection?.only).toBe('stars');
    put('kinds/settlemark.json', { onyl: 'dark' });
    expect(await failure(2, 'measure', at('kinds/a.bin'))).toContain('mean "only"');
  });
});

describe('times and ranges of a series', () => {
  beforeAll(() => {
    for (const k of [1, 2, 3, 10]) put(`series/s_${k}.bin`, PAIR);
  });

  const timesOf = async (...argv: string[]) =>
    (await records(at('series'), ...argv)).map(({ time }) => time);

  it('come from an interval, a name, a table, or the run file', async () => {
    expect(await timesOf()).toEqual([null, null, null, null]);
    expect(await timesOf('--interval', '0.5', '--start', '2')).toEqual([2, 2.5, 3, 3.5]);
    expect(await timesOf('--time-pattern', 's_{time}.bin', '--from', '2', '--to', '9')).toEqual([
      2, 3,
    ]);
    const table = put('clock.csv', 'file,time\ns_1.bin,9\ns_2.bin,8\ns_3.bin,7\ns_10.bin,6\n');
    expect(await timesOf('--times', table, '--every', '2')).toEqual([6, 8]);
    put('series/settlemark.json', { timePattern: 's_{step}.bin', interval: 0.1, to: 0.3 });
    const [first, ...others] = await records(at('series'));
    expect(first.settings.time).toEqual({ value: 0.1, from: 'run file', source: 'file name' });
    expect(others.map(({ time }) => time)).toEqual([0.2, 0.1 * 3]);
    // The command line decides about times altogether.
    expect(await timesOf('--times', table, '--to', '7')).toEqual([6, 7]);
  });

  it('serve track, which says what is wrong with a table', async () => {
    rmSync(at('series/settlemark.json'), { force: true });
    const argv = ['track', at('series'), '--format', 'json', '--quiet'];
    const timeless = await settlemark(argv);
    expect({ code: timeless.code, out: timeless.out }).toEqual({ code: 4, out: '' });
    const table = put('part.csv', 'file,time\ns_1.bin,0\ns_2.bin,1\ns_3.bin,2\ngone.bin,3\n');
    const { code, out } = await settlemark([...argv, '--times', table]);
    expect(code).toBe(0);
    const { remarks } = JSON.parse(out) as { remarks: { code: string; text: string }[] };
    const told = remarks.filter((remark) => remark.code.startsWith('time.'));
    expect(told.map((remark) => remark.code)).toEqual(['time.missing', 'time.noFile']);
    expect(told[0].text).toContain('s_10.bin is not in');
    expect(told[1].text).toContain('gone.bin');
  });

  it('that cannot be are usage errors before anything is measured', async () => {
    const clash = ['measure', at('series'), '--interval', '1', '--time-pattern', 's_{time}.bin'];
    expect(await failure(2, ...clash)).toContain('(usage.times)');
    expect(await failure(2, 'track', at('series'), '--from', '2', '--to', '1')).toContain(
      '(usage.range)',
    );
    expect(await failure(3, 'track', at('series'), '--times', at('none.csv'))).toContain(
      '(input.notFound)',
    );
    expect(await failure(4, 'measure', at('series'), '--from', '2')).toContain(
      '(unanswerable.noTime)',
    );
  });
});
