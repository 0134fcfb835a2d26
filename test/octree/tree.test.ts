/** What every octree must be, whatever the bodies: checked against the bodies themselves. */
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { CompensatedSum } from '../../src/numerics/compensated.ts';
import { Random } from '../../src/numerics/random.ts';
import { buildOctree } from '../../src/octree/build.ts';
import {
  GEOMETRY,
  NODE_BEGIN,
  NODE_CHILD,
  NODE_CHILDREN,
  NODE_END,
  NODE_MASS,
  NODE_RADIUS,
  TOPOLOGY,
  type Octree,
} from '../../src/octree/tree.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import {
  changed,
  columnsOf,
  cubeColumns,
  emptyColumns,
  modelColumns,
  type Columns,
} from './samples.ts';

/** Everything wrong with a tree, as sentences; empty if nothing is. */
function faults(tree: Octree, input: Columns): string[] {
  const found: string[] = [];
  const say = (text: string) => found.length < 5 && found.push(text);
  const { bodies, geometry: G, topology: T } = tree;
  const n = input.mass.length;
  if (bodies.count !== n) say(`${bodies.count} bodies for ${n}`);

  const seenBody = new Uint8Array(n);
  for (let p = 0; p < n; p++) {
    const i = bodies.input[p];
    if (seenBody[i]++) say(`body ${i} twice`);
    const same =
      bodies.x[p] === input.x[i] &&
      bodies.y[p] === input.y[i] &&
      bodies.z[p] === input.z[i] &&
      bodies.mass[p] === input.mass[i];
    if (!same) say(`place ${p} is not body ${i}`);
  }

  const inLeaf = new Uint8Array(n);
  const seenSlot = new Uint8Array(tree.nodeCount);
  const stack = [0];
  while (stack.length > 0) {
    const slot = stack.pop() as number;
    if (seenSlot[slot]++) say(`slot ${slot} twice`);
    const t = slot * TOPOLOGY;
    const begin = T[t + NODE_BEGIN];
    const end = T[t + NODE_END];
    if (!(begin < end)) say(`slot ${slot} is empty`);
    checkNode(tree, slot, say);
    const children = T[t + NODE_CHILDREN];
    if (children === 0) {
      for (let p = begin; p < end; p++) inLeaf[p]++;
      if (end - begin > tree.leafCapacity && !atOnePoint(tree, begin, end)) {
        say(`leaf ${slot} holds ${end - begin} bodies that could be parted`);
      }
      continue;
    }
    if (children < 2 || children > 8) say(`slot ${slot} has ${children} children`);
    let next = begin;
    const first = T[t + NODE_CHILD];
    if (first <= slot) say(`slot ${slot} comes after its child ${first}`);
    for (let child = first; child < first + children; child++) {
      if (T[child * TOPOLOGY + NODE_BEGIN] !== next) say(`child ${child} leaves a gap`);
      next = T[child * TOPOLOGY + NODE_END];
      stack.push(child);
    }
    if (next !== end) say(`children of ${slot} end at ${next}, not ${end}`);
  }
  if (G.length < tree.nodeCount * GEOMETRY) say('geometry is too short');
  if (!seenSlot.every((times) => times === 1)) say('a slot is not in the tree');
  if (!inLeaf.every((times) => times === 1)) say('a body is not in one leaf');

  let place = 0;
  for (const root of tree.branchRoots) {
    if (T[root * TOPOLOGY + NODE_BEGIN] !== place) say(`branch ${root} begins off its place`);
    place = T[root * TOPOLOGY + NODE_END];
  }
  if (place !== n) say(`branches end at ${place} of ${n}`);
  return found;
}

function atOnePoint({ bodies: { x, y, z } }: Octree, begin: number, end: number): boolean {
  for (let p = begin + 1; p < end; p++) {
    if (x[p] !== x[begin] || y[p] !== y[begin] || z[p] !== z[begin]) return false;
  }
  return true;
}

