/**
 * The models of King (1966) with G = M = 1 and the King radius r₀ = 1, where r₀² = 9σ²/(4πGρ₀).
 *
 * f ∝ e^(E/σ²) − 1 for E = ψ − v²/2 > 0, ψ = σ² W = φ(r_t) − φ, so that the density depends on W alone
 * and ends at the tidal radius r_t, where W = 0. Source: King 1966, AJ 71, 64.
 *
 * Poisson's equation is integrated with W as the variable: over y = r² and q = m/r³, both smooth from
 * centre to edge, where m is the mass with m' = 9 ρ/ρ₀ r².
 */
import type { Random } from '../numerics/random.ts';
import { clausiusInside } from './jeans.ts';
import type { Profile } from './model.ts';
import { requireMassFraction, type SampledModel } from './sampling.ts';

/** Steps of W from the centre to the edge. */
const STEPS = 4096;
/** Γ(3/2) … Γ(9/2) over √π. */
const GAMMA = { threeHalves: 1 / 2, fiveHalves: 3 / 4, sevenHalves: 15 / 8, nineHalves: 105 / 16 };
const ROOT_PI = Math.sqrt(Math.PI);

/**
 * W^a/Γ(a+1) (1 + W/(a+1) + W²/((a+1)(a+2)) + …) = e^W γ(a, W)/Γ(a). For a = 5/2 it is King's density
 * e^W erf √W − √(4W/π) (1 + 2W/3), without its cancellation at small W; for a = 7/2 density times σ₁².
 */
function lowered(a: number, gamma: number, w: number): number {
  let term = w ** a / (gamma * ROOT_PI);
  let sum = term;
  for (let n = a + 1; term > 1e-17 * sum; n++) {
    term *= w / n;
    sum += term;
  }
  return sum;
}
const density = (w: number): number => lowered(2.5, GAMMA.sevenHalves, w);
const pressure = (w: number): number => lowered(3.5, GAMMA.nineHalves, w);
/** Derivatives of {@link density}. */
const densitySlope = (w: number): number => density(w) + w ** 1.5 / (GAMMA.fiveHalves * ROOT_PI);
const densityBend = (w: number): number =>
  densitySlope(w) + Math.sqrt(w) / (GAMMA.threeHalves * ROOT_PI);

/** A place in the model: depth below the centre's W and height above the edge's, each to its own digits. */
interface Place {
  readonly below: number;
  readonly w: number;
  /** Node before it, and how far it is on to the next, from 0 to 1. */
  readonly node: number;
  readonly share: number;
}

/** The solution of Poisson's equation as a table over W with derivatives. */
class KingTable {
  readonly w0: number;
  readonly step: number;
  private readonly centralDensity: number;
  /** r², m/r³ and m^(2/3) at nodes W = W₀ − k step, and their derivatives by node number. */
  readonly y = new Float64Array(STEPS + 1);
  readonly q = new Float64Array(STEPS + 1);
  readonly size = new Float64Array(STEPS + 1);
  private readonly ySlope = new Float64Array(STEPS + 1);
  private readonly qSlope = new Float64Array(STEPS + 1);
  private readonly sizeSlope = new Float64Array(STEPS + 1);

  constructor(w0: number) {
    this.w0 = w0;
    this.step = w0 / STEPS;
    this.centralDensity = density(w0);
    const h = -this.step;
    this.q[0] = 3;
    for (let k = 0; k <= STEPS; k++) {
      const w = k === STEPS ? 0 : w0 - k * this.step;
      const [y, q] = [this.y[k], this.q[k]];
      const [dy1, dq1] = this.derivatives(w, y, q);
      this.ySlope[k] = h * dy1;
      this.qSlope[k] = h * dq1;
      this.size[k] = Math.cbrt(q * q) * y;
      this.sizeSlope[k] = (h * ((2 / 3) * y * dq1 + q * dy1)) / Math.cbrt(q);
      if (k === STEPS) break;
      // Classical Runge–Kutta of the fourth order.
      const half = w + h / 2;
      const next = Math.max(0, w + h);
      const [dy2, dq2] = this.derivatives(half, y + (h / 2) * dy1, q + (h / 2) * dq1);
      const [dy3, dq3] = this.derivatives(half, y + (h / 2) * dy2, q + (h / 2) * dq2);
      const [dy4, dq4] = this.derivatives(next, y + h * dy3, q + h * dq3);
      this.y[k + 1] = y + (h / 6) * (dy1 + 2 * dy2 + 2 * dy3 + dy4);
      this.q[k + 1] = q + (h / 6) * (dq1 + 2 * dq2 + 2 * dq3 + dq4);
    }
  }

