/** The same epoch read from raw and from Arrow gives the same particles, bit for bit. */
import { fileURLToPath } from 'node:url';
import { expect, it } from 'vitest';
import { readArrow } from '../../src/snapshot/arrow/read.ts';
import { readRaw } from '../../src/snapshot/raw/read.ts';
import { GRAVITY, noon, solarState } from './solar-states.ts';

const fixture = (path: string) =>
  fileURLToPath(new URL(`../../fixtures/solar/${path}`, import.meta.url));

it('reads the real bodies of 1 January 2000 from both formats alike', async () => {
  const raw = await readRaw(fixture('raw/2000-01-01.bin'), {});
  const arrow = await readArrow(fixture('arrow/2000-01-01.arrow'), {});
  const { mass, position, velocity } = solarState(noon(2000));
  for (const set of [raw, arrow]) {
    expect(set.count).toBe(9);
    expect(set.time).toBe(0);
    expect(set.units?.name).toBe('au-year-msun');
    const gravity = set.gravity ?? set.units?.gravity ?? NaN;
    expect(Math.abs(gravity / GRAVITY - 1)).toBeLessThan(1e-15 * 4); // order of the roundings
    for (let i = 0; i < 9; i++) {
      expect(set.mass[i]).toBe(mass[i]);
      expect([set.x[i], set.y[i], set.z[i]]).toEqual([...position.slice(3 * i, 3 * i + 3)]);
      expect([set.vx[i], set.vy[i], set.vz[i]]).toEqual(
        [...velocity.slice(3 * i, 3 * i + 3)].map((v) => v * 365.25),
      );
    }
  }
});