/** Mass, centre and radius of a node against its own bodies, relative to the first of them. */
function checkNode(tree: Octree, slot: number, say: (text: string) => unknown): void {
  const { bodies, geometry: G, topology: T } = tree;
  const begin = T[slot * TOPOLOGY + NODE_BEGIN];
  const end = T[slot * TOPOLOGY + NODE_END];
  const g = slot * GEOMETRY;
  const columns = [bodies.x, bodies.y, bodies.z];
  const first = columns.map((column) => column[begin]);
  const massSum = new CompensatedSum();
  const moments = [new CompensatedSum(), new CompensatedSum(), new CompensatedSum()];
  let farthest = 0;
  let size = 0;
  for (let p = begin; p < end; p++) {
    massSum.add(bodies.mass[p]);
    let d2 = 0;
    for (let k = 0; k < 3; k++) {
      moments[k].add(bodies.mass[p] * (columns[k][p] - first[k]));
      d2 += (columns[k][p] - G[g + k]) ** 2;
      size = Math.max(size, Math.abs(columns[k][p]));
    }
    farthest = Math.max(farthest, Math.sqrt(d2));
  }
  const mass = massSum.value();
  // Some 40 levels of sums in double precision, each good to 1.1e-16 of the largest coordinate in it.
  if (Math.abs(G[g + NODE_MASS] - mass) > 1e-13 * mass) say(`mass of slot ${slot}`);
  if (mass > 0) {
    for (let k = 0; k < 3; k++) {
      const off = Math.abs(G[g + k] - (first[k] + moments[k].value() / mass));
      if (off > 1e-14 * size + 1e-12 * farthest) say(`centre ${k} of slot ${slot} by ${off}`);
    }
  }
  const radius = G[g + NODE_RADIUS];
  if (radius < farthest * (1 - 1e-14)) say(`slot ${slot}: radius ${radius} < ${farthest}`);
  // Large nodes add up their children's radii: at most the diagonal of their cubes more, level by level.
  if (radius > 2.5 * farthest) say(`slot ${slot}: radius ${radius} >> ${farthest}`);
}

async function expectSound(columns: Columns, leafCapacity?: number): Promise<Octree> {
  const tree = await buildOctree(columns, crewOfOne(), leafCapacity);
  expect(faults(tree, columns)).toEqual([]);
  return tree;
}

const outliers = (columns: Columns, ...places: number[]): Columns =>
  changed(columns, (i, body) => {
    if (i < places.length) body.x = places[i];
  });

