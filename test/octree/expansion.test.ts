/** Expansions of every order against direct sums over the bodies they stand for. */
import { describe, expect, it } from 'vitest';
import { Random } from '../../src/numerics/random.ts';
import { expansionOf, HIGHEST_ORDER, type Expansion } from '../../src/octree/expansion.ts';
import { GEOMETRY } from '../../src/octree/tree.ts';

const ORDERS = Array.from({ length: HIGHEST_ORDER }, (_, k) => k + 1);
const EPSILON = 0.4;

interface Cluster {
  readonly bodies: readonly (readonly [m: number, x: number, y: number, z: number])[];
  readonly mass: number;
}

/** Bodies inside the unit sphere with their centre of mass at the origin, to rounding. */
function cluster(seed: number, count = 30): Cluster {
  const random = new Random(seed);
  const list = Array.from({ length: count }, () => {
    const direction = new Float64Array(3);
    random.unitVector(direction);
    const r = 0.7 * Math.cbrt(random.uniform());
    return [0.5 + random.uniform(), ...direction.map((d) => d * r)];
  });
  const mass = list.reduce((sum, [m]) => sum + m, 0);
  for (let k = 1; k <= 3; k++) {
    const mean = list.reduce((sum, body) => sum + body[0] * body[k], 0) / mass;
    for (const body of list) body[k] -= mean;
  }
  return { bodies: list as unknown as Cluster['bodies'], mass };
}

/** One node at a place, with the cluster's multipoles about it. */
function nodeOf(expansion: Expansion, { bodies, mass }: Cluster, at: readonly number[]) {
  const geometry = new Float64Array(GEOMETRY);
  geometry.set([...at, mass]);
  const multipoles = new Float64Array(expansion.multipoles);
  for (const [m, x, y, z] of bodies) expansion.addBody(multipoles, 0, m, x, y, z);
  return { geometry, multipoles };
}

/** Σ m/√u, Σ ε² m u^(−3/2) and the gradient of the first, directly, at p from the cluster's centre. */
function direct({ bodies }: Cluster, p: readonly number[], epsilon: number) {
  let value = 0;
  let clausius = 0;
  const gradient = [0, 0, 0];
  for (const [m, ...x] of bodies) {
    const d = x.map((c, k) => p[k] - c);
    const u = d[0] ** 2 + d[1] ** 2 + d[2] ** 2 + epsilon ** 2;
    value += m / Math.sqrt(u);
    clausius += (epsilon ** 2 * m) / (u * Math.sqrt(u));
    d.forEach((c, k) => (gradient[k] -= (m * c) / (u * Math.sqrt(u))));
  }
  return { value, clausius, gradient };
}

const DIRECTIONS = [
  [1, 0, 0],
  [0, -1, 0],
  [0, 0, 1],
  [0.6, 0.8, 0],
  [-0.48, 0.6, 0.64],
  [0.36, -0.48, -0.8],
];
const OFFSETS = [
  [0.5, 0, 0],
  [-0.3, 0.4, 0.1],
  [0.1, -0.2, -0.45],
];

