/** Pair laws and the four loops over pairs, against check values and plain double loops. */
import { describe, expect, it } from 'vitest';
import { pairKernelsOf, pairSofteningOf, type PairSums } from '../../src/octree/pairs.ts';
import {
  isOfEach,
  NO_SOFTENING,
  splineForce,
  splinePotential,
  SPLINE_SUPPORT,
  squared,
  supportOf,
  type Softening,
} from '../../src/octree/softening.ts';
import {
  columnsOf,
  cubeColumns,
  pairLaw,
  plainField,
  softeningOfPair,
  type Columns,
} from './samples.ts';

/** Squares that kernels for one length do not look at. */
const NONE = new Float64Array(0);

describe('the spline', () => {
  // Source: the kernel of Monaghan & Lattanzio 1985 integrated by hand and by quadrature (agreement 1e-14).
  it.each([
    [0, -2.8],
    [0.3, -2.382208],
    [0.5, -1.866666666667],
    [0.7, -1.419684571429],
    [1, -1],
    [4, -0.25],
  ])('has A(%d) = %d', (u, value) => {
    expect(splinePotential(u)).toBeCloseTo(value, 11); // as many digits as the value has
  });

  it.each([
    [0, 0],
    [0.3, 2.4224],
    [0.5, 2.533333333333],
    [0.9, 1.232895473251],
    [1, 1],
    [2, 0.25],
  ])('has u g(u) = %d → %d', (u, value) => {
    expect(u * splineForce(u)).toBeCloseTo(value, 11);
  });

  it('pulls hardest at u = 0.414153 with 2.631266', () => {
    let best = 0;
    for (let u = 0; u < 1; u += 1e-6) if (u * splineForce(u) > best * splineForce(best)) best = u;
    // Source: maximum of the polynomial, known to a relative 1e-5 in u, where it is flat.
    expect(Math.abs(best - 0.414153)).toBeLessThan(0.414153e-5);
    expect(Math.abs(best * splineForce(best) - 2.631266)).toBeLessThan(1e-6);
  });

  it('is one smooth function across u = 1/2 and 1', () => {
    for (const u of [0.5, 1]) {
      const step = 1e-9;
      // First derivatives below 10 times the step.
      expect(Math.abs(splinePotential(u - step) - splinePotential(u + step))).toBeLessThan(2e-8);
      expect(Math.abs(splineForce(u - step) - splineForce(u + step))).toBeLessThan(5e-8);
    }
  });

  it('has the force that its potential falls with', () => {
    for (let u = 0.05; u < 1.5; u += 0.05) {
      const step = 1e-4;
      const slope = (splinePotential(u + step) - splinePotential(u - step)) / (2 * step);
      // Central differences err by the third derivative (below 300) times step²/6.
      expect(Math.abs(slope - u * splineForce(u))).toBeLessThan(1e-6);
    }
  });

  it('has the central depth of a Plummer law of the same length, and its support', () => {
    expect(-splinePotential(0) / SPLINE_SUPPORT).toBeCloseTo(1, 14);
    expect(supportOf({ kernel: 'spline', length: 2 })).toBe(5.6);
    expect(supportOf({ kernel: 'plummer', length: 2 })).toBe(Infinity);
    expect(supportOf(NO_SOFTENING)).toBe(0);
  });
});

interface Sums extends PairSums {
  readonly count: number;
}
const sumsFor = (count: number): Sums => {
  const column = () => new Float64Array(count);
  return { count, phi: column(), psi: column(), ax: column(), ay: column(), az: column() };
};

it('a pair at r = 1 under Plummer softening of 0.1 has the published shares', () => {
  const { atPoint } = pairKernelsOf('plummer', false);
  const out = new Float64Array(5);
  const [x, y, z, mass] = [[1], [0], [0], [1]].map((list) => Float64Array.from(list));
  atPoint(0, 0, 0, x, y, z, mass, 0, 1, out, pairSofteningOf('plummer', 0.1), NONE);
  // Source: u = −Gmm′/√(r²+ε²) gives 1/√1.01 and W/U = r²/(r²+ε²) = 1/1.01.
  expect(out[0]).toBeCloseTo(0.9950371902, 10);
  expect((out[0] - out[1]) / out[0]).toBeCloseTo(0.9900990099, 10);
});

