/** Speeds that come from a tabulated distribution function: Jaffe, Dehnen, anisotropy, two components. */
import { describe, expect, it } from 'vitest';
import { dehnen, dehnenProfile } from '../../src/models/dehnen.ts';
import { DistributionFunction } from '../../src/models/distribution.ts';
import { king } from '../../src/models/king.ts';
import { makeModel, MODELS, type MakeOptions } from '../../src/models/make.ts';
import { plummer } from '../../src/models/plummer.ts';
import type { Profile, SphericalModel } from '../../src/models/model.ts';
import { Random } from '../../src/numerics/random.ts';
import type { Particles } from '../../src/snapshot/particles.ts';
import { integrate } from './quadrature.ts';
import { kolmogorov, KOLMOGOROV_LIMIT, radius, speedSquared } from './samples.ts';

/**
 * Distribution function of u with density u² f(ψ − u²/2), from a table over 0 ≤ u ≤ √(2ψ) that is fine at
 * small u.
 */
function speedCdf(psi: number, slow: number, f: (energy: number) => number) {
  const nodes = 3000;
  const escape = Math.sqrt(2 * psi);
  const node = (k: number) => slow * Math.sinh((k / nodes) * Math.asinh(escape / slow));
  const density = (u: number) => u * u * f(Math.max(1e-300, psi - (u * u) / 2));
  const table = new Float64Array(nodes + 1);
  for (let k = 1; k <= nodes; k++) {
    const [a, b] = [node(k - 1), node(k)];
    table[k] = table[k - 1] + (b - a) * density((a + b) / 2);
  }
  return (u: number) => {
    const k = Math.min(nodes, (nodes * Math.asinh(u / slow)) / Math.asinh(escape / slow));
    const low = Math.min(nodes - 1, Math.floor(k));
    return (table[low] + (k - low) * (table[low + 1] - table[low])) / table[nodes];
  };
}

/**
 * Jaffe's f up to a factor: ρ = (e^(ψ/2) − e^(−ψ/2))⁴/(4π), and r² ρ = (1 − e^−ψ)²/(4π), by hand in
 * Eddington's integral.
 */
function jaffeF(ra: number) {
  const bend = (psi: number) =>
    4 * Math.exp(2 * psi) -
    4 * Math.exp(psi) -
    4 * Math.exp(-psi) +
    4 * Math.exp(-2 * psi) +
    (4 * Math.exp(-2 * psi) - 2 * Math.exp(-psi)) / (ra * ra);
  return (q: number) => integrate((s) => bend(q - s * s), 0, Math.sqrt(q), 1 / 8);
}
/** Plummer's f up to a factor (Merritt 1985, form). */
const plummerF = (ra: number) => (q: number) =>
  (1 - ra ** -2) * q ** 3.5 + (7 / 16) * ra ** -2 * q ** 1.5;

describe('speeds at one radius follow the closed distribution function', () => {
  const plummerProfile = plummer.profile as Profile;
  it.each([
    ['jaffe', Infinity, 1e-6, dehnenProfile(2)],
    ['jaffe', Infinity, 0.1, dehnenProfile(2)],
    ['jaffe', Infinity, 20, dehnenProfile(2)],
    // Its well has a bottom, but so far down that proposals from there would hardly ever do.
    ['jaffe', Infinity, 0.1, dehnenProfile(2 - 1e-12)],
    ['jaffe', 0.1, 0.01, dehnenProfile(2)],
    ['jaffe', 0.1, 5, dehnenProfile(2)],
    ['plummer', Infinity, 1, plummerProfile],
    ['plummer', 0.76, 1e-3, plummerProfile],
    ['plummer', 0.76, 0.5, plummerProfile],
    ['plummer', 0.76, 30, plummerProfile],
  ] as const)('%s, r_a = %d, r = %d', (name, ra, r, profile) => {
    const f = name === 'jaffe' ? jaffeF(ra) : plummerF(ra);
    const cdf = speedCdf(-profile.potential(r), 0.1, f);
    const sampler = new DistributionFunction(profile, profile, ra);
    const random = new Random(3);
    const speeds = Float64Array.from({ length: 40_000 }, () => sampler.drawSpeed(r, random));
    expect(kolmogorov(speeds, cdf)).toBeLessThan(KOLMOGOROV_LIMIT);
  });
});

