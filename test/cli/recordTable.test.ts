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
