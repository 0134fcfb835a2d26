/** Gauss–Legendre quadrature on panels: exact to rounding for what is smooth on each panel. */

/** Points and weights on (0, 1). */
export interface Rule {
  readonly points: Float64Array;
  readonly weights: Float64Array;
}

/**
 * The rule of n points. Newton's iteration on the Legendre polynomial by its recurrence.
 * Source: Abramowitz & Stegun 1964, section 25.4.29 (from memory).
 */
export function gaussLegendre(n: number): Rule {
  const points = new Float64Array(n);
  const weights = new Float64Array(n);
  for (let k = 0; k < n; k++) {
    let x = Math.cos((Math.PI * (k + 0.75)) / (n + 0.5));
    let slope = 1;
    for (let round = 0; round < 8; round++) {
      let before = 1;
      let value = x;
      for (let j = 2; j <= n; j++) {
        [before, value] = [value, ((2 * j - 1) * x * value - (j - 1) * before) / j];
      }
      slope = (n * (x * value - before)) / (x * x - 1);
      x -= value / slope;
    }
    points[n - 1 - k] = (1 + x) / 2;
    weights[n - 1 - k] = 1 / ((1 - x * x) * slope * slope);
  }
  return { points, weights };
}

const PANEL = gaussLegendre(16);

/** ∫ f from a to b by one panel of 16 points. */
export function integratePanel(f: (x: number) => number, a: number, b: number): number {
  let sum = 0;
  for (let k = 0; k < PANEL.points.length; k++) {
    sum += PANEL.weights[k] * f(a + (b - a) * PANEL.points[k]);
  }
  return sum * (b - a);
}

/** Relative size of the panels that end an integral to infinity. */
const NEGLIGIBLE = 1e-17;

/**
 * ∫ f from a to b by panels no longer than `length`; b may be Infinity for an f that dies off
 * exponentially: then it ends after three panels in a row that add next to nothing.
 */
export function integratePanels(
  f: (x: number) => number,
  a: number,
  b: number,
  length: number,
): number {
  let sum = 0;
  if (b !== Infinity) {
    const panels = Math.max(1, Math.ceil((b - a) / length));
    const step = (b - a) / panels;
    for (let k = 0; k < panels; k++) {
      sum += integratePanel(f, a + k * step, a + (k + 1) * step);
    }
    return sum;
  }
  for (let begin = a, idle = 0; idle < 3; begin += length) {
    const part = integratePanel(f, begin, begin + length);
    sum += part;
    // Also ends if NaN came in.
    idle = Math.abs(part) > NEGLIGIBLE * Math.abs(sum) ? 0 : idle + 1;
  }
  return sum;
}
