import { describe, expect, it } from 'vitest';
import { dehnen, dehnenProfile } from '../../src/models/dehnen.ts';
import { hernquist } from '../../src/models/hernquist.ts';
import { MODELS } from '../../src/models/make.ts';
import { plummer } from '../../src/models/plummer.ts';
import type { Profile } from '../../src/models/model.ts';
import { integrate } from './quadrature.ts';
import { within } from './within.ts';

describe('values that are known', () => {
  // Dehnen 1993, MNRAS 265, 250 (forms): U = −1/(2 (5 − 2γ)), r_f = y/(1 − y) with y = f^(1/(3 − γ));
  // digits worked out apart from this code.
  it.each([
    [0, -0.1, 0.866224836, 3.8473221019, 27.9765913639],
    [0.5, -0.125, 0.661425342, 3.1298129601, 23.2315658658],
    [1, -1 / 6, 0.4624752956, 2.4142135624, 18.4868329805],
    [1.5, -0.25, 0.2746054115, 1.7024143839, 13.7426852523],
    [2, -0.5, 0.1111111111, 1, 9],
  ])('γ = %d', (slope, energy, r10, r50, r90) => {
    const model = dehnen(slope);
    within(model.potentialEnergy, energy, 1e-15);
    within(model.radiusOfMass(0.1), r10, 1e-9);
    within(model.radiusOfMass(0.5), r50, 1e-10);
    within(model.radiusOfMass(0.9), r90, 1e-11);
  });

  it.each([
    [0, 2.90355902],
    [0.5, 2.3584917],
    [1, 1.81527096],
    [1.5, 1.27566306],
    [2, 0.74472834],
  ])('γ = %d: half of the mass lies inside the projected radius R_e = %d', (slope, R) => {
    // Hernquist 1990 gives 1.8153 for γ = 1. Mass inside R by quadrature along all lines of sight.
    const model = dehnen(slope);
    const outside = integrate(
      (r) => 4 * Math.PI * r * r * model.density(r) * (1 - Math.sqrt(1 - (R / r) ** 2)),
      R * (1 + 1e-15),
      Infinity,
    );
    // Nine digits of R_e and dM/d ln R = 0.24: 1e-9 at most.
    expect(Math.abs(model.enclosedMass(R) + outside - 0.5)).toBeLessThan(2e-9);
  });

  it('Jaffe', () => {
    // Jaffe 1983, MNRAS 202, 995: ρ = 1/(4π r² (1+r)²), M = r/(1+r), φ = ln(r/(1+r)), U = −1/2, r_h = 1.
    const { jaffe } = MODELS;
    for (const r of [1e-6, 0.1, 1, 30, 1e5]) {
      within(jaffe.density(r), 1 / (4 * Math.PI * r * r * (1 + r) ** 2), 1e-14);
      within(jaffe.enclosedMass(r), r / (1 + r), 1e-14);
      within(jaffe.potential(r), -Math.log1p(1 / r), 1e-14);
    }
    expect(jaffe.potentialEnergy).toBe(-0.5);
    within(jaffe.radiusOfMass(0.5), 1, 1e-15);
    expect(jaffe.name).toBe('jaffe');
    // Isotropic dispersion from the Jeans equation by hand: ∫ (1−y)⁴/y³ dy, y = r/(1+r).
    for (const r of [0.01, 0.3, 1, 3]) {
      const y = r / (1 + r);
      const integral = 1 / (2 * y * y) - 4 / y - 6 * Math.log(y) + 4 * y - (y * y) / 2;
      within(jaffe.radialDispersionSquared(r), (y * y * integral) / (1 - y) ** 4, 1e-10); // terms cancel
    }
    expect(jaffe.radialDispersionSquared(0)).toBe(0.5);
  });

  it('γ = 0 has the dispersion (1 + 6r)/(30 (1 + r)²)', () => {
    // Dehnen 1993, isotropic dispersion for γ = 0 (from memory; by hand: ∫ y (1−y)⁴ dy).
    const model = dehnen(0);
    for (const r of [0, 0.01, 1, 20, 1e4]) {
      within(model.radialDispersionSquared(r), (1 + 6 * r) / (30 * (1 + r) ** 2), 1e-12);
    }
  });

  it('γ = 1 is the model of Hernquist, coded apart', () => {
    const model = dehnen(1);
    expect(model.potentialEnergy).toBe(hernquist.potentialEnergy);
    for (const r of [1e-8, 1e-3, 0.3, 1, 10, 1e4, 1e9]) {
      within(model.density(r), hernquist.density(r), 1e-13);
      within(model.enclosedMass(r), hernquist.enclosedMass(r), 1e-14);
      within(model.potential(r), hernquist.potential(r), 1e-14);
      within(model.radialDispersionSquared(r), hernquist.radialDispersionSquared(r), 1e-11);
    }
    for (const f of [1e-12, 0.1, 0.5, 0.999])
      within(model.radiusOfMass(f), hernquist.radiusOfMass(f), 1e-13);
  });

  it('U diverges from γ = 5/2 on, and the mass does not', () => {
    expect(dehnen(2.5).potentialEnergy).toBe(-Infinity);
    within(dehnen(2.9).enclosedMass(dehnen(2.9).radiusOfMass(0.3)), 0.3, 1e-14);
    expect(dehnen(2.2).radialDispersionSquared(0)).toBe(Infinity);
    expect(dehnen(1.2).radialDispersionSquared(0)).toBe(0);
  });
});

