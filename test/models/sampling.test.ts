import { describe, expect, it } from 'vitest';
import { hernquist } from '../../src/models/hernquist.ts';
import { makeModel, MODELS, type ModelName } from '../../src/models/make.ts';
import { Random } from '../../src/numerics/random.ts';
import { integrate } from './quadrature.ts';
import {
  concentration,
  energies,
  kolmogorov,
  KOLMOGOROV_LIMIT,
  radius,
  speedSquared,
} from './samples.ts';

// Seeds are fixed: every test gives the same numbers in every run. Where a limit is a number of
// standard errors, it is 4.5 of them unless said otherwise.
const NAMES = ['plummer', 'hernquist', 'uniform'] as const satisfies readonly ModelName[];

describe.each(NAMES)('%s', (name) => {
  const model = MODELS[name];
  const count = 200_000; // four streams, the last not full
  const particles = makeModel({ model: name, count, seed: 11 });

  it('has the mass profile of the model', () => {
    const fractions = Float64Array.from({ length: count }, (_, i) =>
      model.enclosedMass(radius(particles, i)),
    );
    expect(kolmogorov(fractions, (f) => f)).toBeLessThan(KOLMOGOROV_LIMIT);
  });

  it('has the isotropic dispersion of the model at every radius', () => {
    const shells = 20;
    const radial = new Float64Array(shells);
    const radialFourth = new Float64Array(shells);
    const tangential = new Float64Array(shells);
    const bodies = new Float64Array(shells);
    for (let i = 0; i < count; i++) {
      const r = radius(particles, i);
      const { x, y, z, vx, vy, vz } = particles;
      const scale = 1 / model.radialDispersionSquared(r);
      const vr = (x[i] * vx[i] + y[i] * vy[i] + z[i] * vz[i]) / r;
      const shell = Math.floor(model.enclosedMass(r) * shells);
      bodies[shell]++;
      radial[shell] += vr * vr * scale;
      radialFourth[shell] += (vr * vr * scale) ** 2;
      tangential[shell] += (speedSquared(particles, i) - vr * vr) * scale;
    }
    for (let s = 0; s < shells; s++) {
      const meanRadial = radial[s] / bodies[s];
      const variance = radialFourth[s] / bodies[s] - meanRadial ** 2;
      const limit = 4.5 * Math.sqrt(variance / bodies[s]);
      expect(Math.abs(meanRadial - 1)).toBeLessThan(limit);
      // v_t² = two components of the same variance: its mean has an error of √2 of the radial one at most.
      const meanTangential = tangential[s] / bodies[s] / 2;
      expect(Math.abs(meanTangential - 1)).toBeLessThan(limit);
      // Anisotropy β = 1 − ⟨v_t²⟩/(2⟨v_r²⟩) of the shell, both errors together.
      expect(Math.abs(1 - meanTangential / meanRadial)).toBeLessThan(limit * Math.SQRT2);
    }
    // All shells together, where a constant factor would show: Σ over three components.
    const sum = (values: Float64Array) => values.reduce((a, b) => a + b);
    const mean = (sum(radial) + sum(tangential)) / (3 * count);
    const error = Math.sqrt((sum(radialFourth) / count - 1) / count);
    expect(Math.abs(mean - 1)).toBeLessThan(4.5 * error);
    expect(error).toBeLessThan(0.005);
  });

  it('has directions without preference and no mean motion', () => {
    const { x, y, z, vx, vy, vz } = particles;
    for (const [a, b] of [
      [x, vx],
      [y, vy],
      [z, vz],
    ]) {
      let position = 0;
      let velocity = 0;
      let square = 0;
      let product = 0;
      for (let i = 0; i < count; i++) {
        position += a[i] / radius(particles, i);
        velocity += b[i];
        square += b[i] ** 2;
        product += (a[i] / radius(particles, i)) * b[i];
      }
      expect(Math.abs(position)).toBeLessThan(4.5 * Math.sqrt(count / 3));
      expect(Math.abs(velocity)).toBeLessThan(4.5 * Math.sqrt(square));
      expect(Math.abs(product)).toBeLessThan(4.5 * Math.sqrt(square / 3));
    }
  });

  it('holds no body above the escape speed', () => {
    let worst = 0;
    for (let i = 0; i < count; i++) {
      const escape = -2 * model.potential(radius(particles, i));
      worst = Math.max(worst, speedSquared(particles, i) / escape);
    }
    expect(worst).toBeLessThanOrEqual(1 + 1e-12); // rounding of radius and speed
    expect(worst).toBeGreaterThan(0.8); // and the fast tail is there
  });

  it.each(['equal', 'salpeter'] as const)(
    'has the energies of the continuum less the self part, masses %s',
    (masses) => {
      // A pair sum over drawn bodies has the mean (1 − Σm²/M²) × the continuum value, and so has T
      // about the set's own mean velocity (exact for independent draws).
      const sets = 60;
      const ratio = { kinetic: [] as number[], potential: [] as number[] };
      for (let seed = 1; seed <= sets; seed++) {
        const set = makeModel({ model: name, count: 500, seed, masses });
        const { kinetic, potential } = energies(set);
        const continuum = (1 - concentration(set)) * model.potentialEnergy;
        ratio.kinetic.push(kinetic / (-continuum / 2));
        ratio.potential.push(potential / continuum);
      }
      for (const values of Object.values(ratio)) {
        const mean = values.reduce((a, b) => a + b) / sets;
        const variance = values.reduce((a, b) => a + (b - mean) ** 2, 0) / (sets - 1);
        expect(Math.abs(mean - 1)).toBeLessThan(4 * Math.sqrt(variance / sets));
        // The bound itself must be worth something: relative noise is about 0.8 to 1.5 /√N_eff
        // (N_eff ≥ 0.2 · 500), over 60 sets.
        expect(Math.sqrt(variance / sets)).toBeLessThan(1.5 / Math.sqrt(100 * sets));
      }
    },
  );
});