  /** dy/dW and dq/dW; at the centre the limits of the series W = W₀ − 3y/2 + …. */
  private derivatives(w: number, y: number, q: number): readonly [number, number] {
    if (y === 0) return [-2 / 3, (1.8 * densitySlope(w)) / this.centralDensity];
    return [-2 / q, (3 * q - (9 * density(w)) / this.centralDensity) / (q * y)];
  }

  placeOfRadius(r: number): Place {
    return this.placeOf(this.y, this.ySlope, r * r);
  }

  placeOfSize(size: number): Place {
    return this.placeOf(this.size, this.sizeSlope, size);
  }

  radiusAt({ node, share }: Place): number {
    return Math.sqrt(hermite(this.y, this.ySlope, node, share));
  }

  /** m/r³ */
  meanDensityAt({ node, share }: Place): number {
    return hermite(this.q, this.qSlope, node, share);
  }

  /** Where an ascending column has this value: bisection for the node, Newton's iteration for the rest. */
  private placeOf(column: Float64Array, slopes: Float64Array, value: number): Place {
    let low = 0;
    let high = STEPS;
    while (high - low > 1) {
      const middle = (low + high) >>> 1;
      if (column[middle] <= value) low = middle;
      else high = middle;
    }
    const [a, b, da, db] = [column[low], column[high], slopes[low], slopes[high]];
    const rise = value - a;
    const bend = 3 * (b - a) - 2 * da - db;
    const twist = da + db - 2 * (b - a);
    // The slope may end at 0, where Newton's iteration alone would go astray.
    let [least, most] = [0, 1];
    let share = rise / (b - a);
    for (let round = 0; round < 60; round++) {
      const miss = share * (da + share * (bend + share * twist)) - rise;
      if (miss > 0) most = share;
      else least = share;
      let next = share - miss / (da + share * (2 * bend + share * 3 * twist));
      if (!(next >= least && next <= most)) next = (least + most) / 2;
      const isSettled = Math.abs(next - share) < 1e-15;
      share = next;
      if (isSettled) break;
    }
    return {
      below: (low + share) * this.step,
      w: (STEPS - low - share) * this.step,
      node: low,
      share,
    };
  }
}

/** Cubic Hermite interpolation between two nodes. */
function hermite(values: Float64Array, slopes: Float64Array, node: number, t: number): number {
  const rise = values[node + 1] - values[node];
  const bend = 3 * rise - 2 * slopes[node] - slopes[node + 1];
  const twist = slopes[node] + slopes[node + 1] - 2 * rise;
  return values[node] + t * (slopes[node] + t * (bend + t * twist));
}

/** A King model, with what is known of it besides. */
export interface KingModel extends SampledModel {
  readonly profile: Profile;
  /** r_t/r₀ */
  readonly tidalRadius: number;
  /** c = log₁₀ r_t/r₀ */
  readonly concentration: number;
  /** σ², the parameter of f, not a dispersion [G M/r₀]. */
  readonly sigmaSquared: number;
}

