import { describe, expect, it } from 'vitest';
import { makeModel, type MakeOptions } from '../../src/models/make.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { speedSquared } from './samples.ts';

const count = 20_000;
const base: MakeOptions = { model: 'hernquist', count, seed: 31, anisotropyRadius: 1 };
const lz = (set: Particles, i: number) => set.x[i] * set.vy[i] - set.y[i] * set.vx[i];

describe('rotation', () => {
  const still = makeModel(base);

  it.each([1, 0.3, -0.6, -1])(
    'of %d turns that share of the bodies on the other side',
    (rotation) => {
      const set = makeModel({ ...base, rotation });
      const sense = Math.sign(rotation);
      let against = 0;
      let turned = 0;
      let sum = 0;
      let size = 0;
      // Greatest relative changes of |L_z|, v² and x vx + y vy: only the sign of v_φ changes.
      const changes = { lz: 0, v2: 0, along: 0 };
      const along = (p: Particles, i: number) => p.x[i] * p.vx[i] + p.y[i] * p.vy[i];
      for (let i = 0; i < count; i++) {
        const before = lz(still, i);
        const after = lz(set, i);
        if (before * sense < 0) {
          against++;
          if (after * sense > 0) turned++;
        } else if (after !== before) turned = NaN;
        const v2 = speedSquared(still, i);
        const most = Math.hypot(set.x[i], set.y[i]) * Math.sqrt(v2);
        changes.lz = Math.max(changes.lz, Math.abs(Math.abs(after) - Math.abs(before)) / most);
        changes.v2 = Math.max(changes.v2, Math.abs(speedSquared(set, i) / v2 - 1));
        changes.along = Math.max(changes.along, Math.abs(along(set, i) - along(still, i)) / most);
        sum += set.mass[i] * after;
        size += set.mass[i] * Math.abs(after);
      }
      for (const change of Object.values(changes)) expect(change).toBeLessThan(4e-15); // roundings
      expect(set.x).toEqual(still.x);
      expect(set.vz).toEqual(still.vz);
      // Binomial: 4.5 standard errors.
      const share = Math.abs(rotation);
      const limit = 4.5 * Math.sqrt((share * (1 - share)) / against);
      expect(Math.abs(turned / against - share)).toBeLessThanOrEqual(limit);
      // ⟨L_z⟩ = rotation ⟨|L_z|⟩, within the noise of the draw (heavy tails: 4 %).
      expect(Math.abs(sum / size - rotation)).toBeLessThan(0.04);
    },
  );

  it('is none at 0, bit for bit', () => {
    expect(makeModel({ ...base, rotation: 0 }).vx).toEqual(still.vx);
  });

  it('has the mean streaming of an isotropic sphere all in one sense', () => {
    // A Plummer sphere with all bodies turned: ⟨v_φ⟩ = ⟨|v_φ|⟩ = ⟨v⟩/2 at each place (mean of |sin| over
    // directions), and ⟨v⟩ at the radius r from f ∝ E^3.5: √(2ψ) B(2, 9/2)/B(3/2, 9/2) with B(2, 9/2) =
    // 4/99 and B(3/2, 9/2) = 7π/256, by hand.
    const set = makeModel({ model: 'plummer', count, seed: 5, rotation: 1 });
    let sum = 0;
    let squares = 0;
    for (let i = 0; i < count; i++) {
      const R = Math.hypot(set.x[i], set.y[i]);
      const escape = Math.sqrt(2 / Math.sqrt(1 + R * R + set.z[i] ** 2));
      const value = lz(set, i) / R / ((escape * (4 / 99)) / ((7 * Math.PI) / 256) / 2);
      sum += value / count;
      squares += value ** 2 / count;
    }
    expect(Math.abs(sum - 1)).toBeLessThan(4.5 * Math.sqrt((squares - sum * sum) / count));
  });
});