/** Rms errors at distance d over directions and places near the target's centre. */
function errors(order: number, epsilon: number, d: number) {
  const expansion = expansionOf(order, epsilon > 0);
  const source = cluster(order);
  const squares = { value: 0, clausius: 0, gradient: 0, point: 0, pointClausius: 0 };
  const node = nodeOf(expansion, source, [0, 0, 0]);
  const gradient = new Float64Array(3);
  for (const direction of DIRECTIONS) {
    const centre = direction.map((c) => c * d);
    const target = new Float64Array(GEOMETRY);
    target.set(centre);
    const L = new Float64Array(expansion.locals);
    const { geometry, multipoles } = node;
    expansion.interact(target, 0, L, 0, geometry, 0, multipoles, 0, epsilon ** 2);
    for (const [x, y, z] of OFFSETS) {
      const exact = direct(source, [centre[0] + x, centre[1] + y, centre[2] + z], epsilon);
      expansion.gradientAt(L, 0, x, y, z, gradient);
      squares.value += (expansion.valueAt(L, 0, x, y, z) - exact.value) ** 2;
      squares.clausius += (expansion.clausiusAt(L, 0, x, y, z) - exact.clausius) ** 2;
      gradient.forEach((g, k) => (squares.gradient += (g - exact.gradient[k]) ** 2));
    }
    const out = new Float64Array(2);
    const [px, py, pz] = centre;
    expansion.pointValue(geometry, 0, multipoles, 0, px, py, pz, epsilon ** 2, out);
    const exact = direct(source, centre, epsilon);
    squares.point += (out[0] - exact.value) ** 2;
    squares.pointClausius += (out[1] - exact.clausius) ** 2;
  }
  return Object.fromEntries(
    Object.entries(squares).map(([key, sum]) => [key, Math.sqrt(sum)]),
  ) as typeof squares;
}

describe.each([
  ['unsoftened', 0],
  ['softened', EPSILON],
])('%s', (_, epsilon) => {
  // The first term left out of Σ m/r has p + 1 more powers of size over distance than 1/d, so that its
  // error falls as d^−(p+2); the gradient loses one of these; the Clausius part ε² m u^(−3/2) is expanded
  // to order p − 1 and falls as d^−(p+3). At d = 7 and 14 later terms and ε bend the slope by less than 0.5.
  it.each(ORDERS)('errors of order %i fall with distance as the first term left out', (p) => {
    const near = errors(p, epsilon, 7);
    const far = errors(p, epsilon, 14);
    const slope = (key: keyof typeof near) => Math.log2(near[key] / far[key]);
    expect(Math.abs(slope('value') - (p + 2))).toBeLessThan(0.5);
    expect(Math.abs(slope('gradient') - (p + 2))).toBeLessThan(0.5);
    if (epsilon > 0) expect(Math.abs(slope('clausius') - (p + 3))).toBeLessThan(0.5);
    // At the target's centre only multipoles count: none of order 1, so that order 1 gains one power.
    expect(Math.abs(slope('point') - (p + 2))).toBeLessThan(0.5);
    if (epsilon > 0) {
      const exponent = p === 1 ? 5 : p + 3; // ε² d⁻³ times (size/d)², and no dipole
      expect(Math.abs(slope('pointClausius') - exponent)).toBeLessThan(0.5);
    }
  });

  it.each(ORDERS)('order %i is exact from one body at its centre to the other centre', (p) => {
    const expansion = expansionOf(p, epsilon > 0);
    const one: Cluster = { bodies: [[3, 0, 0, 0]], mass: 3 };
    const { geometry, multipoles } = nodeOf(expansion, one, [1, -2, 0.5]);
    const target = Float64Array.from([2.5, 0.3, -0.25, 0, 0, 0]);
    const exact = direct(one, [1.5, 2.3, -0.75], epsilon);
    const L = new Float64Array(expansion.locals);
    expansion.interact(target, 0, L, 0, geometry, 0, multipoles, 0, epsilon ** 2);
    const gradient = new Float64Array(3);
    expansion.gradientAt(L, 0, 0, 0, 0, gradient);
    const out = new Float64Array(2);
    expansion.pointValue(geometry, 0, multipoles, 0, 2.5, 0.3, -0.25, epsilon ** 2, out);
    // A few roundings of numbers near 1.
    expect(expansion.valueAt(L, 0, 0, 0, 0)).toBeCloseTo(exact.value, 14);
    expect(expansion.clausiusAt(L, 0, 0, 0, 0)).toBeCloseTo(exact.clausius, 14);
    gradient.forEach((g, k) => expect(g).toBeCloseTo(exact.gradient[k], 14));
    expect(out[0]).toBeCloseTo(exact.value, 14);
    expect(out[1]).toBeCloseTo(exact.clausius, 14);
  });

  it.each(ORDERS)('order %i gives the same both ways at once and one after the other', (p) => {
    const expansion = expansionOf(p, epsilon > 0);
    const a = nodeOf(expansion, cluster(21), [0.1, 0.2, 0.3]);
    const b = nodeOf(expansion, cluster(22), [4, -3, 2]);
    const G = Float64Array.from([...a.geometry, ...b.geometry]);
    const M = Float64Array.from([...a.multipoles, ...b.multipoles]);
    const both = new Float64Array(2 * expansion.locals);
    const { multipoles: m, locals: l } = expansion;
    expansion.interactBoth(G, M, both, 0, 0, 0, GEOMETRY, m, l, epsilon ** 2);
    const each = new Float64Array(2 * expansion.locals);
    expansion.interact(G, 0, each, 0, G, GEOMETRY, M, m, epsilon ** 2);
    expansion.interact(G, GEOMETRY, each, l, G, 0, M, 0, epsilon ** 2);
    const size = Math.max(...each.map(Math.abs));
    // Order 8 adds up 165 products.
    both.forEach((value, k) => expect(Math.abs(value - each[k])).toBeLessThan(1e-13 * size));
  });

  it.each(ORDERS)('order %i: handing locals down to another centre changes no value', (p) => {
    const expansion = expansionOf(p, epsilon > 0);
    const { geometry, multipoles } = nodeOf(expansion, cluster(31), [3, 4, -2]);
    const L = new Float64Array(2 * expansion.locals);
    expansion.interact(new Float64Array(6), 0, L, 0, geometry, 0, multipoles, 0, epsilon ** 2);
    expansion.passDown(L, 0, expansion.locals, 0.3, -0.2, 0.4);
    const [a, b] = [new Float64Array(3), new Float64Array(3)];
    for (const [x, y, z] of OFFSETS) {
      const [u, v, w] = [x - 0.3, y + 0.2, z - 0.4];
      const at = expansion.locals;
      // The same polynomial about another point: rounding alone.
      expect(expansion.valueAt(L, at, u, v, w)).toBeCloseTo(expansion.valueAt(L, 0, x, y, z), 12);
      const clausius = expansion.clausiusAt(L, 0, x, y, z);
      expect(expansion.clausiusAt(L, at, u, v, w)).toBeCloseTo(clausius, 12);
      expansion.gradientAt(L, at, u, v, w, a);
      expansion.gradientAt(L, 0, x, y, z, b);
      a.forEach((g, k) => expect(g).toBeCloseTo(b[k], 12));
    }
  });
});