/**
 * Radial and tangential dispersions of shells of equal numbers, in units of those expected, with errors.
 */
function shells(
  set: Particles,
  bodies: readonly number[],
  radialSquared: (r: number) => number,
  ra: number,
) {
  const sorted = [...bodies].sort((a, b) => radius(set, a) - radius(set, b));
  const count = 10;
  return Array.from({ length: count }, (_, k) => {
    const own = sorted.slice((k * sorted.length) / count, ((k + 1) * sorted.length) / count);
    const sums = { radial: 0, radialFourth: 0, tangential: 0, tangentialFourth: 0 };
    for (const i of own) {
      const r = radius(set, i);
      const vr = (set.x[i] * set.vx[i] + set.y[i] * set.vy[i] + set.z[i] * set.vz[i]) / r;
      const expected = radialSquared(r);
      const radial = (vr * vr) / expected;
      const tangential = ((speedSquared(set, i) - vr * vr) / 2 / expected) * (1 + (r / ra) ** 2);
      sums.radial += radial / own.length;
      sums.radialFourth += (radial * radial) / own.length;
      sums.tangential += tangential / own.length;
      sums.tangentialFourth += (tangential * tangential) / own.length;
    }
    return {
      radial: sums.radial,
      radialError: Math.sqrt((sums.radialFourth - sums.radial ** 2) / own.length),
      tangential: sums.tangential,
      tangentialError: Math.sqrt((sums.tangentialFourth - sums.tangential ** 2) / own.length),
    };
  });
}

/**
 * σ_r² from the Jeans equation with β = r²/(r² + r_a²), by the quadrature of the tests, tabulated in ln r.
 */
function jeans(
  density: (r: number) => number,
  mass: (r: number) => number,
  ra: number,
  range: readonly [number, number],
  edge: number,
) {
  const nodes = 400;
  const [from, to] = [Math.log(range[0]), Math.min(Math.log(range[1]), Math.log(edge) - 1e-6)];
  const table = Float64Array.from({ length: nodes + 1 }, (_, k) => {
    const r = Math.exp(from + ((to - from) * k) / nodes);
    const pressure = integrate(
      (x) => {
        const at = r * Math.exp(x);
        return (density(at) * (1 + (at / ra) ** 2) * mass(at)) / at;
      },
      0,
      Math.log(edge / r),
      1 / 16,
    );
    return pressure / density(r) / (1 + (r / ra) ** 2);
  });
  return (r: number) => {
    const at = Math.min(nodes - 1e-9, Math.max(0, ((Math.log(r) - from) / (to - from)) * nodes));
    const low = Math.floor(at);
    return table[low] * (table[low + 1] / table[low]) ** (at - low); // linear in ln r and ln σ²: 1e-4
  };
}

const count = 60_000;
const everyBody = Array.from({ length: count }, (_, i) => i);

describe('dispersions of drawn bodies are those of the Jeans equation', () => {
  const cases: [string, Omit<MakeOptions, 'count' | 'seed'>, SphericalModel][] = [
    ['jaffe', { model: 'jaffe' }, MODELS.jaffe],
    ['dehnen 0', { model: 'dehnen', innerSlope: 0 }, dehnen(0)],
    ['dehnen 0.5', { model: 'dehnen', innerSlope: 0.5 }, dehnen(0.5)],
    ['dehnen 1.9', { model: 'dehnen', innerSlope: 1.9 }, dehnen(1.9)],
    ['dehnen 2.4', { model: 'dehnen', innerSlope: 2.4 }, dehnen(2.4)],
    ['king 6', { model: 'king', centralPotential: 6 }, king(6)],
    ['plummer r_a = 1', { model: 'plummer', anisotropyRadius: 1 }, plummer],
    ['hernquist r_a = 0.3', { model: 'hernquist', anisotropyRadius: 0.3 }, MODELS.hernquist],
    ['jaffe r_a = 0.1', { model: 'jaffe', anisotropyRadius: 0.1 }, MODELS.jaffe],
    ['dehnen 1.5, r_a = 2', { model: 'dehnen', innerSlope: 1.5, anisotropyRadius: 2 }, dehnen(1.5)],
    ['king 4, r_a = 2', { model: 'king', centralPotential: 4, anisotropyRadius: 2 }, king(4)],
  ];
  it.each(cases)('%s', (_, options, model) => {
    const set = makeModel({ ...options, count, seed: 17 });
    const fractions = Float64Array.from(everyBody, (i) => model.enclosedMass(radius(set, i)));
    expect(kolmogorov(fractions, (f) => f)).toBeLessThan(KOLMOGOROV_LIMIT);
    const ra = options.anisotropyRadius ?? Infinity;
    const range = [model.radiusOfMass(1e-6), model.radiusOfMass(1 - 1e-6)] as const;
    const expected = jeans(
      (r) => model.density(r),
      (r) => model.enclosedMass(r),
      ra,
      range,
      model.edge,
    );
    for (const shell of shells(set, everyBody, expected, ra)) {
      expect(Math.abs(shell.radial - 1)).toBeLessThan(4.5 * shell.radialError + 2e-4);
      expect(Math.abs(shell.tangential - 1)).toBeLessThan(4.5 * shell.tangentialError + 2e-4);
      expect(shell.radialError).toBeLessThan(0.06);
    }
  });
});