/** Lengths of the bodies' own: some 0, so that the loops meet pairs without softening. */
const OWN_LENGTHS = Float64Array.from({ length: 53 }, (_, i) => [0.2, 0, 0.002, 0.3, 0][i % 5]);

const SOFTENINGS: [string, Softening][] = [
  ['none', NO_SOFTENING],
  ['plummer', { kernel: 'plummer', length: 0.2 }],
  // Support 0.56: a good part of the pairs lie inside.
  ['spline', { kernel: 'spline', length: 0.2 }],
  ['plummer, lengths of each', { kernel: 'plummer', length: 0.2, lengths: OWN_LENGTHS }],
  ['spline, lengths of each', { kernel: 'spline', length: 0.2, lengths: OWN_LENGTHS }],
];

describe.each(SOFTENINGS)('loops over pairs, %s', (_, softening) => {
  const each = isOfEach(softening);
  const soft = pairSofteningOf(softening.kernel, softening.length);
  const squares = softening.lengths === undefined ? NONE : squared(softening.lengths);
  // Odd numbers, so that loops two at a time have a rest.
  const bodies = cubeColumns(53, 1, (random) => random.uniform());
  const { x, y, z, mass } = bodies;
  const field = plainField(bodies, softening);

  /** Compares with sums that are the plain ones of i over `sources(i)`. */
  function expectSums(
    sums: PairSums,
    base: number,
    targets: [number, number],
    sources: (i: number) => [number, number],
    force: boolean,
  ): void {
    for (let i = targets[0]; i < targets[1]; i++) {
      const [from, to] = sources(i);
      let [phi, psi, ax, ay, az] = [0, 0, 0, 0, 0];
      for (let j = from; j < to; j++) {
        if (j === i) continue;
        const d = [x[j] - x[i], y[j] - y[i], z[j] - z[i]];
        const r = Math.hypot(...d);
        const { f, s } = pairLaw(softeningOfPair(softening, i, j), r);
        phi += mass[j] * f;
        psi += mass[j] * (f - s * r * r);
        ax += mass[j] * s * d[0];
        ay += mass[j] * s * d[1];
        az += mass[j] * s * d[2];
      }
      const k = i - base;
      // Sums of some 50 terms of one sign for phi; forces cancel to a few tens of their terms.
      expect(Math.abs(sums.phi[k] - phi)).toBeLessThan(1e-13 * phi);
      if (softening.kernel !== 'none') {
        expect(Math.abs(sums.psi[k] - psi)).toBeLessThan(1e-13 * phi);
      }
      const size = 1e-13 * Math.max(phi * phi, Math.hypot(ax, ay, az));
      const wanted = force ? [ax, ay, az] : [0, 0, 0];
      [sums.ax, sums.ay, sums.az].forEach((a, axis) =>
        expect(Math.abs(a[k] - wanted[axis])).toBeLessThanOrEqual(size),
      );
    }
  }

  describe.each([false, true])('with force: %s', (force) => {
    const kernels = pairKernelsOf(softening.kernel, force, each);

    it('inside a range', () => {
      const sums = sumsFor(53);
      expect(kernels.inside(x, y, z, mass, 5, 52, 3, sums, soft, squares)).toBe(0);
      expectSums(sums, 3, [5, 52], () => [5, 52], force);
      expect(sums.phi[1]).toBe(0); // body 4 is no part of it
      expect(sums.phi[49]).toBe(0); // nor is body 52
    });

    it.each([
      [0, 20, 20, 53],
      [0, 20, 20, 52],
      [3, 4, 10, 11],
    ])('between [%i, %i) and [%i, %i)', (a, aEnd, b, bEnd) => {
      const sums = sumsFor(53);
      kernels.between(x, y, z, mass, a, aEnd, b, bEnd, 0, sums, soft, squares);
      expectSums(sums, 0, [a, aEnd], () => [b, bEnd], force);
      expectSums(sums, 0, [b, bEnd], () => [a, aEnd], force);
    });

    it.each([
      [0, 20, 20, 53],
      [40, 53, 0, 6],
    ])('onto [%i, %i) from [%i, %i) of another set', (t, tEnd, s, sEnd) => {
      const sums = sumsFor(53);
      kernels.onto(x, y, z, t, tEnd, x, y, z, mass, s, sEnd, 0, sums, soft, squares, squares);
      expectSums(sums, 0, [t, tEnd], () => [s, sEnd], force);
    });

    it('at a point', () => {
      const sums = sumsFor(53);
      for (let i = 0; i < 53; i++) {
        const out = new Float64Array(5);
        const own = each ? squares[i] : soft;
        kernels.atPoint(x[i], y[i], z[i], x, y, z, mass, 0, i, out, own, squares);
        kernels.atPoint(x[i], y[i], z[i], x, y, z, mass, i + 1, 53, out, own, squares);
        [sums.phi, sums.psi, sums.ax, sums.ay, sums.az].forEach((sum, k) => (sum[i] = out[k]));
      }
      expectSums(sums, 0, [0, 53], () => [0, 53], force);
    });
  });

  it('agree with the field that other tests compare with', () => {
    const sums = sumsFor(53);
    pairKernelsOf(softening.kernel, true, each).inside(
      x,
      y,
      z,
      mass,
      0,
      53,
      0,
      sums,
      soft,
      squares,
    );
    for (let i = 0; i < 53; i++) {
      expect(sums.phi[i]).toBeCloseTo(-field.phi[i], 12);
      expect(sums.phi[i] - sums.psi[i]).toBeCloseTo(-field.share[i], 12);
      expect(sums.ay[i]).toBeCloseTo(field.ay[i], 10);
    }
  });
});

