import { describe, expect, it } from 'vitest';
import { dehnen } from '../../src/models/dehnen.ts';
import { modelFigures } from '../../src/models/figures.ts';
import { hernquist } from '../../src/models/hernquist.ts';
import type { SphereOptions } from '../../src/models/options.ts';
import { integrate } from './quadrature.ts';
import { within } from './within.ts';

const count = 1;

describe('figures of single models', () => {
  it.each([
    // U and r_h in closed form: Plummer 1911, Hernquist 1990, Jaffe 1983, Dehnen 1993, textbook; the King
    // model as integrated apart.
    [{ model: 'plummer' }, (-3 * Math.PI) / 32, 1.3047660265041],
    [{ model: 'hernquist' }, -1 / 6, 1 + Math.SQRT2],
    [{ model: 'jaffe' }, -1 / 2, 1],
    [{ model: 'dehnen', innerSlope: 0 }, -1 / 10, 3.8473221019],
    [{ model: 'dehnen', innerSlope: 1.5 }, -1 / 4, 1.7024143839],
    [{ model: 'dehnen', innerSlope: 2.4 }, -2.5, 0.45981195171],
    [{ model: 'king', centralPotential: 6 }, -0.5 / 3.29280638, 2.64686762],
    [{ model: 'uniform' }, -3 / 5, 0.7937005259841],
  ] as const)('%j', (options, energy, halfMass) => {
    const figures = modelFigures({ ...options, count });
    within(figures.potential ?? 0, energy, 3e-9); // nine digits of the King model; the others are closed
    within(figures.halfMassRadius, halfMass, 3e-9);
    within(figures.kinetic ?? 0, -energy / 2, 3e-9);
    expect(figures.virialRatio).toBe(1);
    within(figures.virialRadius ?? 0, -1 / (2 * energy), 3e-9);
    // and in other units: U as G M²/a
    const scaled = modelFigures({ ...options, count, mass: 3, scaleRadius: 5 }, 7);
    within(scaled.potential ?? 0, ((7 * 9) / 5) * energy, 3e-9);
    within(scaled.halfMassRadius, 5 * halfMass, 3e-9);
    within(scaled.virialRadius ?? 0, -5 / (2 * energy), 3e-9);
    expect(scaled.mass).toBe(3);
  });

  it('have an edge if the model has one', () => {
    expect(modelFigures({ model: 'jaffe', count }).edge).toBeNull();
    expect(modelFigures({ model: 'uniform', count, scaleRadius: 3 }).edge).toBe(3);
    within(modelFigures({ model: 'king', centralPotential: 6, count }).edge ?? 0, 17.9916097, 3e-9);
    expect(modelFigures({ model: 'king', centralPotential: 6, count, cut: 5 }).edge).toBe(5);
  });

  it('say null where U diverges', () => {
    const { potential, kinetic, virialRatio, virialRadius, halfMassRadius } = modelFigures({
      model: 'dehnen',
      innerSlope: 2.5,
      count,
    });
    expect([potential, kinetic, virialRatio, virialRadius]).toEqual([null, null, null, null]);
    within(halfMassRadius, 1 / 3, 1e-12); // y = (1/2)², by hand
  });

  it('refuse what cannot be made', () => {
    expect(() => modelFigures({ model: 'plummer', count }, 0)).toThrow(
      expect.objectContaining({ code: 'usage.modelOption' }),
    );
    expect(() => modelFigures({ model: 'king', count })).toThrow(
      expect.objectContaining({ code: 'usage.modelOption' }),
    );
  });
});

describe('figures of a part inside a cut', () => {
  it.each([
    // 2T/|W| without the surface term, from the Jeans equation (no source; also in closed-forms.test.ts).
    [{ model: 'plummer', cut: 1 }, 1.7373573682],
    [{ model: 'plummer', cut: 1.3047660265041 }, 1.4043632054],
    [{ model: 'hernquist', cut: 1 + Math.SQRT2 }, 1.14538599],
    [{ model: 'hernquist', cut: 10 }, 1.01686501],
  ] as const)('%j', (options, ratio) => {
    within(modelFigures({ ...options, count }).virialRatio ?? 0, ratio, 1e-8);
  });

  it('of the uniform sphere, by hand', () => {
    // Inside R: U = −3R⁵/5, S = 4πR³ρσ² = 3R³ (1 − R²)/2.
    const figures = modelFigures({ model: 'uniform', count, cut: 0.5 });
    within(figures.potential ?? 0, -0.6 / 32, 1e-14);
    within(figures.mass, 1 / 8, 1e-15);
    within(figures.kinetic ?? 0, (0.6 / 32 + (3 / 8) * 0.375) / 2, 1e-14);
    within(figures.halfMassRadius, 0.5 * 0.5 ** (1 / 3), 1e-12);
  });

  it('with anisotropy, from T by the dispersions', () => {
    // T = ½ ∫ (σ_r² + 2σ_t²) dM with σ_t² = σ_r²/(1 + r²/r_a²) and the Jeans equation, by the quadrature
    // of the tests.
    const ra = 0.8;
    const cut = 2;
    const weight = (r: number) => 1 + (r / ra) ** 2;
    const radial = (r: number) =>
      integrate(
        (x) => (hernquist.density(x) * weight(x) * hernquist.enclosedMass(x)) / x ** 2,
        r,
        Infinity,
        1 / 16,
      ) /
      hernquist.density(r) /
      weight(r);
    const kinetic = integrate(
      (r) => 2 * Math.PI * r * r * hernquist.density(r) * radial(r) * (1 + 2 / weight(r)),
      0,
      cut,
      1 / 16,
    );
    const figures = modelFigures({ model: 'hernquist', count, anisotropyRadius: ra, cut });
    within(figures.kinetic ?? 0, kinetic, 1e-6);
  });
});

describe('figures of two components', () => {
  const options: SphereOptions = {
    ...{ model: 'hernquist', count, mass: 2, scaleRadius: 3 },
    second: { model: 'dehnen', innerSlope: 0.5, count, mass: 18, scaleRadius: 12 },
  };
  const halo = dehnen(0.5);
  const mass = (r: number) => 2 * hernquist.enclosedMass(r / 3) + 18 * halo.enclosedMass(r / 12);
  const density = (r: number) =>
    (2 / 27) * hernquist.density(r / 3) + (18 / 1728) * halo.density(r / 12);

  it('are those of both together', () => {
    const figures = modelFigures(options, 0.5);
    const energy = -0.5 * integrate((r) => 4 * Math.PI * r * density(r) * mass(r), 0, Infinity);
    within(figures.potential ?? 0, energy, 1e-10);
    within(mass(figures.halfMassRadius), 10, 1e-12);
    expect(figures.mass).toBe(20);
    within(figures.virialRadius ?? 0, (0.5 * 400) / (-2 * energy), 1e-10);
  });

  it('two halves of one model are the model', () => {
    const half = { model: 'jaffe', count, mass: 0.5 } as const;
    const figures = modelFigures({ ...half, second: half, cut: 2 });
    const whole = modelFigures({ model: 'jaffe', count, cut: 2 });
    within(figures.potential ?? 0, whole.potential ?? 0, 1e-12);
    within(figures.virialRatio ?? 0, whole.virialRatio ?? 0, 1e-12);
  });
});