const profiles: [string, Profile][] = [
  ['plummer', plummer.profile as Profile],
  ...[0, 0.5, 1, 1.9, 2, 2.1, 2.7].map((slope): [string, Profile] => [
    `γ = ${slope}`,
    dehnenProfile(slope),
  ]),
];
describe.each(profiles)('%s as the inversion sees it', (_, profile) => {
  const radii = [1e-4, 0.05, 0.7, 3, 200];

  it('has the slopes of its own density and mass', () => {
    const h = 1e-4; // Differences of second order: errors of h², and of 1e-16/h² for the second derivative.
    for (const r of radii) {
      const at = (x: number) => profile.logDensity(r * Math.exp(x));
      expect(Math.abs(profile.logSlope(r) - (at(h) - at(-h)) / (2 * h))).toBeLessThan(1e-7);
      const second = (at(h) - 2 * at(0) + at(-h)) / h ** 2;
      expect(Math.abs(profile.logCurvature(r) - second)).toBeLessThan(1e-5);
      const mass = (x: number) => Math.log(profile.enclosedMass(r * Math.exp(x)));
      expect(Math.abs(profile.massSlope(r) - (mass(h) - mass(-h)) / (2 * h))).toBeLessThan(1e-7);
      within(Math.exp(profile.logDensity(r)), profile.density(r), 1e-13);
    }
  });

  it('drops by ∫ M/r² dr, near and far, also where the potential is nearly flat', () => {
    for (const r of radii) {
      for (const x of [1e-9, 1e-3, 1, 20]) {
        const fall = integrate(
          (s) => profile.enclosedMass(r * Math.exp(s)) / (r * Math.exp(s)),
          0,
          x,
        );
        within(profile.potentialDrop(r, x), fall, 1e-12);
        const plain = profile.potential(r * Math.exp(x)) - profile.potential(r);
        expect(Math.abs(profile.potentialDrop(r, x) - plain)).toBeLessThan(
          1e-15 * Math.abs(profile.potential(r)) * 4,
        );
      }
      if (profile.depthBelow(1) === Infinity) continue;
      const depth = integrate(
        (s) => profile.enclosedMass(r * Math.exp(-s)) / (r * Math.exp(-s)),
        0,
        Infinity,
      );
      within(profile.depthBelow(r), depth, 1e-12);
    }
  });
});
