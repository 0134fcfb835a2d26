/** Forces of the engine against plain double loops over all pairs. */
import { describe, expect, it } from 'vitest';
import { sumAtPoint } from '../../src/octree/classical.ts';
import { expansionsFor } from '../../src/octree/expansions.ts';
import { acceptanceOf, PROMISED_SIGMAS, sumForces } from '../../src/octree/forces.ts';
import { LEVELS } from '../../src/octree/levels.ts';
import { pairKernelsOf, pairSofteningOf } from '../../src/octree/pairs.ts';
import { NO_SOFTENING } from '../../src/octree/softening.ts';
import {
  columnsOf,
  cubeColumns,
  modelColumns,
  natural,
  plainField,
  rms,
  rmsDifference,
  SOFTENINGS,
} from './samples.ts';

const mean = (list: ArrayLike<number>): number =>
  Array.from(list).reduce((sum, value) => sum + value, 0) / list.length;

describe.each(SOFTENINGS)('direct sums, $kernel', (softening) => {
  const bodies = modelColumns('plummer', 700, 1);
  const plain = plainField(bodies, softening);

  it('are those of a plain double loop', async () => {
    const forces = await sumForces(bodies, natural(softening, { accelerations: true }));
    expect(forces.origin).toBe('direct');
    // 700 terms of one sign: √700 roundings. W is φ and a difference from it.
    const near = (a: number, b: number) =>
      expect(Math.abs(a - b)).toBeLessThan(1e-13 * Math.abs(b));
    near(forces.potentialEnergy, plain.potential);
    near(forces.clausius, plain.clausius);
    expect(rmsDifference(forces.potential, plain.phi)).toBeLessThan(1e-13);
    expect(rmsDifference(forces.clausiusShare, plain.share)).toBeLessThan(1e-13);
    const a = forces.acceleration;
    expect(rmsDifference(a?.x ?? [], plain.ax)).toBeLessThan(1e-12 * rms(plain.ax));
    expect(rmsDifference(a?.y ?? [], plain.ay)).toBeLessThan(1e-12 * rms(plain.ay));
    expect(rmsDifference(a?.z ?? [], plain.az)).toBeLessThan(1e-12 * rms(plain.az));
    // Rounding is all that is left of an error, and it is not hidden.
    expect(forces.potentialError).toBeGreaterThanOrEqual(
      Math.abs(forces.potentialEnergy - plain.potential) / PROMISED_SIGMAS,
    );
    expect(forces.potentialError).toBeLessThan(1e-13 * Math.abs(plain.potential));
  });

  it('pull as hard as they are pulled, and W = Σ m x·a', async () => {
    const unequal = cubeColumns(700, 2, (random) => 10 ** (3 * random.uniform()));
    const { acceleration: a, clausius } = await sumForces(
      unequal,
      natural(softening, { accelerations: true }),
    );
    const { x, y, z, mass } = unequal;
    const momentum = [0, 0, 0];
    let sizes = 0;
    let virial = 0;
    let virialElsewhere = 0;
    for (let i = 0; i < mass.length; i++) {
      const f = [a?.x[i] ?? NaN, a?.y[i] ?? NaN, a?.z[i] ?? NaN].map((c) => mass[i] * c);
      f.forEach((c, k) => (momentum[k] += c));
      sizes += Math.hypot(...f);
      virial += x[i] * f[0] + y[i] * f[1] + z[i] * f[2];
      virialElsewhere += (x[i] + 1) * f[0] + (y[i] - 2) * f[1] + (z[i] + 3) * f[2];
    }
    // Source: Newton's third law; the pair form of Clausius' virial.
    expect(Math.hypot(...momentum)).toBeLessThan(1e-12 * sizes);
    expect(Math.abs(virial / clausius - 1)).toBeLessThan(1e-12);
    // Origin-free, because Σ m a = 0: six units of offset times that rounding.
    expect(Math.abs(virialElsewhere / clausius - 1)).toBeLessThan(1e-11);
  });

  it('go with G, and with masses and lengths as dimensions say', async () => {
    const once = await sumForces(bodies, natural(softening));
    const scaled = columnsOf(
      Array.from(bodies.mass, (m, i) => [3 * m, 8 * bodies.x[i], 8 * bodies.y[i], 8 * bodies.z[i]]),
    );
    const again = await sumForces(
      scaled,
      natural({ ...softening, length: 8 * softening.length }, { gravity: 4.3e-3 }),
    );
    const factor = (4.3e-3 * 9) / 8;
    expect(again.potentialEnergy / (factor * once.potentialEnergy)).toBeCloseTo(1, 13);
    expect(again.clausius / (factor * once.clausius)).toBeCloseTo(1, 13);
  });
});

