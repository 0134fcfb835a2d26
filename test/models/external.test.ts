/** External fields against their closed forms, written anew, and against each other. */
import { describe, expect, it } from 'vitest';
import {
  eigenvalues,
  externalAt,
  tidalTensor,
  type ExternalField,
} from '../../src/models/external.ts';

const at = (field: ExternalField, x: number, y: number, z: number, G = 1) =>
  externalAt([field], G, x, y, z);

describe('circular speeds and potentials', () => {
  it('of a point mass: v² = GM/r (Kepler)', () => {
    const [phi, ax] = at({ form: 'pointMass', mass: 3 }, 2, 0, 0, 5);
    expect(phi).toBe(-7.5);
    expect(-ax * 2).toBeCloseTo(7.5, 14);
  });

  it('of a Plummer sphere: the greatest v² is 2/3^1.5 at r = √2', () => {
    // Source: differentiation of r²/(1 + r²)^1.5.
    const speed2 = (r: number) => -r * at({ form: 'plummer', mass: 1, scaleRadius: 1 }, 0, r, 0)[2];
    expect(speed2(Math.SQRT2)).toBeCloseTo(2 / 3 ** 1.5, 14);
    expect(speed2(1.4)).toBeLessThan(speed2(Math.SQRT2));
    expect(speed2(1.43)).toBeLessThan(speed2(Math.SQRT2));
  });

  it('of an NFW halo: the mass inside `within` is the one stated, and v is greatest at 2.16258 a', () => {
    const halo: ExternalField = { form: 'nfw', mass: 10, within: 15, scaleRadius: 1.5 };
    const speed2 = (r: number) => -r * at(halo, 0, 0, r)[3];
    expect(speed2(15) * 15).toBeCloseTo(10, 12);
    // Source: Lokas & Mamon 2001, MNRAS 321, 155 (from memory): r_max = 2.163 r_s.
    const peak = speed2(2.16258 * 1.5);
    expect(speed2(2.1 * 1.5)).toBeLessThan(peak);
    expect(speed2(2.23 * 1.5)).toBeLessThan(peak);
    // At the centre φ → −G M₀/a, and the pull vanishes.
    const scale = 10 / (Math.log(11) - 10 / 11);
    expect(at(halo, 0, 0, 0)).toEqual([-scale / 1.5, 0, 0, 0]);
    expect(at(halo, 1e-7, 0, 0)[0] / (-scale / 1.5)).toBeCloseTo(1, 6);
  });

  it('of a logarithmic potential: v far out, and half of v² at the core radius', () => {
    const field: ExternalField = { form: 'logarithmic', speed: 220, coreRadius: 2 };
    expect(-2 * at(field, 2, 0, 0)[1]).toBeCloseTo(220 ** 2 / 2, 8);
    expect(-2e6 * at(field, 2e6, 0, 0)[1]).toBeCloseTo(220 ** 2, 4);
  });

  it('of Miyamoto and Nagai: a Plummer sphere for a = 0', () => {
    // Source: Miyamoto & Nagai 1975, PASJ 27, 533: a = 0 gives Plummer's model.
    const disc: ExternalField = {
      ...{ form: 'miyamotoNagai', mass: 2, scaleLength: 0, scaleHeight: 0.7 },
    };
    const sphere: ExternalField = { form: 'plummer', mass: 2, scaleRadius: 0.7 };
    const points: [number, number, number][] = [
      [1, 2, 3],
      [0.1, 0, -0.4],
    ];
    for (const point of points) {
      const [one, other] = [at(disc, ...point), at(sphere, ...point)];
      one.forEach((value, k) => expect(value).toBeCloseTo(other[k], 13));
    }
  });
});

describe('accelerations', () => {
  const fields: ExternalField[] = [
    { form: 'pointMass', mass: 2, centre: [5, 1, 0] },
    { form: 'plummer', mass: 3, scaleRadius: 0.5 },
    { form: 'nfw', mass: 4, within: 10, scaleRadius: 2, centre: [0, -3, 1] },
    { form: 'logarithmic', speed: 1.5, coreRadius: 0.3, flattening: 0.8 },
    { form: 'miyamotoNagai', mass: 5, scaleLength: 1, scaleHeight: 0.2 },
    { form: 'tide', tensor: [2, -1, -1, 0.3, -0.2, 0.1] },
  ];

  it.each(fields)('of $form are minus the slope of its potential', (field) => {
    const point = [0.7, -0.4, 0.9] as const;
    const value = at(field, ...point);
    const h = 1e-5;
    [0, 1, 2].forEach((k) => {
      const [plus, minus] = [1, -1].map((sign) => {
        const p = point.map((c, axis) => c + (axis === k ? sign * h : 0));
        return at(field, p[0], p[1], p[2])[0];
      });
      // Differences err by h² times third derivatives of order 10, and by 1e-16/h of rounding.
      expect(Math.abs((minus - plus) / (2 * h) - value[k + 1])).toBeLessThan(1e-8);
    });
  });

  it('add up', () => {
    const sum = externalAt(fields, 2, 1, 2, 3);
    const parts = fields.map((field) => at(field, 1, 2, 3, 2));
    sum.forEach((value, k) =>
      expect(value).toBeCloseTo(
        parts.reduce((total, part) => total + part[k], 0),
        12,
      ),
    );
  });
});

describe('the tide', () => {
  it('of a point mass stretches by 2GM/R³ and squeezes by GM/R³ (textbook)', () => {
    const tensor = tidalTensor([{ form: 'pointMass', mass: 4 }], 2, [0, 3, 4], 5);
    const [first, second, third] = eigenvalues(tensor);
    const unit = (2 * 4) / 5 ** 3;
    expect(first / unit).toBeCloseTo(2, 6);
    expect(second / unit).toBeCloseTo(-1, 6);
    expect(third / unit).toBeCloseTo(-1, 6);
  });

  it('has the eigenvalues of its matrix', () => {
    // [[2, 1, 0], [1, 2, 0], [0, 0, 5]] has 5, 3 and 1, by hand; a multiple of 1 has all alike.
    const found = eigenvalues([2, 2, 5, 1, 0, 0]);
    [5, 3, 1].forEach((value, k) => expect(found[k]).toBeCloseTo(value, 13));
    expect(eigenvalues([7, 7, 7, 0, 0, 0])).toEqual([7, 7, 7]);
  });
});