describe('speed at a given radius', () => {
  // The distribution functions typed here from their papers, normalised by quadrature.
  const distribution = {
    /** f ∝ E^3.5; Plummer 1911, Binney & Tremaine 2008 section 4.3.3 */
    plummer: (energy: number) => energy ** 3.5,
    /** Hernquist 1990, ApJ 356, 359, equation 17, q = √E */
    hernquist: (energy: number) => {
      const q = Math.sqrt(energy);
      const p = 1 - energy;
      const bracket =
        3 * Math.asin(q) + q * Math.sqrt(p) * (1 - 2 * energy) * (8 * energy ** 2 - 8 * energy - 3);
      return bracket / p ** 2.5;
    },
  };

  // At r > 100 the bracket as printed loses its digits; at r = 1e-6 sit the innermost of 1e12 bodies.
  it.each([
    ['plummer', 1e-3],
    ['plummer', 1],
    ['plummer', 30],
    ['hernquist', 1e-6],
    ['hernquist', 1e-3],
    ['hernquist', 0.1],
    ['hernquist', 1],
    ['hernquist', 10],
    ['hernquist', 60],
  ] as const)('%s at r = %d follows the distribution function', (name, r) => {
    const model = MODELS[name];
    const psi = -model.potential(r);
    const f = distribution[name];
    const density = (v: number) => v * v * f(Math.max(0, psi - (v * v) / 2));
    // Table of the distribution function of v, dense at small v where the cusp puts its slow bodies.
    const nodes = 1200;
    const escape = Math.sqrt(2 * psi);
    const slow = Math.min(1, Math.sqrt(r)) * 0.02;
    const node = (k: number) => slow * Math.sinh((k / nodes) * Math.asinh(escape / slow));
    const table = new Float64Array(nodes + 1);
    for (let k = 1; k <= nodes; k++) {
      const [a, b] = [node(k - 1), node(k)];
      const middle = density((a + b) / 2);
      table[k] = table[k - 1] + ((b - a) / 6) * (density(a) + 4 * middle + density(b));
    }
    const cdf = (v: number) => {
      const k = Math.min(nodes - 1, (nodes * Math.asinh(v / slow)) / Math.asinh(escape / slow));
      const low = Math.floor(k);
      return (table[low] + (k - low) * (table[low + 1] - table[low])) / table[nodes];
    };
    const random = new Random(5);
    const speeds = Float64Array.from({ length: 40_000 }, () => model.drawSpeed(r, random));
    expect(kolmogorov(speeds, cdf)).toBeLessThan(KOLMOGOROV_LIMIT);
  });

  it.each([0, 0.5, 0.99])('of the uniform sphere at r = %d fills a ball of radius √5 σ', (r) => {
    const random = new Random(7);
    const edge = Math.sqrt(2.5 * (1 - r * r)); // ⟨v²⟩ of a ball is 3/5 of its radius squared: 3σ²
    const speeds = Float64Array.from({ length: 40_000 }, () => MODELS.uniform.drawSpeed(r, random));
    expect(kolmogorov(speeds, (v) => Math.min(1, (v / edge) ** 3))).toBeLessThan(KOLMOGOROV_LIMIT);
  });

  it('has the Hernquist dispersion far out, where the printed bracket is all rounding', () => {
    const random = new Random(6);
    for (const r of [1e3, 1e6]) {
      let sum = 0;
      let fourth = 0;
      const n = 40_000;
      for (let i = 0; i < n; i++) {
        const v2 = hernquist.drawSpeed(r, random) ** 2;
        sum += v2 / n;
        fourth += (v2 * v2) / n;
      }
      const limit = 4.5 * Math.sqrt((fourth - sum * sum) / n);
      expect(Math.abs(sum - 3 * hernquist.radialDispersionSquared(r))).toBeLessThan(limit);
    }
  });
});

