/** The normal distribution: tail and its inverse. */

/**
 * Two-sided tail of the standard normal distribution, P(|x| > z), to 1e-12 relative for z up to 37.
 * Source: Abramowitz & Stegun 1964, 7.1.5 (series) and 7.1.14 (continued fraction).
 */
export function normalTail(z: number): number {
  const x = Math.abs(z) / Math.SQRT2;
  if (x < 2) {
    let term = x;
    let sum = x;
    for (let k = 1; k < 60; k++) {
      term *= (-x * x) / k;
      sum += term / (2 * k + 1);
    }
    return 1 - (2 / Math.sqrt(Math.PI)) * sum;
  }
  let fraction = 0;
  for (let k = 120; k > 0; k--) fraction = k / 2 / (x + fraction);
  return Math.exp(-x * x) / (x + fraction) / Math.sqrt(Math.PI);
}

/** z with P(|x| > z) = `tail`, by bisection. */
export function normalPoint(tail: number): number {
  let [low, high] = [0, 40];
  for (let k = 0; k < 60; k++) {
    const middle = (low + high) / 2;
    if (normalTail(middle) > tail) low = middle;
    else high = middle;
  }
  return (low + high) / 2;
}
