import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { Ajv2020 } from 'ajv/dist/2020.js';
import { afterAll, describe, expect, it } from 'vitest';
import { SettlemarkError, UsageError } from '../../src/errors.ts';
import { prepareSnapshots } from '../../src/survey/prepare.ts';
import { findRunFile, readRunFile } from '../../src/survey/runFile.ts';
import { runFileJsonSchema } from '../../src/survey/runFileSchema.ts';

const folder = mkdtempSync(join(tmpdir(), 'settlemark-runfile-'));
afterAll(() => rmSync(folder, { recursive: true }));

let runs = 0;
/** A run folder of its own with this run file. */
function run(settings: object | string): string {
  const name = join(folder, `run${runs++}`);
  mkdirSync(name);
  const text = typeof settings === 'string' ? settings : JSON.stringify(settings, null, 2);
  writeFileSync(join(name, 'settlemark.json'), text);
  return name;
}

const FULL = {
  $schema: '../run.schema.json',
  settlemark: 'run/1',
  layout: 'run.layout.json',
  columns: { mass: 'weight', x: 'px' },
  units: 'pc-kms-msun',
  gravity: 0.0043009,
  softening: 0.01,
  softeningKernel: 'spline',
  error: 1e-6,
  exact: true,
  fractions: [0.2, 0.5],
  centre: 'mass',
  coulombFactor: 0.02,
  coincident: 'refuse',
  with: ['shells', 'hardPairs'],
  shells: 12,
  threads: 2,
};

describe('a run file', () => {
  it('is read, with paths from its own folder', async () => {
    const name = run(FULL);
    const settings: Record<string, unknown> = { ...FULL };
    for (const key of ['$schema', 'settlemark']) delete settings[key];
    const found = await findRunFile(name);
    expect(found).toEqual({
      path: join(name, 'settlemark.json'),
      settings: { ...settings, layout: join(name, 'run.layout.json') },
    });
  });

  it('may be absent, or a folder of that name', async () => {
    expect(await findRunFile(join(folder, 'nowhere'))).toBeNull();
    const odd = join(folder, 'odd');
    mkdirSync(join(odd, 'settlemark.json'), { recursive: true });
    expect(await findRunFile(odd)).toBeNull();
  });

  it('may be empty of settings, and begin with a byte order mark', async () => {
    expect((await findRunFile(run('\uFEFF{}')))?.settings).toEqual({});
  });

  it('may name a file of units beside it, or hold sizes', async () => {
    const sizes = { length: 'kpc', mass: '1e10 Msun', velocity: 'km/s' };
    const name = run({ units: 'units.json' });
    writeFileSync(join(name, 'units.json'), JSON.stringify(sizes));
    expect((await findRunFile(name))?.settings.units).toEqual(sizes);
    expect((await findRunFile(run({ units: sizes, gravity: 43009.2 })))?.settings.units).toEqual(
      sizes,
    );
  });

  it('is what the published schema says', () => {
    const ajv = new Ajv2020({ strict: true, allowUnionTypes: true }).compile(runFileJsonSchema());
    expect(ajv(FULL)).toBe(true);
    expect(ajv({ units: { length: 1, mass: '1 Msun', gravity: 1 } })).toBe(true);
    for (const bad of [
      { sofetning: 1 },
      { gravity: 0 },
      { fractions: [1] },
      { columns: { q: 'x' } },
    ])
      expect(ajv(bad)).toBe(false);
  });
});

