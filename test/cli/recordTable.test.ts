import { stripVTControlCharacters } from 'node:util';
import { describe, expect, it } from 'vitest';
import { recordTable } from '../../src/cli/recordTable.ts';
import { paintFor } from '../../src/cli/style.ts';
import { Collector, madeRecord } from './made.ts';

const SOFTENED = {
  softening: { value: { length: 0.1, support: null, kernel: 'plummer' }, from: 'option' },
} as const;

describe('the page of a record', () => {
  it('leads with the ratio, its noise and what it means', () => {
    const lines = recordTable(madeRecord()).split('\n');
    expect(lines[0]).toBe('shoal.bin');
    expect(lines).toContain('2T/|U|  1.002 ± 0.025 (finite N)');
    expect(lines).toContain('  1, as in equilibrium, within the noise');
  });

  it('uses 2T/|W| under softening, and says why', () => {
    const balance = {
      ...madeRecord().whole,
      clausius: -0.2878,
      virialRatio: 1.0023,
      clausiusRatio: 1.025,
    };
    const page = recordTable(madeRecord({ settings: SOFTENED, whole: balance, bound: balance }));
    expect(page).toContain('2T/|W|  1.025 ± 0.025 (finite N)');
    expect(page.replace(/\s+/g, ' ')).toContain(
      '2T/|W| is the ratio that is 1 in equilibrium; 2T/|U| is 1.00230 here and would be |W/U| = 0.977844',
    );
    expect(page.replace(/\s+/g, ' ')).toContain('plummer softening 0.1 (option)');
  });

  it.each([
    [0.9, 0.02, 'below 1 by 5 times the noise'],
    [1.2, 0.02, 'above 1 by 10 times the noise'],
    [2.5, 0.02, 'unbound as a whole'],
    [0, 0.02, 'cold start'],
    [1, null, 'average over orbits'],
    [null, null, 'nothing to divide by'],
  ])('says of a ratio of %s with noise %s: %s', (virialRatio, noise, words) => {
    const whole = { ...madeRecord().whole, virialRatio, noise };
    expect(recordTable(madeRecord({ whole }))).toContain(words);
  });

  it('shows no noise where one body holds nearly all mass', () => {
    const remarks = [{ code: 'dominantBody', text: 'one body', remedy: 'average' }];
    const page = recordTable(madeRecord({ remarks }));
    expect(page).not.toContain('finite N');
    expect(page).toContain('average over orbits');
  });

  it('shows the bound set beside all bodies only where they differ', () => {
    expect(recordTable(madeRecord())).toContain('all bodies (all are bound)');
    const bound = { ...madeRecord().bound, particles: 990, mass: 0.99 };
    const page = recordTable(madeRecord({ bound }));
    expect(page).toMatch(/all bodies +bound bodies/);
    expect(page).toMatch(/bodies +1,000 +990/);
    expect(page).toContain('bound mass');
  });

  it('names units by the dimension of each figure', () => {
    const units = { value: 'pc-kms-msun', from: 'option' } as const;
    const page = recordTable(madeRecord({ settings: { units } }));
    for (const label of [
      'energies in Msun (km/s)²',
      'virial radius [pc]',
      'dispersion, 1-D [km/s]',
    ]) {
      expect(page).toContain(label);
    }
    // Source: pc/(km/s) = 0.97779222 Myr from the parsec (IAU 2015 B2) and the Julian year.
    expect(page).toContain('= 6.124 Myr');
  });

  it('never wraps at 80 columns, whatever the name, the figures and the remarks', () => {
    const huge = {
      ...madeRecord().whole,
      particles: 123_456_789,
      mass: 1.23456e12,
      kinetic: 6.54321e16,
      potential: -1.23456789e17,
      potentialError: 1.23e8,
      clausius: -1.23456789e17,
      clausiusError: 1.23e8,
      energy: -5.7e16,
    };
    const record = madeRecord({
      file: `/runs/${'a-rather-long-folder-name/'.repeat(8)}snapshot_000123.arrow`,
      settings: { ...SOFTENED, units: { value: 'kpc-kms-msun', from: 'snapshot' } },
      whole: huge,
      bound: { ...huge, particles: 123_456_000 },
      momentOfInertia: 1.23456e28,
      remarks: [
        {
          code: 'layout.found',
          text: `${'/x'.repeat(150)} was read with the layout beside it`,
          remedy: 'name the right one',
        },
      ],
    });
    const wide = recordTable(record, paintFor(new Collector(true), {}))
      .split('\n')
      .map((line) => [...stripVTControlCharacters(line)].length)
      .filter((width) => width > 80);
    expect(wide).toEqual([]);
  });

  it('puts each remark with its remedy and code at the end', () => {
    const page = recordTable(
      madeRecord({ remarks: [{ code: 'bulkMotion', text: 'it moves', remedy: 'nothing to do' }] }),
    );
    expect(page.endsWith('! It moves.\n  → Nothing to do.\n    (bulkMotion)\n')).toBe(true);
  });

  it('is coloured on a terminal alone, and not under NO_COLOR', () => {
    const record = madeRecord();
    const page = (isTTY: boolean, env: Record<string, string>): string =>
      recordTable(record, paintFor(new Collector(isTTY), env));
    expect(page(true, {})).toContain('\u001b[1m');
    expect(stripVTControlCharacters(page(true, {}))).toBe(page(false, {}));
    expect(page(true, { NO_COLOR: '1' })).toBe(page(false, {}));
    expect(page(true, { TERM: 'dumb' })).toBe(page(false, {}));
    expect(page(false, {})).not.toContain('\u001b');
  });
});

