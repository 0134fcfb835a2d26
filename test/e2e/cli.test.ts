import { mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import type { MeasureRecord, SnapshotDescription } from '../../src/index.ts';
import { settlemark } from './run.ts';

let folder: string;
const at = (name: string): string => join(folder, name);
const numbers = (name: string, values: number[]): void =>
  writeFileSync(at(name), new Uint8Array(Float64Array.from(values).buffer));

beforeAll(async () => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-e2e-'));
  const made = ['make', 'plummer', '--count', '2000', '--seed', '5', '--out'];
  for (const name of ['shoal.bin', 'shoal.arrow']) {
    const { code, err } = await settlemark([...made, at(name)]);
    expect({ name, code, err }).toMatchObject({ code: 0 });
  }
  numbers('cut.bin', [1, 0, 0]);
  numbers('nan.bin', [1, 0, 0, 0, 0, 0, 0, 1, 1, NaN, 0, 0, 0, 0]);
  numbers('pair.bin', [1, 0, 0, 0, 0, 0.5, 0, 1, 1, 0, 0, 0, -0.5, 0]);
});

afterAll(() => rmSync(folder, { recursive: true }));

const parse = (text: string): MeasureRecord => JSON.parse(text) as MeasureRecord;

describe('measure', () => {
  it('prints a page, and nothing on stderr', async () => {
    const { code, out, err } = await settlemark(['measure', at('shoal.bin')]);
    expect({ code, err }).toEqual({ code: 0, err: '' });
    expect(out).toContain('2T/|U|');
    expect(out).not.toContain('\u001b');
    expect(out.split('\n').filter((line) => line.length > 80)).toEqual([]);
  });

  it('prints one JSON object with the keys that others build on', async () => {
    const { code, out } = await settlemark(['measure', at('shoal.bin'), '--format', 'json']);
    expect(code).toBe(0);
    const record = parse(out);
    expect(Object.keys(record)).toEqual(
      expect.arrayContaining(
        (
          'record file time settings frame whole bound lagrangian boundLagrangian halfMassRadius ' +
          'virialRadius coreRadius velocityDispersion effectiveNumber momentOfInertia ' +
          'momentOfInertiaRate crossingTime relaxation engine remarks'
        ).split(' '),
      ),
    );
    // Noise of a Plummer sphere: 0.80/√N = 0.018 for 2000 bodies; five times that is never left.
    expect(Math.abs((record.whole.virialRatio ?? 0) - 1)).toBeLessThan(0.09);
  });

  it('measures raw and Arrow of the same bodies alike', async () => {
    const argv = ['measure', at('shoal.bin'), at('shoal.arrow'), '--format', 'ndjson', '--quiet'];
    const { code, out, err } = await settlemark(argv);
    expect({ code, err }).toEqual({ code: 0, err: '' });
    const [raw, arrow] = out.trim().split('\n').map(parse);
    expect([raw.file, arrow.file]).toEqual([at('shoal.bin'), at('shoal.arrow')]);
    expect(arrow.whole).toEqual(raw.whole);
  });

  it('gives an array for several, goes on after one that fails, and ends with its code', async () => {
    const argv = ['measure', at('cut.bin'), at('no.bin'), at('shoal.bin'), '--format', 'json'];
    const { code, out, err } = await settlemark(argv);
    expect(code).toBe(3);
    expect((JSON.parse(out) as MeasureRecord[]).map(({ file }) => file)).toEqual([at('shoal.bin')]);
    for (const name of ['cut.bin', 'no.bin']) expect(err).toContain(at(name));
  });

  it('reads a folder of snapshots with its layout, and says so on stderr unless quiet', async () => {
    const argv = ['measure', 'fixtures/solar/raw', '--format', 'ndjson'];
    const { code, out, err } = await settlemark(argv);
    expect(code).toBe(0);
    expect(out.trim().split('\n')).toHaveLength(147);
    expect(err).toContain('layout.found');
    expect((await settlemark([...argv, '--quiet'])).err).toBe('');
  });

  it('gives the same bits for any number of threads', async () => {
    const argv = ['measure', at('shoal.bin'), '--format', 'json', '--threads'];
    const [one, three] = await Promise.all(
      ['1', '3'].map(async (n) => parse((await settlemark([...argv, n])).out)),
    );
    expect(three.whole).toEqual(one.whole);
    expect(three.bound).toEqual(one.bound);
    expect(three.lagrangian).toEqual(one.lagrangian);
    expect(three.coreRadius).toBe(one.coreRadius);
  });

  it('takes the options that settle the physics', async () => {
    const argv = ['measure', at('pair.bin'), '--format', 'json'];
    const softening = ['--softening', '0.75', '--softening-kernel', 'plummer', '--gravity', '2'];
    const more = ['--centre', 'mass', '--fractions', '0.3', '--coulomb-factor', '0.4', '--exact'];
    const { code, out } = await settlemark([...argv, ...softening, ...more]);
    expect(code).toBe(0);
    const record = parse(out);
    // Closed form: two unit masses 1 apart, G = 2, ε = 0.75: U = −2/√(1 + 0.5625) = −1.6.
    expect(record.whole.potential).toBeCloseTo(-1.6, 14);
    // W/U = r²/(r² + ε²) = 0.64.
    expect(record.whole.clausius).toBeCloseTo(-1.024, 14);
    // T = 2 · ½ · 0.25; 2T/|W| = 0.5/1.024.
    expect(record.whole.clausiusRatio).toBeCloseTo(0.48828125, 13);
    expect(record.settings.fractions.value).toEqual([0.1, 0.3, 0.5]);
    expect(record.settings.centre).toEqual({ value: 'mass', from: 'option' });
  });

  it('writes a file that names its format by its ending', async () => {
    const { code, out } = await settlemark(['measure', at('shoal.bin'), '--out', at('a.json')]);
    expect({ code, out }).toEqual({ code: 0, out: '' });
    expect(parse(readFileSync(at('a.json'), 'utf8')).file).toBe(at('shoal.bin'));
  });
});

