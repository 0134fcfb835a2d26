/** Bodies with softening lengths of their own: the engine against plain double loops over all pairs. */
import { describe, expect, it } from 'vitest';
import { Random } from '../../src/numerics/random.ts';
import { buildOctree } from '../../src/octree/build.ts';
import { PROMISED_SIGMAS, sumForces } from '../../src/octree/forces.ts';
import { LEVELS } from '../../src/octree/levels.ts';
import { potentialAt, sumsAtBodies } from '../../src/octree/pointWalk.ts';
import { squared, type Softening } from '../../src/octree/softening.ts';
import {
  NODE_BEGIN,
  NODE_END,
  NODE_FARTHEST,
  NODE_GREATEST,
  NODE_LEAST,
  NODE_MEAN,
  NODE_VARIANCE,
  SPREAD,
  TOPOLOGY,
} from '../../src/octree/tree.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import {
  changed,
  columnsOf,
  cubeColumns,
  modelColumns,
  natural,
  pairLaw,
  plainField,
  rms,
  rmsDifference,
  type Columns,
} from './samples.ts';

const crew = crewOfOne();
const COUNT = 5000;

/** Lengths of all bodies, in a model whose scale is 1. */
const MIXES: Record<string, (random: Random, i: number) => number> = {
  'two lengths a hundred times apart': (_, i) => (i % 2 ? 0.5 : 0.005),
  'one body in fifty a hundred times longer': (_, i) => (i % 50 ? 0.005 : 0.5),
  'lengths of 0 mixed in': (_, i) => (i % 3 ? 0.1 : 0),
  'lengths over four decades': (random) => 0.3 * 10 ** (-4 * random.uniform()),
  'a few lengths larger than the system': (_, i) => (i % 100 ? 0.02 : 50),
};

const softeningOf = (
  kernel: Softening['kernel'],
  mix: (random: Random, i: number) => number,
  count = COUNT,
): Softening => {
  const random = new Random(31);
  const lengths = Float64Array.from({ length: count }, (_, i) => mix(random, i));
  return { kernel, length: 0.05, lengths };
};

const CASES = (['plummer', 'spline'] as const).flatMap((kernel) =>
  Object.keys(MIXES).map((name) => [kernel, name] as const),
);

it('a pair has the potential and the virial of its own length', async () => {
  const pair = columnsOf([
    [2, 0, 0, 0],
    [3, 1, 0, 0],
  ]);
  const lengths = Float64Array.of(0.3, 0.4);
  const plummer = await sumForces(pair, natural({ kernel: 'plummer', length: 0.4, lengths }));
  // Source: u = −Gmm′/√(r²+e²), W = u r²/(r²+e²), with e² = 0.09 + 0.16.
  expect(plummer.potentialEnergy).toBeCloseTo(-6 / Math.sqrt(1.25), 14);
  expect(plummer.clausius).toBeCloseTo(-6 / 1.25 ** 1.5, 14);
  const spline = await sumForces(pair, natural({ kernel: 'spline', length: 0.4, lengths }));
  // Inside the support of the longer, 1.12, and outside that of the other: A(1/1.12)/1.12 in exact fractions.
  const u = 1 / 1.12;
  const A =
    1 / (15 * u) + (32 / 3) * u ** 2 - 16 * u ** 3 + 9.6 * u ** 4 - (32 / 15) * u ** 5 - 3.2;
  expect(spline.potentialEnergy).toBeCloseTo((6 * A) / 1.12, 13);
});

