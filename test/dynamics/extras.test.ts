/** Names after `--with`, and that extras change nothing else. */
import { describe, expect, it } from 'vitest';
import { EXTRA_NAMES, extrasNamed } from '../../src/dynamics/extras.ts';
import { QUANTITIES } from '../../src/dynamics/registry.ts';
import { makeModel } from '../../src/models/make.ts';
import { measure } from './samples.ts';

describe('names', () => {
  it('are the extras, the keys that come with them, and all', () => {
    expect(extrasNamed([])).toEqual([]);
    expect(extrasNamed(['all'])).toEqual(EXTRA_NAMES);
    expect(extrasNamed(['pairs', 'shells', 'pairs'])).toEqual(['shells', 'pairs']);
    expect(extrasNamed(['radialToTangential'])).toEqual(['shells']);
    expect(extrasNamed(['pairsMerged', 'profiles.density'])).toEqual(['profiles', 'pairs']);
    expect(extrasNamed(['momentOfInertiaAcceleration'])).toEqual(['inertia']);
  });

  it.each([
    ['shels', 'shells'],
    ['Pairs', 'pairs'],
    ['radialToTangentail', 'radialToTangential'],
    ['hardpairs', 'hardPairs'],
    ['inert', 'inertia'],
  ])('%s is refused, and %s offered', (name, offered) => {
    expect(() => extrasNamed(['shells', name])).toThrow(
      expect.objectContaining({
        code: 'usage.with',
        message: expect.stringContaining(name) as string,
        remedy: expect.stringContaining(`did you mean ${offered}?`) as string,
      }),
    );
  });

  it('that are like none are refused with the list', async () => {
    const particles = makeModel({ model: 'plummer', count: 20, seed: 1 });
    // A core key is no extra: it is measured anyway.
    for (const name of ['', 'virialRatio', 'xyz']) {
      await expect(measure(particles, { with: [name] })).rejects.toMatchObject({
        code: 'usage.with',
        remedy: expect.stringContaining('inertia, shells, profiles, pairs and all') as string,
      });
    }
  });

  it.each([0, 2.5, -1, NaN, 1e6])('of %d shells are refused', async (shells) => {
    const particles = makeModel({ model: 'plummer', count: 20, seed: 1 });
    await expect(measure(particles, { with: ['shells'], shells })).rejects.toMatchObject({
      code: 'usage.range',
      message: expect.stringContaining(`--shells ${shells}`) as string,
    });
  });
});

describe('a record', () => {
  it('has the keys of the extras that were asked for, and the rest as without', async () => {
    const particles = makeModel({ model: 'hernquist', count: 300, seed: 2 });
    const core = await measure(particles);
    expect(core.settings.with).toEqual({ value: [], from: 'default' });
    for (const name of EXTRA_NAMES) {
      const record = await measure(particles, { with: [name], shells: 5 });
      expect(record.settings.with).toEqual({ value: [name], from: 'option' });
      expect(record.settings.shells).toEqual({ value: 5, from: 'option' });
      const keys = new Set(
        QUANTITIES.filter(({ extra }) => extra === name).map(({ key }) => key.split('.')[0]),
      );
      const added = Object.keys(record).filter((key) => !(key in core));
      expect(added.sort()).toEqual([...keys].sort());
      for (const key of Object.keys(core)) {
        if (['settings', 'engine', 'remarks'].includes(key)) continue;
        const of = (r: typeof core) => (r as unknown as Record<string, unknown>)[key];
        expect(of(record), key).toEqual(of(core));
      }
    }
  });
});
