/** Sets of bodies that tests of the engine run on, and plain double loops that share nothing with it. */
import { makeModel, type ModelName } from '../../src/models/make.ts';
import { Random } from '../../src/numerics/random.ts';
import type { ForceOptions } from '../../src/octree/forces.ts';
import { NO_SOFTENING, type Softening } from '../../src/octree/softening.ts';

/** Positions and masses in input order, on shared memory as readers give them. */
export interface Columns {
  readonly x: Float64Array;
  readonly y: Float64Array;
  readonly z: Float64Array;
  readonly mass: Float64Array;
}

/** One softening of each kernel, short against a model of size 1. */
export const SOFTENINGS: readonly Softening[] = [
  NO_SOFTENING,
  { kernel: 'plummer', length: 0.05 },
  { kernel: 'spline', length: 0.05 },
];

/** Options of the engine with G = 1. */
export const natural = (softening: Softening, rest: Partial<ForceOptions> = {}): ForceOptions => ({
  gravity: 1,
  softening,
  errorWanted: 1e-5,
  ...rest,
});

export function emptyColumns(count: number): Columns {
  const column = () => new Float64Array(new SharedArrayBuffer(count * 8));
  return { x: column(), y: column(), z: column(), mass: column() };
}

/** Columns of bodies given one by one as m, x, y, z. */
export function columnsOf(
  bodies: readonly (readonly [m: number, x: number, y: number, z: number])[],
): Columns {
  const columns = emptyColumns(bodies.length);
  bodies.forEach(([m, x, y, z], i) => {
    columns.mass[i] = m;
    columns.x[i] = x;
    columns.y[i] = y;
    columns.z[i] = z;
  });
  return columns;
}

export function modelColumns(model: ModelName, count: number, seed: number): Columns {
  const { x, y, z, mass } = makeModel({ model, count, seed });
  return { x, y, z, mass } as Columns;
}

/** Bodies with coordinates uniform in (−1, 1) and masses by `mass`, 1/N if not given. */
export function cubeColumns(
  count: number,
  seed: number,
  mass: (random: Random, i: number) => number = () => 1 / count,
): Columns {
  const random = new Random(seed);
  const columns = emptyColumns(count);
  for (let i = 0; i < count; i++) {
    columns.x[i] = 2 * random.uniform() - 1;
    columns.y[i] = 2 * random.uniform() - 1;
    columns.z[i] = 2 * random.uniform() - 1;
    columns.mass[i] = mass(random, i);
  }
  return columns;
}

/** Changes body after body. */
export function changed(
  columns: Columns,
  change: (i: number, body: { x: number; y: number; z: number; mass: number }) => void,
): Columns {
  const { x, y, z, mass } = columns;
  for (let i = 0; i < mass.length; i++) {
    const body = { x: x[i], y: y[i], z: z[i], mass: mass[i] };
    change(i, body);
    x[i] = body.x;
    y[i] = body.y;
    z[i] = body.z;
    mass[i] = body.mass;
  }
  return columns;
}

/**
 * f, the potential of a unit pair without sign, and s = |f′|/r, its force over distance.
 * Source: Plummer softening by its definition; the spline from the force and potential polynomials of
 * the kernel of Monaghan & Lattanzio 1985 as Hernquist & Katz 1989 (appendix, from memory) print
 * them, with support 2.8 ε.
 */
export function pairLaw({ kernel, length }: Softening, r: number): { f: number; s: number } {
  if (kernel === 'none' || length === 0) return { f: 1 / r, s: 1 / (r * r * r) };
  if (kernel === 'plummer') {
    const root = Math.sqrt(r * r + length * length);
    return { f: 1 / root, s: 1 / root ** 3 };
  }
  const h = 2.8 * length;
  const u = r / h;
  if (u >= 1) return { f: 1 / r, s: 1 / (r * r * r) };
  const potential =
    u < 0.5
      ? (16 / 3) * u ** 2 - (48 / 5) * u ** 4 + (32 / 5) * u ** 5 - 14 / 5
      : 1 / (15 * u) +
        (32 / 3) * u ** 2 -
        16 * u ** 3 +
        (48 / 5) * u ** 4 -
        (32 / 15) * u ** 5 -
        16 / 5;
  const force =
    u < 0.5
      ? 32 / 3 - (192 / 5) * u ** 2 + 32 * u ** 3
      : 64 / 3 - 48 * u + (192 / 5) * u ** 2 - (32 / 3) * u ** 3 - 1 / (15 * u ** 3);
  return { f: -potential / h, s: force / h ** 3 };
}

/**
 * The softening of one pair where bodies have lengths of their own: the root of the sum of both squares,
 * with the spline the longer (no source: common practice).
 */
export function softeningOfPair({ kernel, length, lengths }: Softening, i: number, j: number) {
  if (lengths === undefined) return { kernel, length };
  const [a, b] = [lengths[i], lengths[j]];
  return { kernel, length: kernel === 'spline' ? Math.max(a, b) : Math.sqrt(a * a + b * b) };
}

export interface PlainField {
  /** φ_i and w_i with G = 1, U = ½ Σ m φ, W = ½ Σ m w; a pair at one point is left out unsoftened. */
  readonly phi: Float64Array;
  readonly share: Float64Array;
  readonly ax: Float64Array;
  readonly ay: Float64Array;
  readonly az: Float64Array;
  readonly potential: number;
  readonly clausius: number;
}

/** All pairs, each once, by a plain double loop. */
export function plainField({ x, y, z, mass }: Columns, softening: Softening): PlainField {
  const n = mass.length;
  const column = () => new Float64Array(n);
  const [phi, share, ax, ay, az] = [column(), column(), column(), column(), column()];
  let potential = 0;
  let clausius = 0;
  for (let i = 0; i < n; i++) {
    let ui = 0;
    let wi = 0;
    for (let j = 0; j < i; j++) {
      const dx = x[j] - x[i];
      const dy = y[j] - y[i];
      const dz = z[j] - z[i];
      const r = Math.sqrt(dx * dx + dy * dy + dz * dz);
      const ofPair = softeningOfPair(softening, i, j);
      const { f, s } = pairLaw(ofPair, r);
      if (f === Infinity) continue;
      const w = s * r * r;
      phi[i] -= mass[j] * f;
      phi[j] -= mass[i] * f;
      share[i] -= mass[j] * w;
      share[j] -= mass[i] * w;
      ax[i] += mass[j] * s * dx;
      ay[i] += mass[j] * s * dy;
      az[i] += mass[j] * s * dz;
      ax[j] -= mass[i] * s * dx;
      ay[j] -= mass[i] * s * dy;
      az[j] -= mass[i] * s * dz;
      ui -= mass[j] * f;
      wi -= mass[j] * w;
    }
    potential += mass[i] * ui;
    clausius += mass[i] * wi;
  }
  return { phi, share, ax, ay, az, potential, clausius };
}

/** Root mean square of a − b. */
export function rmsDifference(a: ArrayLike<number>, b: ArrayLike<number>): number {
  let sum = 0;
  for (let i = 0; i < a.length; i++) sum += (a[i] - b[i]) ** 2;
  return Math.sqrt(sum / a.length);
}

export function rms(a: ArrayLike<number>): number {
  let sum = 0;
  for (let i = 0; i < a.length; i++) sum += a[i] ** 2;
  return Math.sqrt(sum / a.length);
}
