import { describe, expect, it } from 'vitest';
import { UsageError } from '../../src/errors.ts';
import { dehnen } from '../../src/models/dehnen.ts';
import { energyBracket, hernquist } from '../../src/models/hernquist.ts';
import { plummer } from '../../src/models/plummer.ts';
import { uniform } from '../../src/models/uniform.ts';
import type { SphericalModel } from '../../src/models/model.ts';
import { integrate } from './quadrature.ts';
import { within } from './within.ts';

describe('quadrature of these tests', () => {
  it('gives textbook integrals', () => {
    // ∫ x^-½ = 2, ∫ ln x = −1, ∫ 1/(1+x²) = π/2, ∫ x² e^-x = 2; rounding of some 600 terms
    within(
      integrate((x) => 1 / Math.sqrt(x), 0, 1),
      2,
      1e-13,
    );
    within(
      integrate((x) => Math.log(x), 0, 1),
      -1,
      1e-13,
    );
    within(
      integrate((x) => 1 / (1 + x * x), 0, Infinity),
      Math.PI / 2,
      1e-13,
    );
    within(
      integrate((x) => x * x * Math.exp(-x), 0, Infinity),
      2,
      1e-13,
    );
  });
});

describe('values that are known', () => {
  it('Plummer', () => {
    // U = −3π/32 (Plummer 1911; Binney & Tremaine 2008, section 2.2.2) and r_v = 1/(2|U|) = 16/(3π).
    within(plummer.potentialEnergy, -0.294524311274, 1e-12);
    within(-1 / (2 * plummer.potentialEnergy), 1.6976527263136, 1e-12);
    // M(r) = r³/(1+r²)^(3/2) solved for r by hand: r_h = (2^(2/3) − 1)^(-1/2).
    within(plummer.radiusOfMass(0.5), 1.3047660265041, 1e-12);
    within(plummer.radiusOfMass(0.5) * -2 * plummer.potentialEnergy, 0.7685706306598, 1e-12);
    within(plummer.radiusOfMass(0.1), 0.5240280636, 1e-9);
    within(plummer.radiusOfMass(0.9), 3.707112792, 1e-9);
    // Circular speed squared is greatest, 2/3^1.5, at r = √2.
    within(plummer.enclosedMass(Math.SQRT2) / Math.SQRT2, 2 / 3 ** 1.5, 1e-14);
  });

  it('Hernquist', () => {
    // Hernquist 1990, ApJ 356, 359: U = −1/6, r_h = 1 + √2, R_e = 1.8153.
    within(hernquist.potentialEnergy, -1 / 6, 1e-15);
    within(hernquist.radiusOfMass(0.5), 1 + Math.SQRT2, 1e-15);
    within(hernquist.radiusOfMass(0.5), 2.4142135624, 1e-10);
    within(hernquist.radialDispersionSquared(1), 0.0868441111, 1e-8);
    // Mass inside the projected radius R, by quadrature of the density along all lines of sight.
    const projected = (R: number) =>
      hernquist.enclosedMass(R) +
      integrate(
        (r) =>
          4 *
          Math.PI *
          r *
          r *
          hernquist.density(r) *
          (1 - Math.sqrt(Math.max(0, 1 - (R / r) ** 2))),
        R,
        Infinity,
      );
    // dM/dR is 0.13 there: an error of 1e-7 in R moves the mass by 1.3e-8.
    expect(Math.abs(projected(1.81527096) - 0.5)).toBeLessThan(1.3e-8);
  });

  it('uniform sphere', () => {
    // Textbook: U = −(3/5) G M²/R; r_f = f^(1/3).
    within(uniform.potentialEnergy, -0.6, 1e-15);
    within(uniform.radiusOfMass(0.1), 0.4641588834, 1e-9);
    within(uniform.radiusOfMass(0.5), 0.793700526, 1e-9);
    within(uniform.radiusOfMass(0.9), 0.9654893846, 1e-9);
    expect(uniform.enclosedMass(2)).toBe(1);
    expect(uniform.density(2)).toBe(0);
    expect(uniform.potential(2)).toBe(-0.5);
    expect(uniform.radialDispersionSquared(2)).toBe(0);
  });

  it('Plummer and Hernquist cut at a radius in perfect equilibrium', () => {
    // 2T/|W| of the part inside R without its surface term: from the Jeans equation (no source). The
    // surface term itself, 4πR³ρσ², is 1/16 for Plummer at R = 1 by hand.
    const cutRatio = (model: SphericalModel, R: number) => {
      const shell = (r: number) => 4 * Math.PI * r * r * model.density(r);
      const twiceKinetic = integrate((r) => 3 * model.radialDispersionSquared(r) * shell(r), 0, R);
      const clausius = integrate((r) => (shell(r) * model.enclosedMass(r)) / r, 0, R);
      return twiceKinetic / clausius;
    };
    within(cutRatio(plummer, plummer.radiusOfMass(0.5)), 1.4043632054, 1e-9);
    within(cutRatio(plummer, 1), 1.7373573682, 1e-9);
    within(cutRatio(plummer, plummer.radiusOfMass(0.9)), 1.0286036875, 1e-9);
    within(cutRatio(hernquist, 1 + Math.SQRT2), 1.14538599, 1e-8);
    within(cutRatio(hernquist, 10), 1.01686501, 1e-8);
    within(4 * Math.PI * plummer.density(1) * plummer.radialDispersionSquared(1), 0.0625, 1e-12);
  });
});

