/** Centres and densities against a search of all pairs, and their errors against known ones. */
import { describe, expect, it } from 'vitest';
import { shrinkingSphere } from '../../src/dynamics/centre.ts';
import type { CentreMethod } from '../../src/dynamics/record.ts';
import { makeModel, type ModelName } from '../../src/models/make.ts';
import { buildOctree } from '../../src/octree/build.ts';
import { densityCentre } from '../../src/octree/neighbours.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { changed, cubeColumns, modelColumns, type Columns } from '../octree/samples.ts';
import { bodiesOf, measure, measureModel, particlesOf, type Body } from './samples.ts';

const mean = (list: readonly number[]) => list.reduce((sum, x) => sum + x, 0) / list.length;

/** ρ from the j − 1 nearest of all others and the distance to the j-th, centre Σρx/Σρ, √(Σρ²d²/Σρ²). */
function plainDensities({ x, y, z, mass }: Columns, j = 6) {
  const n = mass.length;
  const rho = Float64Array.from({ length: n }, (_, i) => {
    const others = Array.from({ length: n }, (_, k): [number, number] => [
      (x[k] - x[i]) ** 2 + (y[k] - y[i]) ** 2 + (z[k] - z[i]) ** 2,
      mass[k],
    ]);
    others.splice(i, 1);
    others.sort((a, b) => a[0] - b[0]);
    const m = others.slice(0, j - 1).reduce((sum, [, mk]) => sum + mk, 0);
    return m / ((4 / 3) * Math.PI * others[j - 1][0] ** 1.5);
  });
  const total = rho.reduce((sum, r) => sum + r, 0);
  const centre = [x, y, z].map((c) => rho.reduce((sum, r, i) => sum + r * c[i], 0) / total);
  let squares = 0;
  let weighted = 0;
  rho.forEach((r, i) => {
    const d2 = (x[i] - centre[0]) ** 2 + (y[i] - centre[1]) ** 2 + (z[i] - centre[2]) ** 2;
    squares += r * r;
    weighted += r * r * d2;
  });
  return { rho, centre, coreRadius: Math.sqrt(weighted / squares) };
}

async function densitiesOf(columns: Columns, all = true) {
  const found = await densityCentre(await buildOctree(columns, crewOfOne()), crewOfOne(), all);
  if (!found) throw new Error('no densities');
  return found;
}