describe('bodies at one point', () => {
  const three: Columns = columnsOf([
    [1, 0, 0, 0],
    [2, 0, 0, 0],
    [4, 3, 4, 0],
  ]);
  const { x, y, z, mass } = three;

  it('are left out and counted without softening', () => {
    for (const force of [false, true]) {
      const sums = sumsFor(3);
      const { inside, atPoint } = pairKernelsOf('none', force);
      expect(inside(x, y, z, mass, 0, 3, 0, sums, 0, NONE)).toBe(1);
      [4 / 5, 4 / 5, 3 / 5].forEach((phi, i) => expect(sums.phi[i]).toBeCloseTo(phi, 15));
      const out = new Float64Array(5);
      expect(atPoint(0, 0, 0, x, y, z, mass, 0, 3, out, 0, NONE)).toBe(2);
      expect(out[0]).toBeCloseTo(4 / 5, 15);
    }
  });

  it.each(['plummer', 'spline'] as const)('have the depth 1/ε of a %s kernel', (kernel) => {
    const sums = sumsFor(3);
    const soft = pairSofteningOf(kernel, 0.5);
    pairKernelsOf(kernel, true).inside(x, y, z, mass, 0, 2, 0, sums, soft, NONE);
    expect(sums.phi[0]).toBeCloseTo(2 / 0.5, 14);
    expect(sums.phi[1]).toBeCloseTo(1 / 0.5, 14);
    // At r = 0 there is no r |f′|: all of f is missing from the Clausius share; and no force.
    expect(sums.psi[0]).toBeCloseTo(sums.phi[0], 14);
    expect([sums.ax[0], sums.ay[0], sums.az[0]]).toEqual([0, 0, 0]);
  });

  it.each([
    ['plummer', 1 / Math.hypot(0.3, 0.4)],
    ['spline', 1 / 0.4],
  ] as const)('with lengths of their own are left out only if neither has one: %s', (kernel, f) => {
    for (const force of [false, true]) {
      const kernels = pairKernelsOf(kernel, force, true);
      const squares = Float64Array.of(0.09, 0.16, 1);
      const sums = sumsFor(3);
      expect(kernels.inside(x, y, z, mass, 0, 2, 0, sums, 0, squares)).toBe(0);
      expect(sums.phi[0]).toBeCloseTo(2 * f, 14);
      expect(sums.phi[1]).toBeCloseTo(f, 14);
      expect(sums.psi[0]).toBeCloseTo(sums.phi[0], 14);
      const none = sumsFor(3);
      expect(kernels.inside(x, y, z, mass, 0, 3, 0, none, 0, new Float64Array(3))).toBe(1);
      [4 / 5, 4 / 5, 3 / 5].forEach((phi, i) => expect(none.phi[i]).toBeCloseTo(phi, 15));
    }
  });
});
