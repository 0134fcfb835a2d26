/**
 * The peak of the circular velocity: the greatest M(r)/r, by a cubic through the logarithms around it.
 *
 * The greatest value of the curve itself would be the place where noise is highest. Errors follow from
 * the binomial scatter of enclosed fractions, which is common to neighbouring radii: the covariance of
 * F(r) and F(s) is F(r)(1 − F(s))/N_eff for r ≤ s. Source: order statistics; the rest has no source.
 */

export interface Peak {
  readonly radius: number;
  /** Null if the curve has a kink there (at the edge of the system) or too few bodies tell. */
  readonly radiusError: number | null;
  /** Greatest M(r)/r over the total mass. */
  readonly height: number;
  readonly heightError: number;
}

/** Half-width of the part of the curve that is fitted, in ln r, up to this number of effective bodies. */
const WINDOW = Math.LN2;
const WIDEST_UP_TO = 3e4;
/** It must reach that far beyond the peak, or the edge is too near for a fit. */
const REACH = 0.8;
const FEWEST_POINTS = 12;
/** Radii that hold fewer effective bodies are left out: M/r of the first few is noise. */
const FEWEST_INSIDE = 10;
const MOST_ROUNDS = 8;
/** Coefficients of the cubic. */
const TERMS = 4;

/**
 * Finds the peak.
 * @param fractions - of the total mass, ascending
 * @param radii - that hold them
 * @param effective - N_eff of the whole
 * @returns null if M(r)/r falls from the innermost radius on
 */
export function findPeak(
  fractions: readonly number[],
  radii: readonly number[],
  effective: number,
): Peak | null {
  const points = fractions
    .map((f, j) => ({ f, x: Math.log(radii[j]), y: Math.log(f / radii[j]) }))
    .filter(({ f, x }) => f * effective >= FEWEST_INSIDE && Number.isFinite(x));
  if (points.length === 0) return null;
  let highest = 0;
  points.forEach(({ y }, j) => {
    if (y > points[highest].y) highest = j;
  });
  if (highest === 0) return null;
  const found = fitPeak(points, points[highest].x, effective);
  if (found !== null) return found;
  const { f, x, y } = points[highest];
  const height = Math.exp(y);
  return {
    radius: Math.exp(x),
    radiusError: null,
    height,
    heightError: height * Math.sqrt((1 - f) / (f * effective)),
  };
}

interface Point {
  /** Fraction of the mass, ln r, ln(f/r). */
  readonly f: number;
  readonly x: number;
  readonly y: number;
}

/** The peak of a cubic about `start`, or null if the points around it have none. */
function fitPeak(all: readonly Point[], start: number, effective: number): Peak | null {
  // More bodies can tell that the curve is no cubic: then less of it is fitted.
  const window = WINDOW * Math.min(1, (WIDEST_UP_TO / effective) ** (1 / 8));
  let middle = start;
  for (let round = 0; ; round++) {
    const points = all.filter(({ x }) => Math.abs(x - middle) <= window);
    const reaches =
      points.length >= FEWEST_POINTS &&
      points[0].x < middle - REACH * window &&
      points[points.length - 1].x > middle + REACH * window;
    if (!reaches) return null;
    const rows = points.map(({ x }) => powers((x - middle) / window));
    const normal = normalMatrix(rows);
    const sums = Array.from({ length: TERMS }, (_, k) =>
      points.reduce((sum, { y }, j) => sum + rows[j][k] * y, 0),
    );
    const [c0, c1, c2, c3] = solve(normal, sums);
    const under = c2 * c2 - 3 * c1 * c3;
    if (!(under > 0 && c2 < 0)) return null;
    const s = c1 / (Math.sqrt(under) - c2);
    if (!(Math.abs(s) <= 1)) return null;
    // The window follows the peak, so that the fit does not depend on where the highest point lay.
    if (Math.abs(s) > 1e-3 && round < MOST_ROUNDS) {
      middle += s * window;
      continue;
    }
    const slopes = rows.map((row) => (c1 + 2 * c2 * row[1] + 3 * c3 * row[2]) / window);
    const scatter = (functional: readonly number[]) =>
      scatterOf(functional, rows, normal, points, slopes, effective);
    const curvature = 2 * Math.sqrt(under);
    const radius = Math.exp(middle + s * window);
    const height = Math.exp(c0 + s * (c1 + s * (c2 + s * c3)));
    return {
      radius,
      radiusError: (radius * window * scatter([0, 1, 2 * s, 3 * s * s])) / curvature,
      height,
      heightError: height * scatter(powers(s)),
    };
  }
}

/** Scatter of a linear function of the coefficients, given by what it takes of each. */
function scatterOf(
  functional: readonly number[],
  rows: readonly (readonly number[])[],
  normal: readonly (readonly number[])[],
  points: readonly Point[],
  slopes: readonly number[],
  effective: number,
): number {
  const z = solve(normal, functional);
  // F moves by δF at a fixed radius, so a radius of fixed F by −δF/F′, F′ = dF/d ln r = F (1 + dy/dx).
  const weights = rows.map(
    (row, j) => row.reduce((sum, a, k) => sum + a * z[k], 0) / (points[j].f * (1 + slopes[j])),
  );
  let variance = 0;
  weights.forEach((a, i) => {
    weights.forEach((b, j) => {
      const low = Math.min(points[i].f, points[j].f);
      const high = Math.max(points[i].f, points[j].f);
      variance += a * b * low * (1 - high);
    });
  });
  return Math.sqrt(Math.max(0, variance) / effective);
}

function powers(s: number): number[] {
  return [1, s, s * s, s * s * s];
}

function normalMatrix(rows: readonly (readonly number[])[]): number[][] {
  return Array.from({ length: TERMS }, (_, a) =>
    Array.from({ length: TERMS }, (__, b) => rows.reduce((sum, row) => sum + row[a] * row[b], 0)),
  );
}

/** Solves a small system by elimination with pivots. */
function solve(matrix: readonly (readonly number[])[], right: readonly number[]): number[] {
  const n = right.length;
  const rows = matrix.map((row, k) => [...row, right[k]]);
  for (let k = 0; k < n; k++) {
    let pivot = k;
    for (let i = k + 1; i < n; i++) if (Math.abs(rows[i][k]) > Math.abs(rows[pivot][k])) pivot = i;
    [rows[k], rows[pivot]] = [rows[pivot], rows[k]];
    for (let i = k + 1; i < n; i++) {
      const factor = rows[i][k] / rows[k][k];
      for (let j = k; j <= n; j++) rows[i][j] -= factor * rows[k][j];
    }
  }
  const solution = new Array<number>(n).fill(0);
  for (let k = n - 1; k >= 0; k--) {
    const rest = solution.reduce((sum, value, j) => (j > k ? sum + rows[k][j] * value : sum), 0);
    solution[k] = (rows[k][n] - rest) / rows[k][k];
  }
  return solution;
}