/** @param w0 - W₀, the central potential in units of σ², from 1e-6 to 20 */
export function king(w0: number): KingModel {
  const table = new KingTable(w0);
  const edge = Math.sqrt(table.y[STEPS]);
  const wholeSize = table.size[STEPS];
  /** m of the whole: ρ₀ = 9/(4π m_t) and σ² = 4πρ₀/9 with M = r₀ = 1. */
  const whole = wholeSize ** 1.5;
  const sigmaSquared = 1 / whole;
  const logCentral = Math.log(9 / (4 * Math.PI * whole * density(w0)));

  const enclosedMass = (r: number): number =>
    r >= edge ? 1 : (table.meanDensityAt(table.placeOfRadius(r)) * r * r * r) / whole;
  const logDensityOf = (w: number): number => logCentral + Math.log(density(w));
  const drop = (r: number, end: number): number =>
    sigmaSquared * (table.placeOfRadius(end).below - table.placeOfRadius(r).below);
  const profile: Profile = {
    edge,
    scales: [1],
    enclosedMass,
    massSlope(r) {
      if (r >= edge) return 0;
      const place = table.placeOfRadius(r);
      return (9 * density(place.w)) / (density(w0) * table.meanDensityAt(place));
    },
    radiusOfMass(f) {
      requireMassFraction(f);
      return table.radiusAt(table.placeOfSize(wholeSize * Math.cbrt(f * f)));
    },
    density: (r) => (r < edge ? Math.exp(logDensityOf(table.placeOfRadius(r).w)) : 0),
    logDensity: (r) => (r < edge ? logDensityOf(table.placeOfRadius(r).w) : -Infinity),
    logSlope(r) {
      const place = table.placeOfRadius(r);
      const fall = table.meanDensityAt(place) * r * r; // −dW/d ln r = m/r
      return (-fall * densitySlope(place.w)) / density(place.w);
    },
    logCurvature(r) {
      const place = table.placeOfRadius(r);
      const { w } = place;
      const fall = table.meanDensityAt(place) * r * r;
      const slope = densitySlope(w) / density(w);
      const bend = densityBend(w) / density(w) - slope * slope;
      // d(m/r)/d ln r = 9 ρ/ρ₀ r² − m/r
      return bend * fall * fall - slope * ((9 * density(w) * r * r) / density(w0) - fall);
    },
    potential: (r) => (r < edge ? -sigmaSquared * table.placeOfRadius(r).w - 1 / edge : -1 / r),
    potentialDrop(r, x) {
      if (r >= edge) return -Math.expm1(-x) / r;
      const end = r * Math.exp(x);
      if (end < edge) return drop(r, end);
      return sigmaSquared * table.placeOfRadius(r).w + 1 / edge - 1 / end;
    },
    depthBelow: (r) =>
      r < edge ? sigmaSquared * table.placeOfRadius(r).below : sigmaSquared * w0 + 1 / edge - 1 / r,
  };

  return {
    ...profile,
    name: 'king',
    profile,
    tidalRadius: edge,
    concentration: Math.log10(edge),
    sigmaSquared,
    potentialEnergy: clausiusInside(profile, profile, Infinity),
    radialDispersionSquared(r) {
      if (r >= edge) return 0;
      const { w } = table.placeOfRadius(r);
      return (sigmaSquared * pressure(w)) / density(w);
    },
    drawSpeed: (r, random) =>
      r < edge ? Math.sqrt(2 * sigmaSquared * drawEnergy(table.placeOfRadius(r).w, random)) : 0,
  };
}

/**
 * v²/(2σ²) from √k (e^(W−k) − 1) dk on 0 < k < W, by rejection: for small W from √k (W − k), above which
 * the exponential only bends down, for large W from √k e^−k.
 */
function drawEnergy(w: number, random: Random): number {
  if (w === 0) return 0;
  if (w <= 2) {
    const steepest = Math.expm1(w) / w;
    for (;;) {
      const s = random.uniform();
      const rest = w * (1 - s * s);
      // s² (1 − s²) is at most 1/4; s is v over the escape speed.
      if (random.uniform() < 4 * s * s * (1 - s * s)) {
        if (rest > 0 && steepest * rest * random.uniform() < Math.expm1(rest)) return w - rest;
      }
    }
  }
  for (;;) {
    const [a, b, c] = [random.normal(), random.normal(), random.normal()];
    const k = (a * a + b * b + c * c) / 2;
    if (k < w && random.uniform() < -Math.expm1(k - w)) return k;
  }
}
