/** Numbers as people read them: rounded to their error, or to six digits where there is none. */

/** What stands for a figure that cannot be had. */
export const NONE = 'n/a';

/** Digits of a value that are shown at most, however small its error. */
const DIGITS_AT_MOST = 10;
const DIGITS_WITHOUT_ERROR = 6;
/** Outside of these powers of ten a figure is written with an exponent. */
const LEAST_PLAIN = -4;
const GREATEST_PLAIN = 6;

/**
 * `-0.294524 ± 0.000012`: the error with two digits, the value to the same place. Without an error
 * (null or 0) six digits.
 */
export function figure(value: number | null, error: number | null = null): string {
  if (value === null || !Number.isFinite(value)) return NONE;
  if (error === null || !(error > 0) || !Number.isFinite(error)) return significant(value);
  const errorPower = powerOf(Number(error.toExponential(1)));
  const power = value === 0 ? errorPower : powerOf(value);
  if (power - errorPower + 2 > DIGITS_AT_MOST) {
    return `${significant(value, DIGITS_AT_MOST)} ± ${short(error)}`;
  }
  const top = Math.max(power, errorPower);
  const places = 1 - errorPower;
  if (top >= GREATEST_PLAIN || top < LEAST_PLAIN) {
    const exponent = `e${top < 0 ? '-' : '+'}${Math.abs(top)}`;
    return `(${shifted(value, top, places + top)} ± ${shifted(error, top, places + top)})${exponent}`;
  }
  return `${fixed(value, places)} ± ${fixed(error, places)}`;
}

/** A value to so many significant digits, trailing zeros kept. */
export function significant(value: number, digits = DIGITS_WITHOUT_ERROR): string {
  if (value === 0) return '0';
  const power = powerOf(value);
  if (power >= GREATEST_PLAIN || power < LEAST_PLAIN) return value.toExponential(digits - 1);
  return value.toPrecision(digits);
}

/** A number as briefly as it can be said, to `digits` digits: settings, errors, factors. */
export function short(value: number, digits = 2): string {
  const rounded = Number(value.toPrecision(digits));
  const isSmall = rounded !== 0 && Math.abs(rounded) < 10 ** LEAST_PLAIN;
  return isSmall ? rounded.toExponential() : String(rounded);
}

/** A whole number with separators of thousands, the same in every locale. */
export function wholeNumber(value: number): string {
  return value.toLocaleString('en-US');
}

/**
 * Three components to the same place, which is 1e-5 of `scale` or of the largest component.
 * @param scale - what is a large value for this vector; smaller components show as 0
 */
export function vectorText(vector: readonly number[], scale: number | null): string {
  const largest = Math.max(scale ?? 0, ...vector.map(Math.abs));
  if (!(largest > 0) || !Number.isFinite(largest)) return vector.map(() => '0').join('  ');
  const power = powerOf(largest);
  const plain = power < GREATEST_PLAIN && power >= LEAST_PLAIN;
  const texts = plain
    ? vector.map((component) => fixed(component, Math.max(0, 5 - power)))
    : vector.map((component) => shifted(component, power, 5));
  const joined = texts.map((text) => text.replace(/^-(0\.?0*)$/, '$1')).join('  ');
  return plain ? joined : `(${joined})e${power < 0 ? '-' : '+'}${Math.abs(power)}`;
}

/** Seconds as people say them, `0.4 s`, `12 s`, `3 min 20 s`, with spaces that wrap() does not break. */
export function duration(seconds: number): string {
  if (seconds < 0.0095) return `${short(seconds * 1000, 1)}\u00a0ms`;
  if (seconds < 9.95) return `${short(seconds)}\u00a0s`;
  const whole = Math.round(seconds);
  if (whole < 100) return `${whole}\u00a0s`;
  return `${Math.floor(whole / 60)}\u00a0min\u00a0${whole % 60}\u00a0s`;
}

/** Years in the unit that keeps the number small. */
export function yearsText(years: number): string {
  const units = [
    [1e9, 'Gyr'],
    [1e6, 'Myr'],
    [1e3, 'kyr'],
  ] as const;
  const [size, symbol] = units.find(([least]) => Math.abs(years) >= least) ?? [1, 'yr'];
  return `${short(years / size, 4)} ${symbol}`;
}

/** Bytes in powers of ten, as disks are sold. */
export function bytesText(bytes: number): string {
  const units = [
    [1e9, 'GB'],
    [1e6, 'MB'],
    [1e3, 'kB'],
  ] as const;
  const [size, symbol] = units.find(([least]) => bytes >= least) ?? [1, 'bytes'];
  return `${short(bytes / size, 3)} ${symbol}`;
}

/** The power of ten of the leading digit of a number that is not 0. */
function powerOf(value: number): number {
  return Number(value.toExponential().split('e')[1]);
}

/** `value` rounded to a place of ten: two after the point for 2, tens for −1. */
function fixed(value: number, places: number): string {
  if (places >= 0) return value.toFixed(Math.min(places, 100));
  const step = 10 ** -places;
  return String(Math.round(value / step) * step);
}

/** `value` / 10^power to so many places; the shift is done on the digits and rounds nothing. */
function shifted(value: number, power: number, places: number): string {
  if (value === 0) return (0).toFixed(Math.max(0, places));
  const [digits, exponent] = value.toExponential().split('e');
  return fixed(Number(`${digits}e${Number(exponent) - power}`), places);
}