describe('bad input ends with 3 and names file, finding and remedy', () => {
  it.each([
    ['cut.bin', 'input.'],
    ['nan.bin', 'input.notFinite'],
    ['nowhere.bin', 'input.notFound'],
  ])('%s', async (name, errorCode) => {
    const { code, out, err } = await settlemark(['measure', at(name)]);
    expect({ code, out }).toEqual({ code: 3, out: '' });
    expect(err).toContain(at(name));
    expect(err).toContain(`(${errorCode}`);
    expect(err).toContain('→');
    expect(err).not.toMatch(/\n +at /);
  });

  it('a folder without snapshots ends with 4', async () => {
    const empty = mkdtempSync(at('empty-'));
    const { code, err } = await settlemark(['measure', empty]);
    expect(code).toBe(4);
    expect(err).toContain('(unanswerable.emptySeries)');
  });
});

describe('--out', () => {
  it('leaves nothing when no snapshot could be measured', async () => {
    const { code } = await settlemark(['measure', at('cut.bin'), '--out', at('none.json')]);
    expect(code).toBe(3);
    expect(readdirSync(folder).filter((name) => /none|partial/.test(name))).toEqual([]);
  });

  it('does not touch an older file when it fails', async () => {
    writeFileSync(at('old.json'), 'old');
    await settlemark(['measure', at('nan.bin'), '--out', at('old.json')]);
    expect(readFileSync(at('old.json'), 'utf8')).toBe('old');
  });

  it('refuses a folder that does not exist, and one of the snapshots', async () => {
    const far = await settlemark(['measure', at('pair.bin'), '--out', at('no/such/a.json')]);
    expect(far.code).toBe(3);
    expect(far.err).toContain('(input.cannotWrite)');
    const own = await settlemark(['measure', at('pair.bin'), '--out', at('pair.bin')]);
    expect(own.code).toBe(2);
    expect(own.err).toContain('(usage.outIsInput)');
    expect(readFileSync(at('pair.bin'))).toHaveLength(112);
  });
});

describe('describe', () => {
  it('tells what is in raw and Arrow files, as a page and as JSON', async () => {
    const page = await settlemark([
      'describe',
      at('shoal.arrow'),
      'fixtures/solar/raw/2000-01-01.bin',
    ]);
    expect({ code: page.code, err: page.err }).toEqual({ code: 0, err: '' });
    expect(page.out).toContain('2,000 bodies');
    expect(page.out).toContain('9 bodies');
    const json = await settlemark(['describe', at('shoal.bin'), '--format', 'json']);
    const found = JSON.parse(json.out) as SnapshotDescription;
    expect([found.format, found.count, found.bytes]).toEqual(['raw', 2000, 112000]);
    expect(found.columns.map(({ name }) => name)).toEqual('mass x y z vx vy vz'.split(' '));
  });

  it('ends with 3 for a file that is not there', async () => {
    const { code, out } = await settlemark(['describe', at('nowhere.bin')]);
    expect({ code, out }).toEqual({ code: 3, out: '' });
  });
});

