import { describe, expect, it } from 'vitest';
import { scaledProfile, wellOf } from '../../src/models/composite.ts';
import { dehnenProfile } from '../../src/models/dehnen.ts';
import { leastAnisotropyRadius, logDistribution } from '../../src/models/inversion.ts';
import { radialDispersionSquared } from '../../src/models/jeans.ts';
import { king } from '../../src/models/king.ts';
import { plummer } from '../../src/models/plummer.ts';
import type { Profile, Well } from '../../src/models/model.ts';
import { integrate } from './quadrature.ts';
import { within } from './within.ts';

const plummerProfile = plummer.profile as Profile;

/** f at the energy of rest at r. */
const distribution = (profile: Profile, r: number, ra = Infinity, well: Well = profile) =>
  Math.exp(logDistribution(profile, well, ra, r));

describe('closed distribution functions', () => {
  // For ρ ∝ ψⁿ Eddington's integral is n (n−1) B(n−1, ½) Q^(n−3/2)/(√8 π²); B is 2, 4/3 and 32/35 for n =
  // 2, 3 and 5.
  const factor = 1 / (Math.sqrt(8) * Math.PI ** 2);
  const power = (n: number, beta: number, q: number) =>
    factor * n * (n - 1) * beta * q ** (n - 1.5);

  it.each([Infinity, 10, 1, 0.76])('of the Plummer sphere with r_a = %d', (ra) => {
    // ρ_Q = 3/(4π) ((1 − 1/r_a²) ψ⁵ + ψ³/r_a²), as r² = ψ^−2 − 1 (Merritt 1985, AJ 90, 1027, form).
    for (const r of [1e-3, 0.1, 1, 10, 1e4, 1e8]) {
      const q = -plummer.potential(r);
      const fifth = (1 - ra ** -2) * power(5, 32 / 35, q);
      const third = ra ** -2 * power(3, 4 / 3, q);
      const expected = (3 / (4 * Math.PI)) * (fifth + third);
      within(distribution(plummerProfile, r, ra), expected, 1e-10); // digits lost at r = 1e-3: (a/r)²
    }
  });

  it.each([Infinity, 5, 1, 0.21])('of the Hernquist model with r_a = %d', (ra) => {
    // Hernquist 1990, ApJ 356, 359, equation 17; the part in 1/r_a² from r² ρ = (ψ² − ψ³)/(2π), by hand.
    const profile = dehnenProfile(1);
    for (const r of [1e-4, 0.01, 0.3, 1, 10, 30]) {
      const e = 1 / (1 + r);
      const q = Math.sqrt(e);
      const p = r / (1 + r);
      const bracket = 3 * Math.asin(q) + q * Math.sqrt(p) * (1 - 2 * e) * (8 * e * e - 8 * e - 3);
      const isotropic = bracket / p ** 2.5 / (8 * Math.SQRT2 * Math.PI ** 3);
      const radial = (power(2, 2, e) - power(3, 4 / 3, e)) / (2 * Math.PI * ra * ra);
      within(distribution(profile, r, ra), isotropic + radial, 3e-11); // the bracket cancels at r = 30
    }
  });

  it.each([Infinity, 1, 0.05])('of the Jaffe model with r_a = %d', (ra) => {
    // ρ = (e^(ψ/2) − e^(−ψ/2))⁴/(4π) and r² ρ = (1 − e^−ψ)²/(4π), as e^−ψ = r/(1+r): derivatives by hand,
    // then Eddington's integral with ψ = Q − s². Jaffe 1983 and Merritt 1985 write it with Dawson's
    // integral.
    const bend = (psi: number) =>
      (4 * Math.exp(2 * psi) - 4 * Math.exp(psi) - 4 * Math.exp(-psi) + 4 * Math.exp(-2 * psi)) /
        (4 * Math.PI) +
      (4 * Math.exp(-2 * psi) - 2 * Math.exp(-psi)) / (4 * Math.PI * ra * ra);
    for (const r of [1e-8, 1e-4, 0.01, 0.3, 1, 10, 1e3]) {
      const q = Math.log1p(1 / r);
      const expected = factor * integrate((s) => 2 * bend(q - s * s), 0, Math.sqrt(q));
      within(distribution(dehnenProfile(2), r, ra), expected, 1e-9); // exponentials cancel at r = 1e3
    }
  });

  it.each([0.5, 3, 6, 12])('of the King model W0 = %d: e^W − 1', (w0) => {
    // King 1966, AJ 71, 64. Only its shape is compared; the table of the model is good to 1e-9 and worse
    // at the edge.
    const model = king(w0);
    const shape = (r: number) =>
      Math.expm1(-(model.potential(r) + 1 / model.tidalRadius) / model.sigmaSquared);
    const ratio = (share: number) => {
      const r = share * model.tidalRadius;
      return distribution(model.profile, r) / shape(r);
    };
    for (const share of [1e-4, 0.01, 0.3, 0.9, 0.99]) within(ratio(share), ratio(0.1), 2e-7);
    within(ratio(0.99999), ratio(0.1), 1e-5);
  });
});