describe('two components in a common equilibrium', () => {
  const share = count / 2;
  const first = everyBody.slice(0, share);
  const second = everyBody.slice(share);
  const cases: [
    string,
    Omit<MakeOptions, 'count' | 'seed'>,
    SphericalModel,
    SphericalModel,
    number,
    number,
  ][] = [
    [
      'stars in a halo',
      {
        model: 'hernquist',
        second: { model: 'dehnen', innerSlope: 0.5, count: share, mass: 9, scaleRadius: 4 },
      },
      MODELS.hernquist,
      dehnen(0.5),
      9,
      4,
    ],
    [
      'anisotropic stars in a halo',
      {
        model: 'jaffe',
        anisotropyRadius: 1,
        second: { model: 'hernquist', count: share, mass: 5, scaleRadius: 3 },
      },
      MODELS.jaffe,
      MODELS.hernquist,
      5,
      3,
    ],
    [
      'a sphere about a small deep one',
      {
        model: 'jaffe',
        second: { model: 'jaffe', count: share, mass: 0.01, scaleRadius: 1e-8 },
      },
      MODELS.jaffe,
      MODELS.jaffe,
      0.01,
      1e-8,
    ],
    [
      'a small King sphere in a large one',
      {
        model: 'king',
        centralPotential: 5,
        second: { model: 'king', centralPotential: 3, count: share, mass: 2, scaleRadius: 2.5 },
      },
      king(5),
      king(3),
      2,
      2.5,
    ],
    [
      'two species of one profile',
      { model: 'plummer', second: { model: 'plummer', count: share, mass: 3 } },
      plummer,
      plummer,
      3,
      1,
    ],
  ];
  it.each(cases)('%s', (_, options, one, two, m2, a2) => {
    const set = makeModel({ ...options, count: share, seed: 23 });
    expect(set.componentNames).toEqual(['first', 'second']);
    expect(set.columns.component?.filter((k) => k === 0)).toHaveLength(share);
    expect(set.columns.component?.[share]).toBe(1);
    const mass = (r: number) => one.enclosedMass(r) + m2 * two.enclosedMass(r / a2);
    for (const [bodies, model, m, a, ra] of [
      [first, one, 1, 1, options.anisotropyRadius ?? Infinity],
      [second, two, m2, a2, Infinity],
    ] as const) {
      const fractions = Float64Array.from(bodies, (i) => model.enclosedMass(radius(set, i) / a));
      expect(kolmogorov(fractions, (f) => f)).toBeLessThan(KOLMOGOROV_LIMIT);
      expect(set.mass[bodies[0]]).toBeCloseTo(m / share, 18);
      const range = [a * model.radiusOfMass(1e-6), a * model.radiusOfMass(1 - 1e-6)] as const;
      const expected = jeans((r) => model.density(r / a), mass, ra, range, model.edge * a);
      for (const shell of shells(set, bodies, expected, ra)) {
        expect(Math.abs(shell.radial - 1)).toBeLessThan(4.5 * shell.radialError + 2e-4);
        expect(Math.abs(shell.tangential - 1)).toBeLessThan(4.5 * shell.tangentialError + 2e-4);
      }
    }
  });
});