describe('make', () => {
  it('scales to the ratio wanted, and moves', async () => {
    const made = ['make', 'hernquist', '--count', '800', '--cut', '20', '--masses', 'salpeter'];
    const more = ['--virial-ratio', '0.3', '--softening', '0.05', '--offset=-5,0,1', '--quiet'];
    const { code, out, err } = await settlemark([...made, ...more, '--out', at('cold.arrow')]);
    expect({ code, out, err }).toEqual({ code: 0, out: '', err: '' });
    const measured = await settlemark(['measure', at('cold.arrow'), '--format', 'json']);
    const record = parse(measured.out);
    expect(record.settings.softening).toMatchObject({ value: { length: 0.05 }, from: 'snapshot' });
    // Direct sums on both sides; the offset of 5 costs two digits.
    expect(record.whole.clausiusRatio).toBeCloseTo(0.3, 11);
    expect(record.frame.centreOfMass[0]).toBeCloseTo(-5, 12);
  });

  it('makes the same bytes from the same seed', async () => {
    const made = ['make', 'uniform', '--count', '50', '--seed', '9', '--out'];
    await settlemark([...made, at('u1.bin')]);
    await settlemark([...made, at('u2.bin')]);
    expect(readFileSync(at('u1.bin')).equals(readFileSync(at('u2.bin')))).toBe(true);
  });

  it('makes two spheres of two components with binaries, the same on any number of threads', async () => {
    const made = ['make', 'hernquist', '--count', '5000', '--name', 'stars', '--rotation', '0.5'];
    const halo = 'model=dehnen,inner-slope=0.5,count=6000,mass=9,scale-radius=4,name=halo';
    const binaries = ['--binaries', '0.2', '--semi-major-axis', '1e-5,1e-3', '--escapers', '0.01'];
    const orbit = ['--companion', 'mass=0.5', '--separation', '40', '--pericentre', '2'];
    const all = [...made, '--second', halo, ...binaries, ...orbit, '--virial-ratio', '1', '--out'];
    const { code, err } = await settlemark([...all, at('one.arrow'), '--threads', '1']);
    expect(code).toBe(0);
    expect(err).toContain(
      '19,500 bodies (5,000 stars, 6,000 halo, 2,500 companion, 6,000 companion',
    );
    expect(err).toContain('2T/|U| 1');
    await settlemark([...all, at('two.arrow'), '--threads', '2']);
    expect(readFileSync(at('one.arrow')).equals(readFileSync(at('two.arrow')))).toBe(true);
    const { out } = await settlemark(['describe', at('one.arrow')]);
    expect(out).toContain('component');
    const raw = await settlemark([...made, '--second', halo, '--out', at('two.bin')]);
    expect(raw.err).toContain('an Arrow file does');
  });

  it('says which options a raw file cannot hold', async () => {
    const made = [
      'make',
      'plummer',
      '--count',
      '10',
      '--units',
      'pc-kms-msun',
      '--softening',
      '0.1',
    ];
    const { err } = await settlemark([...made, '--out', at('units.bin')]);
    expect(err).toContain('measure it with --units pc-kms-msun --softening 0.1');
  });
});

it('demo tells about the solar system and a made cluster', async () => {
  const { code, out, err } = await settlemark(['demo']);
  expect({ code, err }).toEqual({ code: 0, err: '' });
  expect(out).toMatch(/2<T>\/\|<U>\| +1\.00/);
  expect(out).toContain('100,000 stars');
  expect(out.split('\n').filter((line) => line.length > 80)).toEqual([]);
});

describe('misuse and interruption', () => {
  it('a misspelt option leaves stdout empty and offers the nearest', async () => {
    const { code, out, err } = await settlemark(['measure', '--sofetning', '1', at('pair.bin')]);
    expect({ code, out }).toEqual({ code: 2, out: '' });
    expect(err).toContain('--softening');
  });

  it('SIGINT ends with 130 and leaves no file', async () => {
    const made = ['make', 'plummer', '--count', '200000', '--out', at('big.bin'), '--quiet'];
    expect((await settlemark(made)).code).toBe(0);
    const before = readdirSync(folder);
    const argv = ['measure', at('big.bin'), '--exact', '--threads', '2', '--out', at('big.json')];
    // Direct sums of 200,000 bodies take far longer than the wait, and the wait longer than the start.
    const { code, out, err } = await settlemark(argv, (child) => {
      setTimeout(() => child.kill('SIGINT'), 3000);
    });
    expect({ code, out, err }).toEqual({ code: 130, out: '', err: 'settlemark: interrupted\n' });
    expect(readdirSync(folder)).toEqual(before);
  });

  it('ends quietly when nobody reads its output any more', async () => {
    const argv = ['measure', 'fixtures/solar/raw', '--format', 'ndjson', '--quiet'];
    const { code, err } = await settlemark(argv, (child) => {
      child.stdout?.once('data', () => child.stdout?.destroy());
    });
    expect({ code, err }).toEqual({ code: 0, err: '' });
  });
});
