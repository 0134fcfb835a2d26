import { describe, expect, it } from 'vitest';
import { king } from '../../src/models/king.ts';
import { Random } from '../../src/numerics/random.ts';
import { integrate } from './quadrature.ts';
import { kolmogorov, KOLMOGOROV_LIMIT } from './samples.ts';
import { within } from './within.ts';

/** King's density from his distribution function: ∫ (e^(W − u²/2) − 1) u² du up to √(2W), unnormalised. */
const densityOf = (w: number) =>
  w <= 0 ? 0 : integrate((u) => u * u * Math.expm1(w - (u * u) / 2), 0, Math.sqrt(2 * w), 1 / 16);

describe('published values', () => {
  it.each([
    // c = log₁₀ r_t/r₀ in the table of King 1966, AJ 71, 64 (from memory), and as tabulated since (from
    // memory).
    [1, 0.3, 0.296],
    [2, 0.51, 0.505],
    [3, 0.67, 0.672],
    [4, 0.84, 0.84],
    [5, 1.03, 1.03],
    [6, 1.25, 1.255],
    [7, 1.53, 1.528],
    [8, 1.83, 1.833],
    [9, 2.12, 2.119],
    [10, 2.35, 2.35],
    [12, 2.74, 2.739],
  ])('W0 = %d: c = %d', (w0, printed, later) => {
    // Half a unit of the last digit, and one more as memory may have rounded twice.
    expect(Math.abs(king(w0).concentration - printed)).toBeLessThan(0.0075);
    expect(Math.abs(king(w0).concentration - later)).toBeLessThan(0.0015);
  });

  it.each([
    // Integrated apart from this code (no source), all in r₀: r_t, c, r_10, r_h, r_90, r_v.
    [3, 4.69940743, 0.672043099, 0.553297658, 1.25893838, 2.4078412, 1.50089277],
    [6, 17.9916097, 1.25507002, 0.893922288, 2.64686762, 7.10673863, 3.29280638],
    [9, 131.380696, 2.11853156, 2.08401914, 15.4111259, 51.8795121, 15.7277177],
  ])('W0 = %d: radii', (w0, edge, concentration, r10, r50, r90, virial) => {
    const model = king(w0);
    within(model.tidalRadius, edge, 5e-9); // nine digits
    within(model.concentration, concentration, 5e-9);
    within(model.radiusOfMass(0.1), r10, 5e-9);
    within(model.radiusOfMass(0.5), r50, 5e-9);
    within(model.radiusOfMass(0.9), r90, 5e-9);
    within(-1 / (2 * model.potentialEnergy), virial, 5e-9);
  });

  it('is the polytrope n = 5/2 for small W0', () => {
    // Lane–Emden: ξ₁ = 5.35528 (Chandrasekhar 1939, An Introduction to the Study of Stellar Structure,
    // table 4, from memory); r₀ is 3/√W₀ units of ξ. The difference from the polytrope is of order W₀.
    within((king(1e-4).tidalRadius * 3) / Math.sqrt(1e-4), 5.35528, 2e-5);
  });
});