it.each(ORDERS)(
  'order %i: multipoles of a parent from its children are those of all bodies',
  (p) => {
    const expansion = expansionOf(p, false);
    const [one, two] = [cluster(41, 12), cluster(42, 20)];
    const mass = one.mass + two.mass;
    const apart = [1, -0.5, 2];
    // Parent about the common centre of mass: the clusters at −f₂ and f₁ of the vector between them.
    const placeOne = apart.map((d) => (-d * two.mass) / mass);
    const placeTwo = apart.map((d) => (d * one.mass) / mass);
    const M = new Float64Array(4 * expansion.multipoles);
    const at = (node: number) => node * expansion.multipoles;
    for (const [m, x, y, z] of one.bodies) expansion.addBody(M, at(1), m, x, y, z);
    for (const [m, x, y, z] of two.bodies) expansion.addBody(M, at(2), m, x, y, z);
    const [[ax, ay, az], [bx, by, bz]] = [placeOne, placeTwo];
    expansion.addChild(M, at(0), at(1), one.mass, ax, ay, az);
    expansion.addChild(M, at(0), at(2), two.mass, bx, by, bz);
    for (const [m, x, y, z] of one.bodies) expansion.addBody(M, at(3), m, x + ax, y + ay, z + az);
    for (const [m, x, y, z] of two.bodies) expansion.addBody(M, at(3), m, x + bx, y + by, z + bz);
    const size = Math.max(0, ...M.map(Math.abs));
    for (let k = 0; k < expansion.multipoles; k++) {
      // An identity, but for the dipoles of the clusters, which are 0 to rounding.
      expect(Math.abs(M[at(0) + k] - M[at(3) + k])).toBeLessThanOrEqual(1e-13 * size);
    }
  },
);