describe('noise of a sample', () => {
  it.each([
    // c² = Var[v²/⟨v²⟩ − 2φ/⟨φ⟩]: Plummer √(1024/(63π²) − 1) by hand; Hernquist by quadrature, no source.
    ['plummer', Math.sqrt(1024 / (63 * Math.PI ** 2) - 1), 0.04],
    ['hernquist', 1.1904937, 0.05],
  ] as const)('2T/|U| of %s scatters by %f/√N', (name, expected, tolerance) => {
    // From single bodies: 1e6 of them; heavy tails of v⁴ leave less than 1 %.
    const count = 1_000_000;
    const model = MODELS[name];
    const set = makeModel({ model: name, count, seed: 3 });
    const meanSpeedSquared = -model.potentialEnergy;
    const meanPotential = 2 * model.potentialEnergy;
    let sum = 0;
    let squares = 0;
    for (let i = 0; i < count; i++) {
      const value =
        speedSquared(set, i) / meanSpeedSquared -
        (2 * model.potential(radius(set, i))) / meanPotential;
      sum += value / count;
      squares += (value * value) / count;
    }
    const c = Math.sqrt(squares - sum * sum);
    expect(Math.abs(c / expected - 1)).toBeLessThan(tolerance);
    // and the same from the closed forms alone: ⟨v²⟩ = 3σ² at each radius fixes the mean
    expect(Math.abs(sum + 1)).toBeLessThan((4.5 * expected) / Math.sqrt(count));
  });

  it.each([
    // Order statistics: k = √((1−f)/f) / (d ln M/d ln r) = 1 / (d ln M/d ln r) at r_h, by hand: 3/(1+r_h²),
    // 2/(1+r_h) and 3.
    ['plummer', 0.900805],
    ['hernquist', 1.707107],
    ['uniform', 1 / 3],
  ] as const)('ln r_h of %s scatters by %f/√N', (name, expected) => {
    const sets = 1500; // a standard deviation from 1500 values has an error of 1.8 %
    const count = 501;
    const logs = new Float64Array(sets);
    for (let seed = 0; seed < sets; seed++) {
      const set = makeModel({ model: name, count, seed });
      const radii = Float64Array.from({ length: count }, (_, i) => radius(set, i)).sort();
      logs[seed] = Math.log(radii[250]);
    }
    const mean = logs.reduce((a, b) => a + b) / sets;
    const variance = logs.reduce((a, b) => a + (b - mean) ** 2, 0) / (sets - 1);
    const k = Math.sqrt(variance * count);
    expect(Math.abs(k / expected - 1)).toBeLessThan(0.055); // three errors of 1.8 %
  });

  it('the line-of-sight dispersion of a whole Plummer sphere is π/32', () => {
    // |U|/3 by the virial theorem, 3π/32/3.
    const count = 300_000;
    const set = makeModel({ model: 'plummer', count, seed: 8 });
    let sum = 0;
    let fourth = 0;
    for (let i = 0; i < count; i++) {
      sum += set.vz[i] ** 2 / count;
      fourth += set.vz[i] ** 4 / count;
    }
    const limit = 4.5 * Math.sqrt((fourth - sum * sum) / count);
    expect(Math.abs(sum - Math.PI / 32)).toBeLessThan(limit);
  });
});

