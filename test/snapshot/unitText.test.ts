import { expect, it } from 'vitest';
import { unitText, yearsPerTimeUnit } from '../../src/snapshot/unitText.ts';
import { UNIT_SYSTEMS } from '../../src/snapshot/units.ts';

const of = (mass: number, length: number, time: number) => ({ mass, length, time });

// Source: dimensions of mechanics; the spelling of quotients follows the SI Brochure (9th ed.), 5.3.
it.each([
  ['mass', of(1, 0, 0), 'Msun', 'Msun', 'kg'],
  ['length', of(0, 1, 0), 'pc', 'au', 'm'],
  ['time', of(0, 0, 1), 'pc/(km/s)', 'yr', 's'],
  ['velocity', of(0, 1, -1), 'km/s', 'au/yr', 'm/s'],
  ['energy', of(1, 2, -2), 'Msun (km/s)²', 'Msun (au/yr)²', 'kg (m/s)²'],
  ['angular momentum', of(1, 2, -1), 'Msun pc km/s', 'Msun au²/yr', 'kg m²/s'],
  ['moment of inertia', of(1, 2, 0), 'Msun pc²', 'Msun au²', 'kg m²'],
  ['density', of(1, -3, 0), 'Msun pc⁻³', 'Msun au⁻³', 'kg m⁻³'],
  ['number', of(0, 0, 0), '', '', ''],
])('the unit of %s', (_name, dimension, pc, au, si) => {
  expect(unitText(dimension, UNIT_SYSTEMS['pc-kms-msun'])).toBe(pc);
  expect(unitText(dimension, UNIT_SYSTEMS['au-year-msun'])).toBe(au);
  expect(unitText(dimension, UNIT_SYSTEMS.si)).toBe(si);
  expect(unitText(dimension, UNIT_SYSTEMS.natural)).toBe('');
});

it('knows how long pc/(km/s) is', () => {
  // Source: parsec 3.0856775814913673e16 m (IAU 2015 B2), Julian year 31557600 s; digits of both.
  expect(yearsPerTimeUnit(UNIT_SYSTEMS['pc-kms-msun'])).toBeCloseTo(977792.2216808, 5);
  expect(yearsPerTimeUnit(UNIT_SYSTEMS['kpc-kms-msun'])).toBeCloseTo(977792221.6808, 2);
  expect(yearsPerTimeUnit(UNIT_SYSTEMS.si)).toBeNull();
});