describe.each([
  ['plummer', plummer, Infinity],
  ['hernquist', hernquist, Infinity],
  ['dehnen γ = 0', dehnen(0), Infinity],
  ['dehnen γ = 0.5', dehnen(0.5), Infinity],
  ['dehnen γ = 1.5', dehnen(1.5), Infinity],
  ['jaffe', dehnen(2, 'jaffe'), Infinity],
  ['dehnen γ = 2.2', dehnen(2.2), Infinity],
  ['uniform', uniform, 1],
] as const)('%s: closed forms against quadrature of the density', (_, model, edge) => {
  // 600 terms of rounding 1e-16 each, times cancellation inside the closed forms: 1e-12.
  const tolerance = 1e-12;
  const radii = [1e-4, 0.01, 0.1, 0.3, 0.7, 0.95, 1.5, 3, 10, 100, 3000].filter((r) => r < edge);

  it.each(radii)('mass, potential and dispersion at r = %d', (r) => {
    within(
      model.enclosedMass(r),
      integrate((x) => 4 * Math.PI * x * x * model.density(x), 0, r),
      tolerance,
    );
    // φ(r) = −∫_r^∞ M/x² dx; beyond an edge the integral is 1/edge.
    const outside = edge === Infinity ? 0 : 1 / edge;
    const inside = integrate((x) => model.enclosedMass(x) / (x * x), r, edge);
    within(model.potential(r), -inside - outside, tolerance);
    // Isotropic Jeans equation (Binney & Tremaine 2008, section 4.8.1): ρσ² = ∫_r^∞ ρ M/x² dx
    const pressure = integrate(
      (x) => (model.density(x) * model.enclosedMass(x)) / (x * x),
      r,
      edge,
    );
    within(model.radialDispersionSquared(r), pressure / model.density(r), tolerance);
  });

  it('total potential energy, and 2T = |U|', () => {
    const shell = (r: number) => 4 * Math.PI * r * r * model.density(r);
    within(
      model.potentialEnergy,
      -integrate((r) => (shell(r) * model.enclosedMass(r)) / r, 0, edge),
      tolerance,
    );
    within(
      model.potentialEnergy,
      -integrate((r) => 3 * model.radialDispersionSquared(r) * shell(r), 0, edge),
      tolerance,
    );
  });

  it('radius of mass is the inverse of the enclosed mass, to the innermost and the outermost body', () => {
    for (const f of [1e-12, 1e-9, 1e-4, 0.01, 0.3, 0.5, 0.9, 0.999]) {
      within(model.enclosedMass(model.radiusOfMass(f)), f, 1e-14);
    }
    // Here M(r) itself is rounded: compare what is left outside, 1 − M, to 2^-53 each side.
    const rest = 2 ** -30;
    expect(Math.abs(1 - model.enclosedMass(model.radiusOfMass(1 - rest)) - rest)).toBeLessThan(
      2 ** -51,
    );
    expect(model.radiusOfMass(0)).toBe(0);
  });

  it.each([-0.1, 1, 1.5, NaN])('refuses a mass fraction of %d', (f) => {
    expect(() => model.radiusOfMass(f)).toThrow(UsageError);
    expect(() => model.radiusOfMass(f)).toThrow(
      expect.objectContaining({
        code: 'usage.massFraction',
        message: `The mass fraction is ${f}, but must be at least 0 and less than 1.`,
      }),
    );
  });
});

it('the Hernquist dispersion has its limits at the centre and far out', () => {
  // r (1+r)³ Στⁿ/n: goes as r ln(1/r) − 25r/12 at the centre, exactly 0 there, and as 1/(5r) far out.
  expect(hernquist.radialDispersionSquared(0)).toBe(0);
  const r = 1e-9;
  within(hernquist.radialDispersionSquared(r), r * (Math.log(1 / r) - 25 / 12), 1e-7); // next terms r ln r
  within(hernquist.radialDispersionSquared(1e9), 1 / 5e9, 1e-8); // next term relative 1/r
});

describe('bracket of the Hernquist distribution function', () => {
  it.each([1e-6, 1e-3, 0.02, 0.049, 0.051, 0.1, 0.4, 1, 1.5, Math.PI / 2])('at θ = %d', (theta) => {
    // Trigonometry turns the printed form into 8 ∫ sin⁴ 2x dx, which loses no digits; the closed form
    // used from 0.05 on has lost ten of its sixteen digits at worst there, hence 3e-11.
    const integral = 8 * integrate((x) => Math.sin(2 * x) ** 4, 0, theta);
    within(energyBracket(theta), integral, theta > 0.05 ? 3e-11 : 1e-13);
    // As printed (Hernquist 1990, ApJ 356, 359, equation 17), where it keeps its digits.
    const q = Math.sin(theta);
    const printed =
      3 * theta + q * Math.cos(theta) * (1 - 2 * q * q) * (8 * q ** 4 - 8 * q * q - 3);
    if (theta >= 0.1) within(energyBracket(theta), printed, 1e-11);
  });
});
