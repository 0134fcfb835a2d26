/** Numbers in sentences: rounded to their error, or briefly where there is none. */

/** So many significant digits, no trailing zeros. */
export function plain(value: number, digits = 5): string {
  return Number.isInteger(value) ? String(value) : String(Number(value.toPrecision(digits)));
}

/** `1.013 ± 0.025`: the error to two digits, the value to the same place. */
export function withError(value: number, error: number | null): string {
  if (error === null || !(error > 0)) return plain(value);
  const places = 1 - Math.floor(Math.log10(Number(error.toPrecision(2))));
  const top = Math.max(Math.abs(value), error);
  if (places < 0 || places > 12 || top >= 1e6 || top < 1e-4) {
    return `${plain(value)} ± ${plain(error, 2)}`;
  }
  return `${value.toFixed(places)} ± ${error.toFixed(places)}`;
}