describe('densities from neighbours', () => {
  const sets: [string, Columns][] = [
    ['a Plummer sphere', modelColumns('plummer', 1500, 1)],
    ['a Hernquist model', modelColumns('hernquist', 1500, 2)],
    ['8 bodies', cubeColumns(8, 3)],
    ['13 bodies', cubeColumns(13, 4)],
    ['masses over six decades', cubeColumns(900, 5, (random) => 10 ** (6 * random.uniform()))],
    [
      'a star at 1e12',
      changed(modelColumns('plummer', 1200, 6), (i, body) => (body.x = i ? body.x : 1e12)),
    ],
    [
      'two clumps far apart',
      changed(modelColumns('plummer', 1200, 7), (i, body) => {
        if (i % 3 === 0) [body.x, body.y] = [1e5 + 1e-3 * body.x, 1e-3 * body.y];
      }),
    ],
    ['bodies on a line', changed(cubeColumns(700, 8), (_, body) => (body.y = body.z = 0))],
    [
      'three at each place',
      (() => {
        const columns = cubeColumns(900, 9);
        for (const c of [columns.x, columns.y, columns.z]) {
          c.copyWithin(300, 0, 300);
          c.copyWithin(600, 0, 300);
        }
        return columns;
      })(),
    ],
  ];
  it.each(sets)('of %s are those of a search of all', async (_, columns) => {
    const plain = plainDensities(columns);
    const found = await densitiesOf(columns);
    // The same sums of five masses over the cube of the same distance.
    found.density.forEach((rho, i) => expect(Math.abs(rho / plain.rho[i] - 1)).toBeLessThan(1e-12));
    const size = plain.coreRadius;
    plain.centre.forEach((c, k) =>
      expect(Math.abs(found.centre[k] - c)).toBeLessThan(1e-10 * size),
    );
    expect(Math.abs(found.coreRadius / size - 1)).toBeLessThan(1e-9);
  });

  it('are right on average in a homogeneous cube', async () => {
    const columns = cubeColumns(40_000, 10);
    const { density } = await densitiesOf(columns);
    const inside = [...density].filter(
      (_, i) => Math.max(...[columns.x, columns.y, columns.z].map((c) => Math.abs(c[i]))) < 0.8,
    );
    // Source: Casertano & Hut 1985: (j−1) neighbours make the estimate unbiased, with a scatter of
    // 1/√(j−2) = 1/2. Of 20,000 bodies, some five of which share their neighbours: 0.8 %.
    const ratio = mean(inside) / (1 / 8);
    expect(Math.abs(ratio - 1)).toBeLessThan(0.02);
    const spread = Math.sqrt(mean(inside.map((rho) => (rho * 8 - ratio) ** 2)));
    expect(Math.abs(spread - 0.5)).toBeLessThan(0.03);
  });

  it('need eight bodies', async () => {
    const of = async (count: number) =>
      densityCentre(await buildOctree(cubeColumns(count, 1), crewOfOne()), crewOfOne());
    expect(await of(7)).toBeNull();
    expect(await of(8)).not.toBeNull();
  });

  it('are infinite nowhere: bodies at one point have none', async () => {
    const point = changed(cubeColumns(30, 1), (i, body) => {
      if (i < 20) body.x = body.y = body.z = 0.5;
    });
    const found = await densitiesOf(point);
    expect([...found.density].every(Number.isFinite)).toBe(true);
    expect(found.centre.every(Number.isFinite)).toBe(true);
  });
});

describe('above 200,000 bodies only dense places are measured body by body', () => {
  it.each([
    // Statistical errors for a Plummer sphere go as 1/√N from 0.062 (centre) and 0.045 (core radius) at
    // N = 1000. For the cusp of a Hernquist model the coarse part is far out and smaller still.
    ['plummer', 0.062, 0.045],
    ['hernquist', 0.062, 0.045],
  ] as const)(
    '%s: within a tenth of the statistical error of the centre, a tenth of that of the core',
    async (model: ModelName, c, r) => {
      const count = 200_001;
      const tree = await buildOctree(modelColumns(model, count, 11), crewOfOne());
      const coarse = await densityCentre(tree, crewOfOne());
      const all = await densityCentre(tree, crewOfOne(), true);
      if (!coarse || !all) throw new Error('no densities');
      expect(coarse.density.length).toBe(0);
      const scale = Math.sqrt(1000 / count);
      const off = Math.hypot(...[0, 1, 2].map((k) => coarse.centre[k] - all.centre[k]));
      expect(off).toBeGreaterThan(0);
      expect(off).toBeLessThan(0.1 * c * scale);
      expect(Math.abs(coarse.coreRadius - all.coreRadius)).toBeLessThan(0.1 * r * scale);
    },
  );
});

