/** The relative orbit of two bodies under their own, possibly softened force. */
import { SPLINE_SUPPORT, splinePotential, type Softening } from '../octree/softening.ts';

/**
 * f(r), with potential −G m m′ f(r) of two bodies, for a distance r > 0 or, softened, r ≥ 0. Source: the
 * kernels of octree/softening.ts.
 */
export function pairPotential({ kernel, length }: Softening, r2: number): number {
  if (kernel === 'none') return 1 / Math.sqrt(r2);
  if (kernel === 'plummer') return 1 / Math.sqrt(r2 + length * length);
  const support = SPLINE_SUPPORT * length;
  if (r2 >= support * support) return 1 / Math.sqrt(r2);
  return -splinePotential(Math.sqrt(r2) / support) / support;
}

export interface PairState {
  /** G (m + m′). */
  readonly attraction: number;
  /** Relative position and velocity. */
  readonly position: readonly [number, number, number];
  readonly velocity: readonly [number, number, number];
}

export interface Orbit {
  /** Half the sum of apocentre and pericentre. */
  readonly semiMajorAxis: number;
  /** Their difference over their sum. */
  readonly eccentricity: number;
}

const STEPS = 200;

/**
 * Turning points of a bound relative orbit, as semi-major axis and eccentricity: Kepler's without
 * softening, and the same two numbers of the rosette that a softened force makes.
 * Source: two-body problem; a = −G(m+m′)/(2ε), e² = 1 + 2εL²/(G(m+m′))².
 */
export function orbitOf(state: PairState, softening: Softening): Orbit {
  const { attraction, position, velocity } = state;
  const [x, y, z] = position;
  const [u, v, w] = velocity;
  const r2 = x * x + y * y + z * z;
  const v2 = u * u + v * v + w * w;
  const momentum2 = (y * w - z * v) ** 2 + (z * u - x * w) ** 2 + (x * v - y * u) ** 2;
  const energy = v2 / 2 - attraction * pairPotential(softening, r2);
  if (softening.kernel === 'none') {
    const semiMajorAxis = -attraction / (2 * energy);
    // e from its vector keeps digits that 1 − L² … loses near a circle.
    const along = x * u + y * v + z * w;
    const r = Math.sqrt(r2);
    const [ex, ey, ez] = [0, 1, 2].map(
      (k) => ((v2 - attraction / r) * position[k] - along * velocity[k]) / attraction,
    );
    return { semiMajorAxis, eccentricity: Math.min(1, Math.hypot(ex, ey, ez)) };
  }
  const radial2 = (r: number) =>
    2 * (energy + attraction * pairPotential(softening, r * r)) - momentum2 / (r * r);
  const r = Math.sqrt(r2);
  // A pair that is now at one point takes its first step from the softening length.
  const start = r > 0 ? r : softening.length;
  let beyond = start;
  while (radial2(beyond) >= 0) beyond *= 2;
  const apocentre = turningPoint(radial2, start, beyond);
  let pericentre = 0;
  if (momentum2 > 0) {
    let before = r;
    while (radial2(before) >= 0) before /= 2;
    pericentre = turningPoint(radial2, r, before);
  }
  const sum = apocentre + pericentre;
  return { semiMajorAxis: sum / 2, eccentricity: (apocentre - pericentre) / sum };
}

/** Where the square of the radial velocity goes through 0, from `inside` (not below 0) to `outside`. */
function turningPoint(radial2: (r: number) => number, inside: number, outside: number): number {
  let [a, b] = [inside, outside];
  for (let step = 0; step < STEPS && a !== b; step++) {
    const middle = (a + b) / 2;
    if (middle === a || middle === b) break;
    if (radial2(middle) >= 0) a = middle;
    else b = middle;
  }
  return a;
}
