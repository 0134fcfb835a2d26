import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { InputError, UsageError } from '../../src/errors.ts';
import {
  isUnitsFile,
  loadUnits,
  readUnits,
  unitSystemOf,
  type UnitsDefinition,
} from '../../src/snapshot/ownUnits.ts';
import { unitText, yearsPerTimeUnit } from '../../src/snapshot/unitText.ts';
import { UNIT_SYSTEMS } from '../../src/snapshot/units.ts';

const folder = mkdtempSync(join(tmpdir(), 'settlemark-units-'));
afterAll(() => rmSync(folder, { recursive: true }));
const file = (name: string, text: string): string => {
  writeFileSync(join(folder, name), text);
  return join(folder, name);
};

const relative = (a: number, b: number) => Math.abs(a / b - 1);
// Sizes are products of a few doubles: some units of the last place.
const ROUNDING = 1e-14;

describe('G of own units', () => {
  it.each<[string, UnitsDefinition, number]>([
    ['pc-kms-msun', { length: 'pc', mass: 'Msun', velocity: 'km/s' }, 1],
    ['kpc-kms-msun', { length: '1 kpc', mass: '1 Msun', velocity: '1 km/s' }, 1],
    ['kpc-kms-msun', { length: 'kpc', mass: '1e10 Msun', velocity: 'km/s' }, 1e10],
    ['pc-kms-msun', { length: '0.1pc', mass: 'Msun', velocity: '10 * km/s' }, 0.1],
    ['au-year-msun', { length: 'au', mass: 'Msun', time: 'yr' }, 1],
    ['au-year-msun', { length: 'au', mass: 'Msun', velocity: 'au/yr' }, 1],
    ['si', { length: 1, mass: 1, velocity: 1 }, 1],
    ['si', { length: '100 cm', mass: '1000 g', velocity: '100 cm/s' }, 1],
    ['si', { length: 2, mass: '8 kg', time: 1 }, 1],
  ])('is that of %s in other sizes: %j', (name, definition, factor) => {
    const known = UNIT_SYSTEMS[name as keyof typeof UNIT_SYSTEMS].gravity;
    expect(relative(unitSystemOf(definition).gravity, known * factor)).toBeLessThan(ROUNDING);
  });

  it('is 1 in au, solar masses and 1/k days', () => {
    // Source: the Gaussian constant k = 0.01720209895 (IAU 1976) means G M☉ = k² au³/day².
    const day = { length: 'au', mass: 'Msun', time: `${1 / 0.01720209895} day` };
    // The nominal GM of the Sun is rounded to eight digits; k² au³/day² is 1.32712440042e20.
    expect(relative(unitSystemOf(day).gravity, 1)).toBeLessThan(5e-10);
  });

  it('may be stated, which gives the velocity', () => {
    const system = unitSystemOf({ length: 'au', mass: 'Msun', gravity: 1 });
    expect(system.gravity).toBe(1);
    const { length = NaN, velocity = NaN } = system.si ?? {};
    // The same source: the unit of time is 1/k days, half as exact as G.
    expect(relative(length / velocity / 86400, 1 / 0.01720209895)).toBeLessThan(3e-10);
    expect(system).toMatchObject({ velocity: '29.7847 km/s', time: '0.159158 yr' });
  });

  it('comes with sizes in SI', () => {
    const { si } = unitSystemOf({ length: 'pc', mass: 2e30, velocity: 'km/s' });
    // Source: parsec 3.0856775814913673e16 m (IAU 2015 B2), of which a double holds 16 digits.
    expect(relative(si?.length ?? 0, 3.085677581491367e16)).toBeLessThan(ROUNDING);
    expect(relative(si?.mass ?? 0, 2e30)).toBeLessThan(ROUNDING);
    expect(si?.velocity).toBe(1000);
  });
});

describe('symbols', () => {
  const ENERGY = { mass: 1, length: 2, time: -2 };
  const TIME = { mass: 0, length: 0, time: 1 };
  it.each<[UnitsDefinition, energy: string, time: string]>([
    [{ length: 'pc', mass: 'Msun', velocity: 'km/s' }, 'Msun (km/s)²', 'pc/(km/s)'],
    [{ length: 'pc', mass: 'Msun', velocity: 'pc/Myr' }, 'Msun (pc/Myr)²', 'Myr'],
    [{ length: 'au', mass: 'Msun', time: 'yr' }, 'Msun (au/yr)²', 'yr'],
    [
      { length: '2 kpc', mass: '1e10 Msun', velocity: 'km/s' },
      '(1e10 Msun) (km/s)²',
      '(2 kpc)/(km/s)',
    ],
    [
      { length: 3.08567758149e19, mass: 1e41, velocity: 1e3 },
      '(1e41 kg) (1000 m/s)²',
      '(3.08568e19 m)/(1000 m/s)',
    ],
  ])('of %j', (definition, energy, time) => {
    const system = unitSystemOf(definition);
    expect(unitText(ENERGY, system)).toBe(energy);
    expect(unitText(TIME, system)).toBe(time);
  });

  it('of time come with years where years are no unit of it', () => {
    const myr = unitSystemOf({ length: 'pc', mass: 'Msun', time: 'Myr' });
    expect(relative(yearsPerTimeUnit(myr) ?? 0, 1e6)).toBeLessThan(ROUNDING);
    expect(yearsPerTimeUnit(unitSystemOf({ length: 'pc', mass: 'Msun', time: 'yr' }))).toBeNull();
  });
});