describe.each(CASES)('%s, %s', (kernel, name) => {
  const softening = softeningOf(kernel, MIXES[name]);
  const masses = (bodies: Columns) =>
    changed(bodies, (i, body) => (body.mass *= i % 7 === 0 ? 5 : 1));
  const bodies = masses(modelColumns('plummer', COUNT, 3));
  const plain = plainField(bodies, softening);

  it('the tree gives the sums of a plain double loop, within the error it measures', async () => {
    const errors: number[] = [];
    for (const level of [LEVELS[3], LEVELS[8]]) {
      const options = natural(softening, { level, accelerations: true });
      const forces = await sumForces(bodies, options);
      expect(forces.origin).toBe('tree');
      const { potentialEnergy: U, clausius: W, acceleration: a } = forces;
      expect(Math.abs(U - plain.potential)).toBeLessThan(PROMISED_SIGMAS * forces.potentialError);
      expect(Math.abs(W - plain.clausius)).toBeLessThan(PROMISED_SIGMAS * forces.clausiusError);
      // And the errors are small: no source, thrice and more what was measured.
      const size = Math.abs(plain.potential);
      expect(forces.potentialError).toBeLessThan(1e-4 * size);
      expect(forces.clausiusError).toBeLessThan(1e-3 * size);
      errors.push(rmsDifference(forces.potential, plain.phi) / rms(plain.phi));
      expect(rmsDifference(forces.clausiusShare, plain.share)).toBeLessThan(3e-3 * rms(plain.phi));
      expect(rmsDifference(a?.x ?? [], plain.ax)).toBeLessThan(2e-2 * rms(plain.ax));
      expect(rmsDifference(a?.z ?? [], plain.az)).toBeLessThan(2e-2 * rms(plain.az));
    }
    expect(errors[0]).toBeLessThan(5e-4);
    expect(errors[1]).toBeLessThan(errors[0] / 5);
  });
});

describe.each(['plummer', 'spline'] as const)('%s', (kernel) => {
  it('equal lengths give what one length gives', async () => {
    const length = 0.05;
    // With Plummer's kernel two equal lengths make one that is √2 longer.
    const own = kernel === 'plummer' ? length / Math.SQRT2 : length;
    const bodies = modelColumns('hernquist', COUNT, 4);
    const rest = { level: LEVELS[3], accelerations: true };
    const one = await sumForces(bodies, natural({ kernel, length }, rest));
    const each = await sumForces(
      bodies,
      natural(
        softeningOf(kernel, () => own),
        rest,
      ),
    );
    // Rounding of the squares, over some hundred terms.
    const near = (a: ArrayLike<number>, b: ArrayLike<number>) =>
      expect(rmsDifference(a, b)).toBeLessThan(1e-12 * rms(b));
    near(each.potential, one.potential);
    near(each.clausiusShare, one.clausiusShare);
    near(each.acceleration?.y ?? [], one.acceleration?.y ?? []);
    expect(each.costs.cellInteractions).toBe(one.costs.cellInteractions);
    expect(each.costs.pairInteractions).toBe(one.costs.pairInteractions);
    expect(Math.abs(each.potentialError / one.potentialError - 1)).toBeLessThan(1e-6);
  });

  it('lengths of 0 alone soften nothing, and leave out pairs at one point', async () => {
    const bodies = modelColumns('plummer', COUNT, 5);
    for (const column of [bodies.x, bodies.y, bodies.z]) column[4000] = column[17];
    const options = natural({ kernel: 'none', length: 0 }, { level: LEVELS[8] });
    const none = await sumForces(bodies, options);
    const zero = await sumForces(
      bodies,
      natural(
        softeningOf(kernel, () => 0),
        { level: LEVELS[8] },
      ),
    );
    expect(zero.coincidentPairs).toBe(1);
    expect(none.coincidentPairs).toBe(1);
    const error = Math.abs(zero.potentialEnergy - none.potentialEnergy);
    expect(error).toBeLessThan(1e-12 * Math.abs(none.potentialEnergy));
    expect(Math.abs(zero.clausius / zero.potentialEnergy - 1)).toBeLessThan(1e-12);
    // A length of one of the two softens the pair.
    const some = softeningOf(kernel, (_, i) => (i === 17 ? 1e-3 : 0));
    const kept = await sumForces(bodies, natural(some, { level: LEVELS[8] }));
    expect(kept.coincidentPairs).toBe(0);
    // Each of the two has the other's 1/ε = 1000.
    const deeper = kept.potential[4000] - zero.potential[4000];
    expect(deeper).toBeCloseTo(-1000 / COUNT, 6);
  });

  it.each([700, 1500])('direct sums of %i bodies are those of a plain double loop', async (n) => {
    const bodies = cubeColumns(n, 6, (random) => random.uniform());
    const softening = softeningOf(kernel, MIXES['lengths of 0 mixed in'], n);
    const forces = await sumForces(bodies, natural(softening, { accelerations: true }));
    const plain = plainField(bodies, softening);
    expect(forces.origin).toBe('direct');
    // As many roundings as bodies at most, of terms of one sign.
    expect(rmsDifference(forces.potential, plain.phi)).toBeLessThan(1e-13 * rms(plain.phi));
    expect(rmsDifference(forces.clausiusShare, plain.share)).toBeLessThan(1e-13 * rms(plain.phi));
    const a = forces.acceleration;
    expect(rmsDifference(a?.x ?? [], plain.ax)).toBeLessThan(1e-12 * rms(plain.ax));
    expect(rmsDifference(a?.y ?? [], plain.ay)).toBeLessThan(1e-12 * rms(plain.ay));
  });

  it('the classical walk agrees, at bodies and at points without a length', async () => {
    const bodies = modelColumns('plummer', COUNT, 7);
    const softening = softeningOf(kernel, MIXES['lengths over four decades']);
    const { tree, level } = await sumForces(bodies, natural(softening, { level: LEVELS[3] }));
    if (tree === null || level === null) throw new Error('no tree');
    const plain = plainField(bodies, softening);
    const places = Uint32Array.from({ length: 150 }, (_, k) => 33 * k);
    const options = { order: level.order, softening, openingAngle: 0.4 };
    const { sums } = await sumsAtBodies(tree, places, options, crew);
    const chosen = Array.from(places, (place) => tree.tree.bodies.input[place]);
    const at = (column: Float64Array) => chosen.map((i) => column[i]);
    const phi = chosen.map((_, k) => -sums[2 * k]);
    const share = chosen.map((_, k) => sums[2 * k + 1] - sums[2 * k]);
    // An angle of 0.4 at order 4 errs by some 0.4⁵ = 1e-2 of a far cell's share, at random over many.
    expect(rmsDifference(phi, at(plain.phi))).toBeLessThan(2e-4 * rms(plain.phi));
    expect(rmsDifference(share, at(plain.share))).toBeLessThan(5e-4 * rms(plain.phi));
    const points = { x: Float64Array.of(0, 3), y: Float64Array.of(0, 4), z: Float64Array.of(0, 5) };
    const there = await potentialAt(tree, points, 1, options, crew);
    const { x, y, z, mass } = bodies;
    [0, 1].forEach((k) => {
      let phi = 0;
      mass.forEach((m, i) => {
        const r = Math.hypot(x[i] - points.x[k], y[i] - points.y[k], z[i] - points.z[k]);
        phi -= m * pairLaw({ kernel, length: softening.lengths?.[i] ?? NaN }, r).f;
      });
      expect(Math.abs(there[k] / phi - 1)).toBeLessThan(2e-4);
    });
  });
});