describe('the octree of', () => {
  it('a Plummer sphere, in many branches', async () => {
    const tree = await expectSound(modelColumns('plummer', 30_000, 1));
    expect(tree.branchRoots.length).toBeGreaterThan(8);
  });

  it('an uncut Hernquist model', async () => {
    await expectSound(modelColumns('hernquist', 30_000, 2));
  });

  it('a sphere with one star at 1e12 has hardly more nodes for it', async () => {
    const without = await expectSound(modelColumns('plummer', 20_000, 3));
    const far = await expectSound(outliers(modelColumns('plummer', 20_000, 3), 1e12));
    expect(far.nodeCount).toBeLessThan(1.05 * without.nodeCount);
  });

  it('stars at 1e12, −1e9 and 1e150', async () => {
    await expectSound(outliers(modelColumns('plummer', 10_000, 4), 1e12, -1e9));
    await expectSound(outliers(modelColumns('plummer', 3000, 4), 1e150));
  });

  it('two far clumps of different size', async () => {
    const clumps = changed(modelColumns('plummer', 20_000, 5), (i, body) => {
      if (i % 2) body.x = 1e8 + 1e-3 * body.x;
    });
    await expectSound(clumps);
  });

  it('a clump within the rounding of its distance', async () => {
    // Near 1e15 doubles lie 1/8 apart: positions fall onto a grid, and many coincide.
    await expectSound(changed(modelColumns('plummer', 5000, 6), (_, body) => (body.z += 1e15)));
  });

  it('bodies on a line, on a plane and on a grid', async () => {
    await expectSound(changed(cubeColumns(8000, 7), (_, body) => (body.y = body.z = 0.3)));
    await expectSound(changed(cubeColumns(8000, 8), (_, body) => (body.z = -2)));
    const grid = changed(cubeColumns(8000, 9), (i, body) => {
      [body.x, body.y, body.z] = [i % 20, Math.floor(i / 20) % 20, Math.floor(i / 400)];
    });
    await expectSound(grid);
  });

  it('many bodies at one point, alone and inside a sphere', async () => {
    await expectSound(changed(emptyColumns(5000), (_, body) => (body.mass = 1)));
    const clump = changed(modelColumns('plummer', 20_000, 10), (i, body) => {
      if (i % 3) [body.x, body.y, body.z] = [0.1, 0.2, 0.3];
    });
    await expectSound(clump);
  });

  it('more bodies at one point than a branch may hold, four times over', async () => {
    const many = changed(modelColumns('plummer', 20_000, 11), (i, body) => {
      if (i < 15_000) [body.x, body.y, body.z] = [-0.4, 0, 7];
    });
    await expectSound(many);
  });

  it('positions that all occur twice', async () => {
    const twice = modelColumns('plummer', 10_000, 12);
    for (const column of [twice.x, twice.y, twice.z]) column.copyWithin(5000, 0, 5000);
    await expectSound(twice);
  });

  it('masses over 12 decades, and with zeros', async () => {
    await expectSound(cubeColumns(10_000, 13, (random) => 10 ** (12 * random.uniform() - 6)));
    await expectSound(cubeColumns(10_000, 14, (random) => (random.uniform() < 0.5 ? 0 : 1)));
    await expectSound(cubeColumns(500, 15, () => 0));
  });

  it.each(Array.from({ length: 40 }, (_, k) => k + 1))('%i bodies', async (count) => {
    await expectSound(cubeColumns(count, count));
    await expectSound(cubeColumns(count, count), 1);
  });
});

it('holds for any leaf capacity and any heap of clumps (fast-check)', async () => {
  const heap = fc.record({
    seed: fc.nat(1e6),
    count: fc.integer({ min: 1, max: 6000 }),
    clumps: fc.integer({ min: 1, max: 5 }),
    decades: fc.integer({ min: 0, max: 14 }),
    leafCapacity: fc.constantFrom(1, 2, 8, 16, 64),
  });
  await fc.assert(
    fc.asyncProperty(heap, async ({ seed, count, clumps, decades, leafCapacity }) => {
      const random = new Random(seed);
      const centres = Array.from({ length: clumps * 3 }, () => random.normal());
      const sizes = Array.from({ length: clumps }, () => 10 ** (-decades * random.uniform()));
      const columns = changed(emptyColumns(count), (i, body) => {
        const clump = i % clumps;
        body.x = centres[3 * clump] + sizes[clump] * random.normal();
        body.y = centres[3 * clump + 1] + sizes[clump] * random.normal();
        body.z = centres[3 * clump + 2] + sizes[clump] * random.normal();
        body.mass = random.uniform();
      });
      await expectSound(columns, leafCapacity);
    }),
    { numRuns: 40, seed: 20260101 },
  );
});

it('is the same tree for single and double precision columns of the same values', async () => {
  const doubles = modelColumns('plummer', 3000, 16);
  const single = (column: Float64Array) => Float32Array.from(column);
  const singles = {
    x: single(doubles.x),
    y: single(doubles.y),
    z: single(doubles.z),
    mass: single(doubles.mass),
  };
  const rounded = columnsOf(
    Array.from(singles.mass, (m, i) => [m, singles.x[i], singles.y[i], singles.z[i]]),
  );
  const a = await buildOctree(singles, crewOfOne());
  const b = await buildOctree(rounded, crewOfOne());
  expect(a.geometry).toEqual(b.geometry);
  expect(a.topology).toEqual(b.topology);
});