describe.each([0.5, 3, 6, 12, 18])('W0 = %d', (w0) => {
  const model = king(w0);
  const { profile, sigmaSquared, tidalRadius: edge } = model;
  const radii = [1e-4, 0.01, 0.2, 0.5, 0.9, 0.99].map((share) => share * edge);

  it("solves Poisson's equation with King's density", () => {
    // Step by step in r, with the density by quadrature; the table is good to 1e-9, far from its edge.
    let r = 1e-3;
    const central = densityOf(w0);
    let w = w0 - 1.5 * r * r;
    let m = 3 * r ** 3;
    const slopes = (at: number, depth: number, mass: number): [number, number] => [
      -mass / (at * at),
      (9 * densityOf(depth) * at * at) / central,
    ];
    const checks = [0.01, 0.1, 0.3].map((share) => share * edge);
    for (const end of checks) {
      // Runge–Kutta of the fourth order over equal steps of ln r
      const steps = 300;
      const factor = (end / r) ** (1 / steps);
      for (let k = 0; k < steps; k++) {
        const h = r * (factor - 1);
        const [w1, m1] = slopes(r, w, m);
        const [w2, m2] = slopes(r + h / 2, w + (h / 2) * w1, m + (h / 2) * m1);
        const [w3, m3] = slopes(r + h / 2, w + (h / 2) * w2, m + (h / 2) * m2);
        const [w4, m4] = slopes(r + h, w + h * w3, m + h * m3);
        w += (h / 6) * (w1 + 2 * w2 + 2 * w3 + w4);
        m += (h / 6) * (m1 + 2 * m2 + 2 * m3 + m4);
        r += h;
      }
      const whole = 1 / sigmaSquared; // m of the whole
      within(model.enclosedMass(end), m / whole, 1e-7);
      within(-(model.potential(end) + 1 / edge) / sigmaSquared, w, 1e-7);
      within(model.density(end) / model.density(0), densityOf(w) / central, 1e-6);
    }
  });

  it('has mass, potential and dispersion that belong together', () => {
    for (const r of radii) {
      const mass = integrate((x) => 4 * Math.PI * x * x * model.density(x), 0, r);
      within(model.enclosedMass(r), mass, 3e-8);
      const drop = integrate((x) => model.enclosedMass(x) / (x * x), r, edge);
      within(model.potential(r), -drop - 1 / edge, 1e-8);
      const pressure = integrate(
        (x) => (model.density(x) * model.enclosedMass(x)) / x ** 2,
        r,
        edge,
      );
      within(model.radialDispersionSquared(r), pressure / model.density(r), 1e-6);
      within(profile.depthBelow(r), model.potential(r) - model.potential(0), 1e-6); // a difference
      within(Math.exp(profile.logDensity(r)), profile.density(r), 1e-13);
      const h = 1e-4;
      const at = (x: number) => profile.logDensity(r * Math.exp(x));
      const size = 1 + Math.abs(profile.logSlope(r)) ** 3; // of the third derivative, at the edge
      const first = (at(h) - at(-h)) / (2 * h);
      expect(Math.abs(profile.logSlope(r) - first)).toBeLessThan(1e-7 * size);
      const second = (at(h) - 2 * at(0) + at(-h)) / h ** 2;
      expect(Math.abs(profile.logCurvature(r) - second)).toBeLessThan(2e-4 * size);
      within(
        profile.massSlope(r),
        (4 * Math.PI * r ** 3 * model.density(r)) / model.enclosedMass(r),
        1e-8,
      );
    }
    expect(model.enclosedMass(edge * 1.01)).toBe(1);
    expect(model.density(edge)).toBe(0);
    expect(model.radialDispersionSquared(edge)).toBe(0);
    within(model.potential(2 * edge), -1 / (2 * edge), 1e-15);
    within(profile.potentialDrop(2 * edge, 1), (1 - Math.exp(-1)) / (2 * edge), 1e-14);
    const across = model.potential(edge * 2) - model.potential(edge / 2);
    within(profile.potentialDrop(edge / 2, Math.log(4)), across, 1e-9);
  });

  it('is in virial equilibrium', () => {
    const shell = (r: number) => 4 * Math.PI * r * r * model.density(r);
    const twiceKinetic = integrate((r) => 3 * model.radialDispersionSquared(r) * shell(r), 0, edge);
    within(twiceKinetic, -model.potentialEnergy, 1e-8);
    const clausius = integrate((r) => (shell(r) * model.enclosedMass(r)) / r, 0, edge);
    within(clausius, -model.potentialEnergy, 1e-8);
  });

  it('inverts its mass', () => {
    for (const f of [1e-12, 1e-6, 0.01, 0.5, 0.99, 1 - 2 ** -30]) {
      within(model.enclosedMass(model.radiusOfMass(f)), f, 1e-8); // 1e-9 below W0 = 12
    }
    expect(model.radiusOfMass(0)).toBe(0);
    expect(model.radiusOfMass(1 - 2 ** -53)).toBeLessThanOrEqual(edge);
  });

  it.each([1e-3, 0.1, 0.5, 0.95])(
    'draws speeds from e^(W − v²/2σ²) − 1 at %d of the edge',
    (share) => {
      const r = share * edge;
      const w = -(model.potential(r) + 1 / edge) / sigmaSquared;
      const all = densityOf(w);
      const random = new Random(12);
      const speeds = Float64Array.from({ length: 20_000 }, () => model.drawSpeed(r, random));
      const nodes = 2000;
      const most = Math.sqrt(2 * w);
      // Trapezoid rule on a fine table: its error is 1e-6.
      const table = new Float64Array(nodes + 1);
      for (let k = 1; k <= nodes; k++) {
        const u = ((k - 0.5) / nodes) * most;
        table[k] = table[k - 1] + (u * u * Math.expm1(w - (u * u) / 2) * most) / nodes / all;
      }
      const cdf = (v: number) => {
        const at = Math.min(nodes, (v / Math.sqrt(sigmaSquared) / most) * nodes);
        const low = Math.min(nodes - 1, Math.floor(at));
        return table[low] + (at - low) * (table[low + 1] - table[low]);
      };
      expect(kolmogorov(speeds, cdf)).toBeLessThan(KOLMOGOROV_LIMIT);
      expect(model.drawSpeed(edge, random)).toBe(0);
    },
  );
});