describe('a run file that is wrong names file, line, column and remedy', () => {
  it.each<[string, object | string, code: string, place: string, found: RegExp, remedy: RegExp]>([
    ['no JSON', '{\n  "gravity": 1,\n}', 'NotJson', 'line 3, column 1', /found "}"/, /comma/],
    ['nothing', '', 'NotJson', 'line 1, column 1', /end of the text/, /./],
    [
      'a misspelt key',
      '{\n  "gravity": 1,\n  "sofetning": 1\n}',
      'UnknownKey',
      'line 3, column 3',
      /"sofetning"; expected only/,
      /"softening"/,
    ],
    [
      'an option as the command line has it',
      { '--softening-kernel': 'spline' },
      'UnknownKey',
      'line 2',
      /"--softening-kernel"/,
      /"softeningKernel"/,
    ],
    [
      'an extra that is not known',
      '{\n  "with": ["pairs",\n    "shels"]\n}',
      'Invalid',
      'line 3, column 5',
      /with: found "shels"; expected inertia, shells/,
      /mean shells\?/,
    ],
    ['too many shells', { shells: 1000 }, 'Invalid', 'line 2', /found 1000/, /./],
    ['a key far from all', { zzz: 1 }, 'UnknownKey', 'line 2', /"zzz"/, /Remove/],
    [
      'a key inside columns',
      { columns: { maas: 'm' } },
      'UnknownKey',
      'line 3, column 5',
      /columns: found the unknown key "maas"/,
      /"mass"/,
    ],
    [
      'a key twice',
      '{\n  "gravity": 1,\n  "gravity": 2\n}',
      'Invalid',
      'line 3, column 3',
      /"gravity" stands there twice/,
      /./,
    ],
    [
      'a text for a number',
      { softening: '0.1' },
      'Invalid',
      'line 2, column 16',
      /softening: found "0.1"; expected a number/,
      /./,
    ],
    [
      'a number out of range',
      { gravity: 0 },
      'Invalid',
      'line 2',
      /gravity: found 0; expected more than 0/,
      /./,
    ],
    [
      'a fraction of 1',
      { fractions: [0.5, 1] },
      'Invalid',
      'line 4',
      /fractions\[1\]: found 1; expected less than 1/,
      /./,
    ],
    [
      'no fractions',
      { fractions: [] },
      'Invalid',
      'line 2',
      /fractions: found \[\]; expected at least one/,
      /./,
    ],
    [
      'a misspelt kernel',
      { softeningKernel: 'plumer' },
      'Invalid',
      'line 2',
      /found "plumer"/,
      /"plummer"/,
    ],
    [
      'no threads',
      { threads: 0 },
      'Invalid',
      'line 2',
      /threads: found 0; expected at least 1/,
      /./,
    ],
    ['half a thread', { threads: 1.5 }, 'Invalid', 'line 2', /a whole number/, /./],
    [
      'misspelt units',
      { units: 'kpc-kms' },
      'Invalid',
      'line 2',
      /units: found "kpc-kms"/,
      /"kpc-kms-msun"/,
    ],
    [
      'a number for units',
      { units: 1 },
      'Invalid',
      'line 2',
      /units: found 1; expected a name/,
      /./,
    ],
    [
      'units with a wrong size',
      { units: { length: 'kcp', mass: 1, velocity: 1 } },
      'Invalid',
      'line 3',
      /units\.length: found "kcp"/,
      /"kpc"/,
    ],
    [
      'units with a wrong key',
      { units: { lenth: 1, mass: 1, velocity: 1 } },
      'Invalid',
      'line 2',
      /units: found the unknown key "lenth"/,
      /"length"/,
    ],
    [
      'another kind of file',
      { settlemark: 'layout/1' },
      'Invalid',
      'line 2',
      /settlemark: found "layout\/1"; expected "run\/1"/,
      /./,
    ],
    ['a list', '[1]', 'Invalid', 'line 1', /the run file: found \[1\]; expected an object/, /./],
    ['null', 'null', 'Invalid', 'line 1', /the run file: found null/, /./],
  ])('%s', async (_name, settings, code, place, found, remedy) => {
    const name = run(settings);
    const error = await findRunFile(name).catch((reason: unknown) => reason);
    expect(error).toBeInstanceOf(UsageError);
    const { message, ...rest } = error as UsageError;
    expect(rest.code).toBe(`usage.runFile${code}`);
    expect(message).toContain(`${join(name, 'settlemark.json')}, ${place}`);
    expect(message).toMatch(found);
    expect(rest.remedy).toMatch(remedy);
  });

  it.each<[string, object, RegExp]>([
    [
      'by name',
      { units: 'kpc-kms-msun', gravity: 1 },
      /line 3, column 14: units kpc-kms-msun mean/,
    ],
    [
      'by sizes',
      { gravity: 2, units: { length: 1, mass: 1, gravity: 1 } },
      /line 2, column 14: units of your own mean G = 1/,
    ],
  ])('units and gravity contradict each other, %s', async (_name, settings, message) => {
    const error = await findRunFile(run(settings)).catch((reason: unknown) => reason);
    expect(error).toMatchObject({ code: 'usage.gravityClash' });
    expect((error as Error).message).toMatch(message);
  });

  it('names a file of units that is not there', async () => {
    const name = run({ units: 'units.json' });
    const error = await findRunFile(name).catch((reason: unknown) => reason);
    expect(error).toMatchObject({ code: 'input.notFound' });
    expect((error as Error).message).toContain(join(name, 'units.json'));
    expect((error as Error).message).toContain(`named in ${join(name, 'settlemark.json')}`);
  });

  it('is not there though it is named', async () => {
    const error = await readRunFile(join(folder, 'no.json')).catch((reason: unknown) => reason);
    expect(error).toMatchObject({ code: 'input.notFound' });
    expect(error).toBeInstanceOf(SettlemarkError);
  });
});