it('cells know the squared lengths of their bodies', async () => {
  const bodies = changed(modelColumns('hernquist', COUNT, 8), (i, body) => {
    if (i % 5 === 0) body.mass = 0;
  });
  const { lengths = new Float64Array(0) } = softeningOf(
    'plummer',
    MIXES['two lengths a hundred times apart'],
  );
  const tree = await buildOctree({ ...bodies, squares: squared(lengths) }, crew);
  const { topology: T, spread: S } = tree;
  const { squares, mass, input } = tree.bodies;
  squares.forEach((e2, place) => expect(e2).toBe(lengths[input[place]] ** 2));
  let uniform = 0;
  for (let slot = 0; slot < tree.nodeCount; slot++) {
    const [begin, end] = [NODE_BEGIN, NODE_END].map((at) => T[slot * TOPOLOGY + at]);
    const e2 = Array.from(squares.subarray(begin, end));
    const m = Array.from(mass.subarray(begin, end));
    const total = m.reduce((sum, mi) => sum + mi, 0);
    const of = (at: number) => S[slot * SPREAD + at];
    const meanOf = (f: (e2: number) => number) =>
      e2.reduce((sum, e, k) => sum + m[k] * f(e), 0) / total;
    const greatest = Math.max(...e2);
    const least = Math.min(...e2);
    expect(of(NODE_LEAST)).toBe(least);
    expect(of(NODE_GREATEST)).toBe(greatest);
    expect(of(NODE_FARTHEST)).toBe(Math.max(greatest - of(NODE_MEAN), of(NODE_MEAN) - least));
    if (total > 0) {
      expect(Math.abs(of(NODE_MEAN) - meanOf((e) => e))).toBeLessThan(1e-13 * greatest);
      const variance = meanOf((e) => (e - of(NODE_MEAN)) ** 2);
      expect(Math.abs(of(NODE_VARIANCE) - variance)).toBeLessThan(1e-12 * greatest ** 2);
    }
    if (least === greatest) uniform++;
  }
  // Long and short ones are parted: that is what the expansions need where cells are small.
  expect(uniform).toBeGreaterThan(0.3 * tree.nodeCount);
});