describe('over many samples', () => {
  it('centres of a Plummer sphere err as they should', async () => {
    const errors: Record<CentreMethod, number[]> = {
      density: [],
      shrinking: [],
      mass: [],
      potential: [],
    };
    const cores: number[] = [];
    for (let seed = 1; seed <= 40; seed++) {
      const particles = makeModel({ model: 'plummer', count: 1000, seed });
      for (const centre of Object.keys(errors) as CentreMethod[]) {
        const record = await measure(particles, { centre });
        expect(record.frame.centreMethod).toBe(centre);
        errors[centre].push(Math.hypot(...record.frame.centre) ** 2);
        if (centre === 'density') cores.push(record.coreRadius ?? NaN);
      }
    }
    // Source: Monte Carlo of other code, N = 1000: 0.062, 0.21, 0.153, 0.22. Rms of 40 vectors: 7 % at 1σ,
    // more for the most bound body, which now and then is in a close pair.
    const rms = (key: CentreMethod) => Math.sqrt(mean(errors[key]));
    expect(Math.abs(rms('density') / 0.062 - 1)).toBeLessThan(0.25);
    expect(Math.abs(rms('shrinking') / 0.21 - 1)).toBeLessThan(0.3);
    expect(Math.abs(rms('mass') / 0.153 - 1)).toBeLessThan(0.3);
    expect(Math.abs(rms('potential') / 0.22 - 1)).toBeLessThan(0.5);
    // Source: the same, 0.550 ± 0.045 a sample (continuum √0.3 = 0.5477).
    expect(Math.abs(mean(cores) - 0.55)).toBeLessThan((3 * 0.045) / Math.sqrt(40));
  });

  it('the density centre stays where bodies escape, the centre of mass goes with them', async () => {
    const bodies = bodiesOf(makeModel({ model: 'plummer', count: 1000, seed: 5 }));
    // Fifty bodies fly off to the right and spread out on the way.
    const escaped = bodies.map(([m, x, y, z, ...v], i): Body => {
      return i < 50 ? [m, 1000 * (1 + x), 1000 * y, 1000 * z, ...v] : [m, x, y, z, ...v];
    });
    const before = await measure(particlesOf(bodies));
    const after = await measure(particlesOf(escaped));
    const shift = (k: 0 | 1 | 2) => Math.abs(after.frame.centre[k] - before.frame.centre[k]);
    expect(Math.hypot(shift(0), shift(1), shift(2))).toBeLessThan(0.05);
    expect(after.frame.centreOfMass[0] - before.frame.centreOfMass[0]).toBeGreaterThan(20);
  });
});

describe('a shrinking sphere', () => {
  it('finds the clump of fifty', () => {
    const bodies = Array.from({ length: 400 }, (_, i): Body => {
      const clump = i < 60;
      const [a, b] = [Math.cos(i * 2.4), Math.sin(i * 2.4)];
      const r = clump ? 0.01 * (i % 7) : 1 + (i % 11);
      return [1, 3 + r * a, -2 + r * b, 0.001 * (i % 3), 0, 0, 0];
    });
    const [x, y] = shrinkingSphere(particlesOf(bodies), [1, 0, 0]);
    expect(Math.hypot(x - 3, y + 2)).toBeLessThan(0.02);
  });

  it('leaves few bodies where they are: at their centre of mass', () => {
    const start = [0.5, 0.25, 1] as const;
    const few = particlesOf(Array.from({ length: 50 }, (_, i): Body => [1, i, 0, 0, 0, 0, 0]));
    expect(shrinkingSphere(few, start)).toEqual(start);
  });

  it('ends for bodies at one point, and for a set without mass inside', () => {
    const point = particlesOf(Array.from({ length: 90 }, (): Body => [1, 2, 2, 2, 0, 0, 0]));
    expect(shrinkingSphere(point, [2, 2, 2])).toEqual([2, 2, 2]);
    const rim = Array.from({ length: 200 }, (_, i): Body => {
      return [i < 10 ? 1 : 0, i < 10 ? 9 : i / 200, 0, 0, 0, 0, 0];
    });
    expect(shrinkingSphere(particlesOf(rim), [9, 0, 0]).every(Number.isFinite)).toBe(true);
  });
});

it('too few bodies for densities: the centre of mass, and a remark', async () => {
  const record = await measureModel('plummer', 7, 1);
  expect(record.frame.centreMethod).toBe('mass');
  expect(record.frame.centre).toEqual(record.frame.centreOfMass);
  expect(record.coreRadius).toBeNull();
  expect(record.remarks.map(({ code }) => code)).toContain('centreFallback');
});
