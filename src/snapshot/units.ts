/**
 * Unit systems and the value of G in each.
 *
 * Sources: GM of the Sun 1.3271244e20 m³ s⁻² (IAU 2015 Resolution B3, nominal, exact); astronomical
 * unit 149597870700 m (IAU 2012 B2); parsec (648000/π) au (IAU 2015 B2); Julian year 365.25 d;
 * G in SI 6.67430e-11 m³ kg⁻¹ s⁻² (CODATA 2018 and 2022). G with solar masses always comes from
 * GM of the Sun, never from G times a rounded solar mass.
 */

import { UsageError } from '../errors.ts';

/** Names of the built-in systems, and `own` for one that a file or user states. */
export type UnitName =
  'natural' | 'henon' | 'kpc-kms-msun' | 'pc-kms-msun' | 'au-year-msun' | 'si' | 'own';

/** Dimension in powers of mass, length and time. */
export interface Dimension {
  readonly mass: number;
  readonly length: number;
  readonly time: number;
}

export interface UnitSystem {
  readonly name: UnitName;
  /** Symbols for print; empty in `natural` and `henon`. */
  readonly mass: string;
  readonly length: string;
  readonly velocity: string;
  /** Symbol of the unit of time that goes with length/velocity, for print. */
  readonly time: string;
  /** G in [length · velocity² / mass] of this system. */
  readonly gravity: number;
  /** How large the units of an own system are, in m, kg and m/s; absent if only symbols are known. */
  readonly si?: { readonly length: number; readonly mass: number; readonly velocity: number };
}

/** GM of the Sun [m³ s⁻²]. */
export const GM_SUN = 1.3271244e20;
/** Astronomical unit [m]. */
export const AU = 149597870700;
/** Parsec [m]. */
export const PARSEC = (648000 / Math.PI) * AU;
/** Julian year [s]. */
export const JULIAN_YEAR = 365.25 * 86400;
/** G in SI [m³ kg⁻¹ s⁻²]. */
export const GRAVITY_SI = 6.6743e-11;

/** G in pc (km/s)² / Msun. */
const G_PC_KMS = GM_SUN / (PARSEC * 1e6);

export const UNIT_SYSTEMS: Readonly<Record<Exclude<UnitName, 'own'>, UnitSystem>> = {
  natural: { name: 'natural', mass: '', length: '', velocity: '', time: '', gravity: 1 },
  henon: { name: 'henon', mass: '', length: '', velocity: '', time: '', gravity: 1 },
  'kpc-kms-msun': {
    name: 'kpc-kms-msun',
    mass: 'Msun',
    length: 'kpc',
    velocity: 'km/s',
    time: 'kpc/(km/s)',
    gravity: G_PC_KMS / 1000,
  },
  'pc-kms-msun': {
    name: 'pc-kms-msun',
    mass: 'Msun',
    length: 'pc',
    velocity: 'km/s',
    time: 'pc/(km/s)',
    gravity: G_PC_KMS,
  },
  'au-year-msun': {
    name: 'au-year-msun',
    mass: 'Msun',
    length: 'au',
    velocity: 'au/yr',
    time: 'yr',
    gravity: (GM_SUN * JULIAN_YEAR * JULIAN_YEAR) / (AU * AU * AU),
  },
  si: { name: 'si', mass: 'kg', length: 'm', velocity: 'm/s', time: 's', gravity: GRAVITY_SI },
};

/** Length of pc/(km/s), in megayears of 10⁶ Julian years; kpc/(km/s) is the same number of gigayears. */
export const PARSEC_PER_KMS_IN_MYR = PARSEC / 1000 / (JULIAN_YEAR * 1e6);

/** G in pc³ / (Msun Myr²): the same constant with megayears as the unit of time. */
export const GRAVITY_PC_MYR = G_PC_KMS / PARSEC_PER_KMS_IN_MYR ** 2;

/** The built-in system of a name. @throws UsageError `usage.units`, which lists the known ones */
export function unitSystemNamed(name: string): UnitSystem {
  const known: Readonly<Record<string, UnitSystem>> = UNIT_SYSTEMS;
  if (Object.hasOwn(known, name)) return known[name];
  throw new UsageError(
    'usage.units',
    `--units ${name} is not a known unit system`,
    `known are ${Object.keys(known).join(', ')}; a file with units of your own must end in .json`,
  );
}