describe('a definition that is none', () => {
  it.each<[string, unknown, RegExp, RegExp]>([
    ['no mass', { length: 1, velocity: 1 }, /units\.mass: found nothing/, /Known units/],
    [
      'nothing for motion',
      { length: 1, mass: 1 },
      /found none of velocity, time and gravity/,
      /For instance/,
    ],
    [
      'two for motion',
      { length: 1, mass: 1, velocity: 1, gravity: 1 },
      /velocity and gravity/,
      /./,
    ],
    ['a misspelt key', { lenght: 1, mass: 1, velocity: 1 }, /unknown key "lenght"/, /"length"/],
    [
      'a misspelt unit',
      { length: 'kcp', mass: 1, velocity: 1 },
      /units\.length: found "kcp"/,
      /"kpc"/,
    ],
    [
      'a misspelt velocity',
      { length: 1, mass: 1, velocity: 'kn/s' },
      /units\.velocity: found "kn\/s"/,
      /"km"/,
    ],
    [
      'a mass for a length',
      { length: 'Msun', mass: 1, velocity: 1 },
      /units\.length: found "Msun"/,
      /./,
    ],
    ['a length of 0', { length: 0, mass: 1, velocity: 1 }, /units\.length: found 0/, /above 0/],
    [
      'a mass below 0',
      { length: 1, mass: '-1 kg', velocity: 1 },
      /units\.mass: found "-1 kg"/,
      /above 0/,
    ],
    [
      'a bare number as text',
      { length: '2', mass: 1, velocity: 1 },
      /units\.length: found "2"/,
      /./,
    ],
    ['a G of 0', { length: 1, mass: 1, gravity: 0 }, /units\.gravity: found 0/, /./],
    ['a G as text', { length: 1, mass: 1, gravity: '1' }, /units\.gravity: found "1"/, /./],
    ['a list', [1, 1, 1], /found \[1,1,1\]/, /For instance/],
    [
      'sizes beyond doubles',
      { length: 1e200, mass: 1e-200, velocity: 1e200 },
      /G in these units would be 0/,
      /./,
    ],
  ])('%s', (_name, definition, message, remedy) => {
    let thrown: unknown;
    try {
      unitSystemOf(definition as UnitsDefinition);
    } catch (error) {
      thrown = error;
    }
    expect(thrown).toBeInstanceOf(UsageError);
    expect(thrown).toMatchObject({ code: 'usage.units' });
    expect((thrown as UsageError).message).toMatch(message);
    expect((thrown as UsageError).remedy).toMatch(remedy);
  });
});

describe('a file of units', () => {
  it('is told by its ending, and read', async () => {
    expect(['henon', 'own.json', 'a/B.JSON'].map(isUnitsFile)).toEqual([false, true, true]);
    const path = file(
      'good.json',
      '\uFEFF{ "length": "kpc", "mass": "1e10 Msun", "velocity": "km/s" }',
    );
    expect(await loadUnits(path)).toEqual({ length: 'kpc', mass: '1e10 Msun', velocity: 'km/s' });
    expect(await loadUnits('henon')).toBe('henon');
  });

  it.each([
    ['comma.json', '{\n  "length": 1,\n  "mass": 1,\n}', 'input.units', 'line 4, column 1'],
    ['empty.json', '', 'input.units', 'the end of the text'],
    [
      'key.json',
      '{"length": 1, "mass": "1 kilo", "velocity": 1}',
      'input.units',
      'mass: found "1 kilo"',
    ],
    ['unknown.json', '{"length": 1, "mass": 1, "speed": 1}', 'input.units', 'unknown key "speed"'],
  ])('%s is refused with its name and place', async (name, text, code, part) => {
    const path = file(name, text);
    const error = await readUnits(path).catch((reason: unknown) => reason);
    expect(error).toBeInstanceOf(InputError);
    expect(error).toMatchObject({ code });
    expect((error as InputError).message).toContain(path);
    expect((error as InputError).message).toContain(part);
    expect((error as InputError).remedy).toBeTruthy();
  });

  it.each([
    ['nowhere.json', 'input.notFound'],
    ['.', 'input.isDirectory'],
  ])('%s cannot be read', async (name, code) => {
    await expect(readUnits(join(folder, name))).rejects.toMatchObject({ code });
  });

  it('that is far too large is another file', async () => {
    const path = file('large.json', ' '.repeat(2 ** 20 + 1));
    await expect(readUnits(path)).rejects.toMatchObject({ code: 'input.tooLarge' });
  });
});
