/** Forces of the engine against plain double loops over all pairs, and its measured errors against true ones. */
import { describe, expect, it } from 'vitest';
import { sumAtPoint } from '../../src/octree/classical.ts';
import { expansionOf } from '../../src/octree/expansion.ts';
import {
  acceptanceOf,
  DIRECT_COUNT,
  PROMISED_SIGMAS,
  sumForces,
  type ForceOptions,
} from '../../src/octree/forces.ts';
import { LEVELS } from '../../src/octree/levels.ts';
import { pairKernelsOf, pairSofteningOf } from '../../src/octree/pairs.ts';
import { NO_SOFTENING, type Softening } from '../../src/octree/softening.ts';
import type { ModelName } from '../../src/models/make.ts';
import {
  changed,
  columnsOf,
  cubeColumns,
  modelColumns,
  plainField,
  rms,
  rmsDifference,
  type Columns,
} from './samples.ts';

const SOFTENINGS: Softening[] = [
  NO_SOFTENING,
  { kernel: 'plummer', length: 0.05 },
  { kernel: 'spline', length: 0.05 },
];

const natural = (softening: Softening, rest: Partial<ForceOptions> = {}): ForceOptions => ({
  gravity: 1,
  softening,
  errorWanted: 1e-5,
  ...rest,
});

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
    for (const level of LEVELS) {
      const forces = await sumForces(bodies, natural(softening, { level, accelerations: true }));
      expect(forces.origin).toBe('tree');
      expect(forces.level).toBe(level);
      const error = rmsDifference(forces.potential, plain.phi);
      // Levels come closer one after the other; neighbours may be nearly equal.
      expect(error).toBeLessThan(1.2 * last);
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

it('measures errors that cover the true ones', async () => {
  const models: ModelName[] = ['plummer', 'hernquist', 'uniform'];
  const ratios: { phi: number; clausius: number }[] = [];
  for (let seed = 1; seed <= 4; seed++) {
    for (const model of models) {
      for (const softening of SOFTENINGS) {
        const bodies = modelColumns(model, 5000, 100 + seed);
        const tree = await sumForces(bodies, natural(softening, { level: LEVELS[seed - 1] }));
        const direct = await sumForces(bodies, natural(softening, { exact: true }));
        ratios.push({
          phi: Math.abs(tree.potentialEnergy - direct.potentialEnergy) / tree.potentialError,
          clausius: Math.abs(tree.clausius - direct.clausius) / tree.clausiusError,
        });
      }
    }
  }
  for (const key of ['phi', 'clausius'] as const) {
    const sorted = ratios.map((ratio) => ratio[key]).sort((a, b) => a - b);
    // 36 trials at 2.6 σ: one miss in three such tests, more than one in twenty.
    expect(sorted.filter((ratio) => ratio > PROMISED_SIGMAS).length).toBeLessThanOrEqual(1);
    expect(sorted[sorted.length - 1]).toBeLessThan(4);
    // And not because they are blown up: half of the true errors are above a tenth of 1σ.
    expect(sorted[18]).toBeGreaterThan(0.1);
  }
});

it('measures them by a narrow walk where direct sums over the sample would cost too much', async () => {
  const bodies = modelColumns('hernquist', 34_000, 3);
  const exact = await sumForces(bodies, natural(NO_SOFTENING, { exact: true }));
  for (const level of LEVELS.slice(0, 3)) {
    const tree = await sumForces(bodies, natural(NO_SOFTENING, { level }));
    const error = Math.abs(tree.potentialEnergy - exact.potentialEnergy);
    expect(error).toBeLessThan(PROMISED_SIGMAS * tree.potentialError);
    expect(tree.potentialError).toBeLessThan(level.tolerance * Math.abs(exact.potentialEnergy));
  }
  // Single bodies at the default error: those far out see the centre through few large cells, and theirs are
  // the worst errors. No source: measured 7e-2 for the worst and 3e-3 for one in 200, held to thrice that.
  const tree = await sumForces(bodies, natural(NO_SOFTENING));
  const relative = tree.potential.map((phi, i) => Math.abs(phi / exact.potential[i] - 1)).sort();
  expect(relative[relative.length - 1]).toBeLessThan(0.2);
  expect(relative[Math.floor(0.995 * relative.length)]).toBeLessThan(0.01);
});

describe('the error that is asked for', () => {
  const cases: [ModelName, Softening][] = [
    ['plummer', NO_SOFTENING],
    ['hernquist', NO_SOFTENING],
    ['plummer', { kernel: 'plummer', length: 0.1 }],
    ['plummer', { kernel: 'spline', length: 0.1 }],
  ];
  it.each(cases)('is kept, or the engine says that it is not: %s, %j', async (model, softening) => {
    const bodies = modelColumns(model, 8000, 11);
    const exact = await sumForces(bodies, natural(softening, { exact: true }));
    for (const errorWanted of [1e-3, 1e-4, 1e-5, 1e-6, 1e-7, 1e-8]) {
      const forces = await sumForces(bodies, natural(softening, { errorWanted }));
      const size = Math.abs(forces.potentialEnergy);
      const promised = PROMISED_SIGMAS * forces.potentialError;
      // Only the last level may miss it, and then its error is known to be larger.
      if (promised > errorWanted * size) expect(forces.level).toBe(LEVELS[LEVELS.length - 1]);
      const error = Math.abs(forces.potentialEnergy - exact.potentialEnergy);
      expect(error).toBeLessThan(Math.max(promised, errorWanted * size));
      // The promise is kept without more ado down to 1e-6.
      if (errorWanted >= 1e-6) expect(promised).toBeLessThanOrEqual(errorWanted * size);
    }
  });

  it('is kept by direct sums up to 4096 bodies, and beyond where exact sums are asked for', async () => {
    expect(DIRECT_COUNT).toBe(4096);
    const at = (count: number, rest: Partial<ForceOptions> = {}) =>
      sumForces(modelColumns('plummer', count, 3), natural(NO_SOFTENING, rest));
    expect((await at(4096, { errorWanted: 0.1 })).origin).toBe('direct');
    expect((await at(4500, { errorWanted: 0.1, exact: true })).origin).toBe('direct');
    expect((await at(20_000, { errorWanted: 1e-3 })).origin).toBe('tree');
  });
});

it.each(SOFTENINGS)('the classical walk finds the same sums: $kernel', async (softening) => {
  const bodies = modelColumns('hernquist', 8000, 21);
  const forces = await sumForces(bodies, natural(softening, { level: LEVELS[2] }));
  if (!forces.tree) throw new Error('no tree');
  const plain = plainField(bodies, softening);
  const { soft2, support } = acceptanceOf(LEVELS[2], softening);
  const tools = {
    expansion: expansionOf(LEVELS[2].order, softening.kernel === 'plummer'),
    pairs: pairKernelsOf(softening.kernel, false),
    pairSoftening: pairSofteningOf(softening.kernel, softening.length),
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
    interactions += sumAtPoint(forces.tree, x[place], y[place], z[place], place, tools, out);
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
  sumAtPoint(forces.tree, 3, 4, 5, -1, tools, out);
  let direct = 0;
  bodies.mass.forEach((m, i) => {
    const r = Math.hypot(bodies.x[i] - 3, bodies.y[i] - 4, bodies.z[i] - 5);
    direct += m / (softening.kernel === 'plummer' ? Math.hypot(r, softening.length) : r);
  });
  expect(Math.abs(out[0] / direct - 1)).toBeLessThan(1e-4);
});

describe('input that is far from a plain sphere', () => {
  /** The engine's U and φ at a level, against direct sums in units of the rms φ. */
  async function expectGood(bodies: Columns, softening = NO_SOFTENING): Promise<void> {
    const level = LEVELS[1];
    const tree = await sumForces(bodies, natural(softening, { level }));
    const direct = await sumForces(bodies, natural(softening, { exact: true }));
    expect(tree.coincidentPairs).toBe(direct.coincidentPairs);
    // As on a plain sphere: the tolerance bounds single interactions; errors of totals are measured.
    expect(rmsDifference(tree.potential, direct.potential)).toBeLessThan(
      level.tolerance * rms(direct.potential),
    );
    const within = (a: number, b: number, error: number) =>
      expect(Math.abs(a - b)).toBeLessThan(4 * error + 1e-12 * Math.abs(b));
    within(tree.potentialEnergy, direct.potentialEnergy, tree.potentialError);
    within(tree.clausius, direct.clausius, tree.clausiusError);
    expect(tree.potentialError).toBeLessThan(level.tolerance * Math.abs(direct.potentialEnergy));
  }
  const plummer = (seed: number) => modelColumns('plummer', 6000, seed);

  it('a star at 1e12', async () => {
    await expectGood(changed(plummer(1), (i, body) => (body.x = i ? body.x : 1e12)));
  });

  it('two clumps that differ a million times in size and distance', async () => {
    const clumps = changed(plummer(2), (i, body) => {
      if (i % 2) [body.x, body.y, body.z] = [1e6 + body.x * 1e-3, body.y * 1e-3, body.z * 1e-3];
    });
    await expectGood(clumps);
  });

  it('bodies on a line and on a plane', async () => {
    await expectGood(changed(plummer(3), (_, body) => (body.y = body.z = 0)));
    await expectGood(changed(plummer(4), (_, body) => (body.z = 0)));
  });

  it('a thousand bodies at one point, left out of each other’s sums', async () => {
    const clump = changed(plummer(5), (i, body) => {
      if (i % 6 === 0) [body.x, body.y, body.z] = [0.5, -0.5, 0.25];
    });
    await expectGood(clump);
    const forces = await sumForces(clump, natural(NO_SOFTENING, { level: LEVELS[0] }));
    expect(forces.coincidentPairs).toBe((1000 * 999) / 2);
    await expectGood(clump, { kernel: 'plummer', length: 0.1 });
    await expectGood(clump, { kernel: 'spline', length: 0.1 });
  });

  it('every position twice', async () => {
    const twice = plummer(6);
    for (const column of [twice.x, twice.y, twice.z]) column.copyWithin(3000, 0, 3000);
    await expectGood(twice);
  });

  it('masses over 12 decades, in and out of place, and bodies without mass', async () => {
    const decades = plummer(7);
    await expectGood(changed(decades, (i, body) => (body.mass = 10 ** ((i % 13) - 6))));
    await expectGood(changed(plummer(8), (i, body) => (body.mass = i % 3 ? 0 : 1)));
  });

  it('a cell of massless bodies beside heavy ones', async () => {
    const bodies = changed(plummer(9), (i, body) => {
      if (i % 2) [body.x, body.mass] = [body.x + 50, 0];
    });
    await expectGood(bodies);
  });

  it('lengths of 1e-12 and of 1e12', async () => {
    for (const scale of [1e-12, 1e12]) {
      const scaled = changed(plummer(10), (_, body) => {
        body.x *= scale;
        body.y *= scale;
        body.z *= scale;
      });
      await expectGood(scaled);
      await expectGood(scaled, { kernel: 'plummer', length: 0.05 * scale });
    }
  });

  it('a softening larger than the system', async () => {
    await expectGood(plummer(11), { kernel: 'plummer', length: 50 });
    await expectGood(plummer(12), { kernel: 'spline', length: 50 });
  });
});

it('costs little more where structure is extreme', async () => {
  // Deterministic figures of cost, at one level; sources of a blow-up are over-full deep cells.
  const cost = async (bodies: Columns): Promise<number> => {
    const { costs } = await sumForces(bodies, natural(NO_SOFTENING, { level: LEVELS[0] }));
    return (costs.cellInteractions + costs.pairInteractions) / bodies.mass.length;
  };
  const sphere = await cost(modelColumns('plummer', 30_000, 5));
  const far = changed(modelColumns('plummer', 30_000, 5), (i, body) => {
    if (i === 7) body.y = 1e12;
  });
  const pair = changed(modelColumns('plummer', 30_000, 5), (i, body) => {
    if (i % 2) [body.x, body.y, body.z] = [1e9 + body.x * 1e-3, body.y * 1e-3, body.z * 1e-3];
  });
  // The limit of 1.6 leaves room for other constants; a cell that swallows the core costs 10 times more.
  expect(await cost(modelColumns('hernquist', 30_000, 5))).toBeLessThan(1.6 * sphere);
  expect(await cost(far)).toBeLessThan(1.05 * sphere);
  expect(await cost(pair)).toBeLessThan(1.2 * sphere);
  // And the sphere itself is far below the 30,000 of direct sums.
  expect(sphere).toBeLessThan(1000);
}, 60_000);