describe('extras on the page', () => {
  const list = (value: number | null) => [value, value];
  const motion = {
    set: 'bound',
    axis: [0, 0, 1],
    particles: [500, 500],
    mass: [0.5, 0.5],
    inner: [0, 1.3],
    outer: [1.3, 70],
    radii: [0.8, 2.2],
    radialVelocity: list(-0.0123),
    radialVelocityErrors: list(0.0087),
    radialDispersion: list(0.3456),
    radialDispersionErrors: list(0.011),
    tangentialDispersion: list(0.34),
    tangentialDispersionErrors: list(0.008),
    anisotropy: [0.12, null],
    anisotropyErrors: [0.055, null],
    rotation: list(0.021),
    rotationErrors: list(0.013),
  } as const;
  const profiles = {
    set: 'bound',
    inner: [0.5, 1.6],
    radii: [0.8, 2.2],
    outer: [1, 4],
    density: [0.098765, 0.00123456],
    densityErrors: [0.0061, 0.0001],
    enclosedMass: [0.25, 0.75],
    enclosedMassErrors: list(0.01),
    circularVelocity: [0.56, 0.61],
    circularVelocityErrors: list(0.01),
    escapeVelocity: [1.25, 0.91],
    escapeVelocityErrors: list(0.01),
    relaxationTime: [31.5, null],
    relaxationTimeErrors: [4, null],
    peakVelocity: 0.6211,
    peakVelocityError: 0.0062,
    peakRadius: 1.41,
    peakRadiusError: 0.05,
  } as const;
  const pairs = (hardPairs: number | null) => ({
    hardPairs,
    hardPairsEnergy: hardPairs === null ? null : 0.0345,
    hardestPairs: {
      first: hardPairs ? [12] : [],
      second: hardPairs ? [345] : [],
      firstIds: [],
      secondIds: [],
      separations: hardPairs ? [0.001] : [],
      semiMajorAxes: hardPairs ? [0.00123] : [],
      eccentricities: hardPairs ? [0.456] : [],
      energies: hardPairs ? [0.0234] : [],
      hardness: hardPairs ? [34.5] : [],
      hardnessErrors: hardPairs ? [5.1] : [],
    },
    pairsMerged: { ...madeRecord().whole, virialRatio: 0.998 },
  });
  const ratio = { radialToTangential: 1.03, radialToTangentialError: 0.05 };
  const inertia = {
    momentOfInertiaAcceleration: 0.0021,
    momentOfInertiaAccelerationError: 1e-6,
    momentOfInertiaAccelerationNoise: 0.015,
  };

  it('are not there unless asked for', () => {
    expect(recordTable(madeRecord())).not.toMatch(/d²I|Motion|Profiles|Hard pairs/);
  });

  it('show the acceleration of the moment of inertia with its noise', () => {
    expect(recordTable(madeRecord(inertia))).toMatch(
      /d²I\/dt² +0\.002 ± 0\.015 \(finite N\), 0 in equilibrium/,
    );
  });

  it('show motions shell by shell', () => {
    const page = recordTable(madeRecord({ shells: motion, ...ratio }));
    expect(page).toContain('Motion in shells of equal number, all bodies');
    expect(page).toMatch(/1\.300 +-0\.0123 ± 0\.0087 +0\.3456 +0\.120 ± 0\.055 +0\.021 ± 0\.013/);
    expect(page).toMatch(/70\.00 .* n\/a /);
    expect(page).toContain('2T_r/T_t of all: 1.030 ± 0.050');
    const bound = { ...madeRecord().bound, particles: 990 };
    expect(recordTable(madeRecord({ bound, shells: motion, ...ratio }))).toContain(
      'equal number, bound bodies',
    );
  });

  it('show profiles and where the circular velocity peaks', () => {
    const page = recordTable(madeRecord({ profiles }));
    expect(page).toMatch(/0\.8000 +0\.0988 ± 0\.0061 +0\.2500 +0\.5600 +1\.250 +31\.50/);
    expect(page).toContain('v_circ is greatest, 0.6211 ± 0.0062, at 1.410 ± 0.050');
    const none = { peakVelocity: null, peakVelocityError: null, peakRadius: null };
    expect(recordTable(madeRecord({ profiles: { ...profiles, ...none } }))).not.toContain(
      'is greatest',
    );
  });

  it('show hard pairs and the ratio without them', () => {
    const page = recordTable(madeRecord(pairs(3)));
    expect(page).toContain('Hard pairs  3, binding energy 0.03450 in all');
    expect(page).toMatch(/12, 345 +0\.001230 +0\.456 +0\.02340 +34\.5 ± 5\.1/);
    expect(page).toContain('the 1 hardest of 3');
    expect(page).toContain('With each pair as one body 2T/|U| is 0.998 ± 0.025');
    const { hardestPairs } = pairs(3);
    const named = { ...hardestPairs, firstIds: [7], secondIds: [4_294_967_296] };
    expect(recordTable(madeRecord({ ...pairs(3), hardestPairs: named }))).toContain(
      '7, 4294967296',
    );
    expect(recordTable(madeRecord(pairs(0)))).toContain('Hard pairs  none');
    expect(recordTable(madeRecord(pairs(null)))).toContain('Hard pairs  n/a');
  });

  it('never wrap at 80 columns and name their units', () => {
    const wide = (factor: number) =>
      madeRecord({
        settings: { units: { value: 'kpc-kms-msun', from: 'option' }, ...SOFTENED },
        shells: {
          ...motion,
          outer: [1.234e-7, 9.876e12],
          radialVelocity: list(-123456 * factor),
          radialVelocityErrors: list(9876 * factor),
          radialDispersion: list(345678 * factor),
          anisotropy: list(-1234.5),
          anisotropyErrors: list(678.9),
          rotation: list(-98765 * factor),
          rotationErrors: list(8765 * factor),
        },
        ...ratio,
        ...inertia,
        profiles: {
          ...profiles,
          radii: [1.234e-7, 9.876e12],
          density: list(1.2345e15),
          densityErrors: list(1.2e14),
          enclosedMass: list(1.2345e15),
          circularVelocity: list(123456),
          escapeVelocity: list(123456),
          relaxationTime: list(1.2345e15),
          peakVelocity: 1.2345e7,
          peakVelocityError: 12345,
        },
        ...pairs(3),
        hardestPairs: {
          ...pairs(3).hardestPairs,
          firstIds: ['9223372036854775808'],
          secondIds: ['-9223372036854775808'],
          semiMajorAxes: [1.2345e-9],
          energies: [1.2345e15],
          hardness: [1.2345e9],
          hardnessErrors: [2e8],
        },
      });
    for (const factor of [1, 1e3]) {
      const lines = recordTable(wide(factor)).split('\n');
      expect(lines.filter((line) => [...line].length > 80)).toEqual([]);
    }
    const page = recordTable(wide(1));
    expect(page).toContain('radii in kpc, velocities in km/s');
    expect(page).toContain('densities in Msun kpc⁻³');
    expect(page).toContain('2T/|W| is');
  });
});