describe('moments of the distribution function give density and dispersions back', () => {
  // ρ = 4π/(1 + r²/r_a²) ∫ f u² du and ρ σ_r² = 4π/(3 (1 + r²/r_a²)) ∫ f u⁴ du (Merritt 1985), with u² = 2
  // (ψ − Q).
  const heavy = scaledProfile({ profile: dehnenProfile(0.5), mass: 9, scaleRadius: 4 });
  const cluster = scaledProfile({ profile: king(5).profile, mass: 0.3, scaleRadius: 0.2 });
  const cases: [string, Profile, readonly Profile[], number][] = [
    ['γ = 0', dehnenProfile(0), [], Infinity],
    ['γ = 0.5, r_a = 1', dehnenProfile(0.5), [], 1],
    ['γ = 1.5', dehnenProfile(1.5), [], Infinity],
    ['γ = 2.4, r_a = 0.3', dehnenProfile(2.4), [], 0.3],
    ['Hernquist with a heavy second component', dehnenProfile(1), [heavy], Infinity],
    ['the same with r_a = 2', dehnenProfile(1), [heavy], 2],
    ['γ = 0.5 with the lighter one', heavy, [dehnenProfile(1)], Infinity],
    ['King W0 = 6, r_a = 4', king(6).profile, [], 4],
    ['King in a King', cluster, [king(4).profile], Infinity],
  ];
  it.each(cases)('%s', (_, profile, others, ra) => {
    const well = others.length === 0 ? profile : wellOf([profile, ...others]);
    for (const share of [1e-4, 0.1, 0.9]) {
      const r = profile.radiusOfMass(share);
      const reach = Math.log(profile.edge / r);
      const moment = (power: number) =>
        (4 *
          Math.PI *
          integrate(
            (x) => {
              const at = r * Math.exp(x);
              const u2 = 2 * well.potentialDrop(r, x);
              return (
                distribution(profile, at, ra, well) *
                u2 ** ((power - 1) / 2) *
                (well.enclosedMass(at) / at)
              );
            },
            0,
            reach,
            1 / 32,
          )) /
        (1 + (r / ra) ** 2);
      within(moment(2), profile.density(r), 1e-6); // the step is coarser; the error of twice the step was 3e-5
      const dispersion = radialDispersionSquared(profile, well, ra, r);
      within(moment(4) / 3 / moment(2), dispersion, 1e-6);
      // and the Jeans equation again, by the quadrature of the tests
      const pressure = integrate(
        (x) => {
          const at = r * Math.exp(x);
          return profile.density(at) * (1 + (at / ra) ** 2) * (well.enclosedMass(at) / at);
        },
        0,
        reach,
      );
      within(dispersion, pressure / profile.density(r) / (1 + (r / ra) ** 2), 1e-8);
    }
  });
});

describe('two halves of one model', () => {
  it('have the distribution function of the whole, in its units', () => {
    const half = dehnenProfile(1);
    const well = wellOf([half, scaledProfile({ profile: half, mass: 1, scaleRadius: 1 })]);
    // All potentials are twice those of one half, whose density stays: f goes as ρ/ψ^(3/2).
    for (const r of [1e-3, 1, 50]) {
      within(distribution(half, r, Infinity, well), distribution(half, r) / 2 ** 1.5, 1e-12);
    }
  });
});

describe('no equilibrium', () => {
  it('below the least anisotropy radius', () => {
    // Plummer: f(Q) at the centre goes as 1 − 9/(16 r_a²), so 3/4 by hand. Dehnen γ = 1: 0.202 (Baes &
    // Dejonghe 2002, A&A 393, 485, from memory); γ = 0 and 2: 0.44 and 0.022 (Carollo, de Zeeuw & van der
    // Marel 1995, MNRAS 276, 1131, and Merritt 1985, from memory). The search is good to 0.1 %.
    within(leastAnisotropyRadius(plummerProfile, plummerProfile) ?? 0, 0.75, 2e-3);
    for (const [slope, least, digits] of [
      [0, 0.44, 0.01],
      [1, 0.202, 3e-3],
      [2, 0.022, 0.01],
    ]) {
      const profile = dehnenProfile(slope);
      within(leastAnisotropyRadius(profile, profile) ?? 0, least, digits);
    }
  });

  it('for a core in a cusp', () => {
    // d²ρ/dψ² at the centre has the sign of −γ of the cusp for a density that is flat there (by hand).
    const cusp = scaledProfile({ profile: dehnenProfile(1), mass: 10, scaleRadius: 10 });
    const well = wellOf([plummerProfile, cusp]);
    expect(leastAnisotropyRadius(plummerProfile, well)).toBeNull();
    expect(distribution(plummerProfile, 1e-3, Infinity, well)).toBeNaN();
    expect(distribution(plummerProfile, 30, Infinity, well)).toBeGreaterThan(0);
  });
});