describe('options over a run file', () => {
  const prepare = async (settings: object, options: object) => {
    const [prepared] = await prepareSnapshots([join(run(settings), 'a.bin')], options);
    return prepared;
  };

  it('win, and the rest is marked as taken from it', async () => {
    const { options, runFile, threads } = await prepare(FULL, { softening: 0.2, error: 1e-3 });
    expect(options).toMatchObject({ softening: 0.2, error: 1e-3, softeningKernel: 'spline' });
    expect(options.fromRunFile).not.toContain('softening');
    expect(options.fromRunFile).toEqual(expect.arrayContaining(['softeningKernel', 'gravity']));
    expect(runFile).toMatch(/settlemark\.json$/);
    expect(threads).toBe(2);
  });

  it('that are there and undefined decide nothing', async () => {
    const { options } = await prepare(
      { gravity: 2 },
      { gravity: undefined, read: { layout: undefined } },
    );
    expect(options).toMatchObject({ gravity: 2, fromRunFile: ['gravity'] });
  });

  it('that take softening away take its kernel away too, and the reverse', async () => {
    const softened = { softening: 0.1, softeningKernel: 'spline' };
    expect((await prepare(softened, { softening: 0 })).options).not.toHaveProperty(
      'softeningKernel',
    );
    expect((await prepare(softened, { softeningKernel: 'none' })).options).not.toHaveProperty(
      'softening',
    );
  });

  it('merge columns name by name, and a layout of theirs stands', async () => {
    const read = { columns: { mass: 'm2' }, layout: 'other.json' };
    const { options } = await prepare(FULL, { read });
    expect(options.read).toEqual({ columns: { mass: 'm2', x: 'px' }, layout: 'other.json' });
  });

  it('may name a run file for all, or none', async () => {
    const here = run({ gravity: 2 });
    const there = join(run({ gravity: 3, layout: 'a.json' }), 'settlemark.json');
    const files = [join(here, 'a.bin'), '-'];
    const gravities = async (options: object) =>
      (await prepareSnapshots(files, options)).map((prepared) => prepared.options.gravity);
    expect(await gravities({})).toEqual([2, undefined]);
    expect(await gravities({ runFile: there })).toEqual([3, 3]);
    expect(await gravities({ runFile: false })).toEqual([undefined, undefined]);
    // Standard input is an Arrow stream, for which a layout would be an error.
    const [file, input] = await prepareSnapshots(files, { runFile: there });
    expect(file.options.read?.layout).toMatch(/a\.json$/);
    expect(input.options.read).not.toHaveProperty('layout');
  });

  it('are settled folder by folder', async () => {
    const [a, b] = [run({ gravity: 2 }), run({ gravity: 3 })];
    const files = [join(a, '1'), join(b, '1'), join(a, '2')];
    const prepared = await prepareSnapshots(files);
    expect(prepared.map(({ options }) => options.gravity)).toEqual([2, 3, 2]);
    expect(prepared[2].options).toBe(prepared[0].options);
  });
});