describe('masses', () => {
  it.each(['x', 'vy'] as const)('are independent of position and velocity: |%s|', (name) => {
    const count = 100_000;
    const set = makeModel({ model: 'uniform', count, seed: 4, masses: 'salpeter' });
    // The rank of a mass, from its distribution function, against the size of the column's value.
    let [a, b, aa, bb, ab] = [0, 0, 0, 0, 0];
    const least = Array.from(set.mass).reduce((p, q) => Math.min(p, q));
    for (let i = 0; i < count; i++) {
      const rank = (set.mass[i] / least) ** -1.35;
      const size = Math.abs(set[name][i]);
      a += rank;
      b += size;
      aa += rank * rank;
      bb += size * size;
      ab += rank * size;
    }
    const correlation =
      (ab / count - (a / count) * (b / count)) /
      Math.sqrt((aa / count - (a / count) ** 2) * (bb / count - (b / count) ** 2));
    expect(Math.abs(correlation)).toBeLessThan(4.5 / Math.sqrt(count));
  });

  it('of the power law have its effective number and its distribution', () => {
    const count = 400_000;
    const set = makeModel({ model: 'uniform', count, seed: 21, masses: 'salpeter' });
    // N_eff/N = ⟨m⟩²/⟨m²⟩ by quadrature here and as the closed value.
    const moment = (k: number) => integrate((m) => m ** (k - 2.35), 0.1, 10);
    const expected = moment(1) ** 2 / (moment(0) * moment(2));
    expect(Math.abs(expected - 0.2426628621)).toBeLessThan(1e-10); // digits given
    // Relative error of a ratio of means, from the variance of 2m/⟨m⟩ − m²/⟨m²⟩.
    const mean = moment(1) / moment(0);
    const square = moment(2) / moment(0);
    const spread = integrate(
      (m) => ((2 * m) / mean - (m * m) / square - 1) ** 2 * (m ** -2.35 / moment(0)),
      0.1,
      10,
    );
    const found = 1 / concentration(set) / count;
    expect(Math.abs(found / expected - 1)).toBeLessThan(4.5 * Math.sqrt(spread / count));
    // The masses back in the unit of their range: the least of n draws exceeds 0.1 by about 1/(1.35 n).
    const least = Array.from(set.mass).reduce((a, b) => Math.min(a, b));
    const masses = Float64Array.from(set.mass, (m) => (m * 0.1) / least);
    const cdf = (m: number) => (0.1 ** -1.35 - m ** -1.35) / (0.1 ** -1.35 - 10 ** -1.35);
    expect(kolmogorov(masses, cdf)).toBeLessThan(KOLMOGOROV_LIMIT);
  });
});
