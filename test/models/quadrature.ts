/**
 * Tanh-sinh quadrature (Takahasi & Mori 1974, Publ. RIMS 9, 721): trapezoid rule after a change of
 * variable under which the integrand dies off doubly exponentially, so that end-point singularities
 * do no harm. Only for tests.
 */
export function integrate(
  f: (x: number) => number,
  from: number,
  to: number,
  step = 1 / 64,
): number {
  if (to === Infinity) {
    // x = from + t/(1−t); written with the distance to the upper end, so that no digits are lost there.
    return tanhSinh((t, rest) => f(from + t / rest) / (rest * rest), step);
  }
  const width = to - from;
  return width * tanhSinh((t, rest) => f(t < 0.5 ? from + width * t : to - width * rest), step);
}

/** Integral over t from 0 to 1 of g(t, 1 − t); both are given to full relative precision. */
function tanhSinh(g: (t: number, rest: number) => number, step: number): number {
  let sum = 0;
  for (let k = -4.5 / step; k <= 4.5 / step; k++) {
    const s = Math.PI * Math.sinh(k * step);
    const t = 1 / (1 + Math.exp(-s));
    const rest = 1 / (1 + Math.exp(s));
    const weight = Math.PI * Math.cosh(k * step) * t * rest;
    const value = g(t, rest) * weight;
    if (Number.isFinite(value)) sum += value; // beyond the reach of doubles the weight is 0
  }
  return sum * step;
}