describe('the tensors themselves, read off the locals of one unit mass', () => {
  const [x, y, z] = [1.3, -0.7, 2.1];
  /** Local coefficients at (x, y, z) from a unit mass at the origin: the derivatives of 1/√u there. */
  const tensors = (p: number, epsilon: number) => {
    const expansion = expansionOf(p, epsilon > 0);
    const source = Float64Array.from([0, 0, 0, 1, 0, 0]);
    const target = Float64Array.from([x, y, z, 0, 0, 0]);
    const L = new Float64Array(expansion.locals);
    const none = new Float64Array(expansion.multipoles);
    expansion.interact(target, 0, L, 0, source, 0, none, 0, epsilon ** 2);
    const names: string[] = [];
    for (let order = 0; order <= p; order++) {
      for (let i = order; i >= 0; i--) {
        for (let j = order - i; j >= 0; j--) names.push(`${i}${j}${order - i - j}`);
      }
    }
    return new Map(names.map((name, at) => [name, L[at]]));
  };
  const of = (D: Map<string, number>, i: number, j: number, k: number) =>
    D.get(`${i}${j}${k}`) as number;

  it('are the textbook derivatives of 1/r', () => {
    const D = tensors(4, 0);
    const r = Math.hypot(x, y, z);
    // Source: differentiation by hand.
    expect(of(D, 0, 0, 0)).toBeCloseTo(1 / r, 15);
    expect(of(D, 0, 1, 0)).toBeCloseTo(-y / r ** 3, 15);
    expect(of(D, 2, 0, 0)).toBeCloseTo((3 * x * x - r * r) / r ** 5, 15);
    expect(of(D, 1, 0, 1)).toBeCloseTo((3 * x * z) / r ** 5, 15);
    expect(of(D, 1, 1, 1)).toBeCloseTo((-15 * x * y * z) / r ** 7, 15);
    expect(of(D, 3, 0, 0)).toBeCloseTo((3 * x * (3 * r * r - 5 * x * x)) / r ** 7, 15);
    const fourth = (35 * z ** 4 - 30 * z * z * r * r + 3 * r ** 4) * (3 / r ** 9);
    expect(of(D, 0, 0, 4)).toBeCloseTo(fourth, 14);
  });

  it.each(ORDERS.slice(1))('up to order %i obey Poisson’s equation', (p) => {
    // Source: Laplace's equation for 1/r. Softened, ∇²(r²+ε²)^(−1/2) = −3 ε² u^(−5/2), whose derivatives
    // are those of no tensor here, but whose value is known.
    const D = tensors(p, 0);
    for (const name of D.keys()) {
      const [i, j, k] = [...name].map(Number);
      if (i + j + k > p - 2) continue;
      const terms = [of(D, i + 2, j, k), of(D, i, j + 2, k), of(D, i, j, k + 2)];
      const size = Math.max(...terms.map(Math.abs));
      expect(Math.abs(terms[0] + terms[1] + terms[2])).toBeLessThan(1e-13 * size);
    }
    const S = tensors(p, EPSILON);
    const u = x * x + y * y + z * z + EPSILON ** 2;
    const sum = of(S, 2, 0, 0) + of(S, 0, 2, 0) + of(S, 0, 0, 2);
    expect(sum).toBeCloseTo(-3 * EPSILON ** 2 * u ** -2.5, 14);
  });
});

it('knows no other orders', () => {
  for (const order of [0, 9, 2.5, NaN]) {
    expect(() => expansionOf(order, false)).toThrow(/order .* 1 to 6/);
  }
});