describe.each(SOFTENINGS)('the tree, $kernel', (softening) => {
  it.each(['plummer', 'hernquist'] as const)('%s: sums on all levels', async (model) => {
    const bodies = modelColumns(model, 5000, 7);
    const plain = plainField(bodies, softening);
    const size = { phi: rms(plain.phi), a: rms([...plain.ax, ...plain.ay, ...plain.az]) };
    let last = Infinity;
    for (const level of LEVELS.filter((_, k) => k % 2 === 0)) {
      const forces = await sumForces(bodies, natural(softening, { level, accelerations: true }));
      expect(forces.origin).toBe('tree');
      expect(forces.level).toBe(level);
      const error = rmsDifference(forces.potential, plain.phi);
      // Levels come closer one after the other; every second is taken, as neighbours may be nearly equal.
      expect(error).toBeLessThan(last);
      last = error;
      // The tolerance bounds one interaction relative to φ; many add up partly at random (measured: 0.2 to
      // 0.5). Accelerations lose one order of the expansion (2 to 6).
      expect(error).toBeLessThan(level.tolerance * size.phi);
      const shareError = rmsDifference(forces.clausiusShare, plain.share);
      expect(shareError).toBeLessThan(level.tolerance * size.phi);
      const { x: ax, y: ay, z: az } = forces.acceleration ?? { x: [], y: [], z: [] };
      const all = rmsDifference([...ax, ...ay, ...az], [...plain.ax, ...plain.ay, ...plain.az]);
      expect(all).toBeLessThan(15 * level.tolerance * size.a);
      // A sample of 384 bodies by mass: its rms of an error with a long tail is good to a factor of three.
      const measured = forces.potentialRms * Math.abs(mean(plain.phi));
      expect(measured).toBeGreaterThan(0.3 * error);
      expect(measured).toBeLessThan(4 * error);
    }
    expect(last).toBeLessThan(1e-5 * size.phi);
  });
});

it.each(SOFTENINGS)('the classical walk finds the same sums: $kernel', async (softening) => {
  const bodies = modelColumns('hernquist', 8000, 21);
  const forces = await sumForces(bodies, natural(softening, { level: LEVELS[2] }));
  if (!forces.tree) throw new Error('no tree');
  const plain = plainField(bodies, softening);
  const { soft2, support } = acceptanceOf(LEVELS[2], softening);
  const tools = {
    expansions: expansionsFor(LEVELS[2].order, softening),
    pairs: pairKernelsOf(softening.kernel, false),
    pairSoftening: pairSofteningOf(softening.kernel, softening.length),
    softenedByEach: false,
    openingAngle: 0.4,
    soft2,
    support,
  };
  const { x, y, z, input } = forces.tree.tree.bodies;
  const out = new Float64Array(5);
  const walk: number[] = [];
  const walkShare: number[] = [];
  const chosen: number[] = [];
  let interactions = 0;
  for (let place = 0; place < 8000; place += 37) {
    out.fill(0);
    interactions += sumAtPoint(forces.tree, x[place], y[place], z[place], 0, place, tools, out);
    chosen.push(input[place]);
    walk.push(-out[0]);
    walkShare.push(out[1] - out[0]);
  }
  const at = (column: Float64Array) => chosen.map((i) => column[i]);
  const size = rms(at(plain.phi));
  // An angle of 0.4 at order 5 errs by some 0.4⁶ = 4e-3 of a far cell's share, at random over many.
  expect(rmsDifference(walk, at(plain.phi))).toBeLessThan(1e-4 * size);
  expect(rmsDifference(walkShare, at(plain.share))).toBeLessThan(1e-4 * size);
  // Both approximations are wrong in ways of their own: they agree within their errors.
  expect(rmsDifference(walk, at(forces.potential))).toBeLessThan(
    rmsDifference(walk, at(plain.phi)) + rmsDifference(at(forces.potential), at(plain.phi)),
  );
  expect(interactions).toBeLessThan(0.5 * chosen.length * 8000);
  // A point where no body is: the whole sum.
  out.fill(0);
  sumAtPoint(forces.tree, 3, 4, 5, 0, -1, tools, out);
  let direct = 0;
  bodies.mass.forEach((m, i) => {
    const r = Math.hypot(bodies.x[i] - 3, bodies.y[i] - 4, bodies.z[i] - 5);
    direct += m / (softening.kernel === 'plummer' ? Math.hypot(r, softening.length) : r);
  });
  expect(Math.abs(out[0] / direct - 1)).toBeLessThan(1e-4);
});

describe('direct sums in blocks', () => {
  it.each([900, 1500, 2900])('of %i bodies are those of a plain double loop', async (count) => {
    const bodies = modelColumns('plummer', count, 21);
    for (const softening of SOFTENINGS) {
      const plain = plainField(bodies, softening);
      const forces = await sumForces(bodies, natural(softening, { accelerations: true }));
      // As many roundings as bodies at most, of terms of one sign.
      expect(rmsDifference(forces.potential, plain.phi)).toBeLessThan(1e-13);
      expect(rmsDifference(forces.clausiusShare, plain.share)).toBeLessThan(1e-13);
      const a = forces.acceleration;
      expect(rmsDifference(a?.x ?? [], plain.ax)).toBeLessThan(1e-12 * rms(plain.ax));
      expect(rmsDifference(a?.z ?? [], plain.az)).toBeLessThan(1e-12 * rms(plain.az));
    }
  });

  it('leave out bodies at one point in different blocks', async () => {
    const bodies = modelColumns('plummer', 3000, 22);
    for (const column of [bodies.x, bodies.y, bodies.z]) column.copyWithin(2500, 0, 10);
    const forces = await sumForces(bodies, natural(NO_SOFTENING, { exact: true }));
    expect(forces.coincidentPairs).toBe(10);
    expect(Number.isFinite(forces.potentialEnergy)).toBe(true);
    const tree = await sumForces(bodies, natural(NO_SOFTENING, { level: LEVELS[3] }));
    expect(tree.coincidentPairs).toBe(10);
    expect(Math.abs(forces.potentialEnergy / tree.potentialEnergy - 1)).toBeLessThan(1e-5);
  });
});
