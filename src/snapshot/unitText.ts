/** A dimension in the symbols of a unit system, for print: energy in `pc-kms-msun` is `Msun (km/s)²`. */
import { JULIAN_YEAR, PARSEC_PER_KMS_IN_MYR, type Dimension, type UnitSystem } from './units.ts';

const SUPERSCRIPTS = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];

/**
 * The unit of a quantity.
 *
 * Powers of time go with lengths into powers of the velocity where that is possible, since a system
 * states mass, length and velocity; else the symbol of time is used.
 * @returns text such as `Msun (km/s)²`; empty for pure numbers and in systems without symbols
 */
export function unitText(dimension: Dimension, units: UnitSystem): string {
  if (units.mass === '' && units.length === '' && units.velocity === '') return '';
  const { mass, length, time } = dimension;
  const lengths = length + time;
  // au (au/yr) is better said as au²/yr, but kpc km/s has no shorter form.
  const isQuotient = units.velocity === `${units.length}/${units.time}`;
  if (isQuotient && time < 0 && lengths > 0) {
    const above = [raise(units.mass, mass), raise(units.length, length)].filter(Boolean).join(' ');
    return `${above}/${raise(units.time, -time)}`;
  }
  const viaVelocity = time < 0 && lengths >= 0;
  const factors: readonly (readonly [symbol: string, power: number])[] = viaVelocity
    ? [
        [units.mass, mass],
        [units.length, lengths],
        [units.velocity, -time],
      ]
    : [
        [units.mass, mass],
        [units.length, length],
        [units.time, time],
      ];
  const used = factors.filter(([, power]) => power !== 0);
  // `1e10 Msun` is clear alone; beside other factors its number would seem to belong to all.
  const apart = (symbol: string) =>
    used.length > 1 && symbol.includes(' ') ? `(${symbol})` : symbol;
  return used
    .map(([symbol, power]) => raise(power === 1 ? apart(symbol) : symbol, power))
    .join(' ');
}

function raise(symbol: string, power: number): string {
  if (power === 0) return '';
  if (power === 1) return symbol;
  const exponent = String(Math.abs(power))
    .split('')
    .map((digit) => SUPERSCRIPTS[Number(digit)] ?? digit)
    .join('');
  const base = /[/ ]/.test(symbol) ? `(${symbol})` : symbol;
  return `${base}${power < 0 ? '⁻' : ''}${exponent}`;
}

/**
 * Years in the system's unit of time, to print a time that people can grasp; null where the unit is
 * a year or has no length.
 */
export function yearsPerTimeUnit(units: UnitSystem): number | null {
  if (units.si !== undefined && units.time !== 'yr') {
    return units.si.length / units.si.velocity / JULIAN_YEAR;
  }
  if (units.name === 'pc-kms-msun') return PARSEC_PER_KMS_IN_MYR * 1e6;
  if (units.name === 'kpc-kms-msun') return PARSEC_PER_KMS_IN_MYR * 1e9;
  return null;
}
