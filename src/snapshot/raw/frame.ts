/** The frame of the coordinates, as the layout and the header of a raw file state it. */
import { InputError } from '../../errors.ts';
import type { Frame } from '../particles.ts';
import { statedNumber } from './components.ts';
import type { LayoutComoving, StatedNumber } from './layout.ts';
import type { RawStructure } from './structure.ts';

type Structure = Pick<RawStructure, 'layout' | 'header'>;

/** @throws InputError `input.headerValue` if a value cannot be what it should be */
export function frameOf(path: string, { layout, header }: Structure): Frame {
  const { comoving } = layout;
  if (comoving === undefined) return { kind: 'physical' };
  const value: Value = (key, isValid, expected) => {
    const stated: StatedNumber | undefined = comoving[key];
    if (stated === undefined) return null;
    const number = statedNumber(stated, header);
    if (Number.isFinite(number) && isValid(number)) return number;
    throw new InputError(
      'input.headerValue',
      `${path}: ${key} of the comoving coordinates is ${number}; expected ${expected}`,
      'Correct its type, offset, scale or byteOrder in the layout.',
    );
  };
  const redshift = value('redshift', (z) => z > -1, 'a finite number above -1');
  const scaleFactor =
    redshift === null ? (value('scaleFactor', isPositive, POSITIVE) ?? 1) : 1 / (1 + redshift);
  return {
    kind: 'comoving',
    scaleFactor,
    hubbleRate: hubbleRate(path, value, scaleFactor),
    boxSize: value('boxSize', isPositive, POSITIVE),
    velocity: comoving.velocity,
  };
}

type Value = (
  key: Exclude<keyof LayoutComoving, 'velocity'>,
  isValid: (value: number) => boolean,
  expected: string,
) => number | null;

const isPositive = (value: number): boolean => value > 0;
const POSITIVE = 'a finite number above 0';
const FINITE = 'a finite number';

/**
 * H at scale factor a: as stated, or H₀ √(Ω_m a⁻³ + (1 − Ω_m − Ω_Λ) a⁻² + Ω_Λ).
 * Source: Friedmann 1922, in the form of Peebles 1993, Principles of Physical Cosmology (from memory).
 */
function hubbleRate(path: string, value: Value, a: number): number {
  const stated = value('hubbleRate', () => true, FINITE);
  if (stated !== null) return stated;
  const today = value('hubbleConstant', () => true, FINITE) ?? 0;
  const matter = value('matterDensity', () => true, FINITE) ?? 0;
  const darkEnergy = value('darkEnergyDensity', () => true, FINITE) ?? 1 - matter;
  const square = matter / (a * a * a) + (1 - matter - darkEnergy) / (a * a) + darkEnergy;
  if (square >= 0) return today * Math.sqrt(square);
  throw new InputError(
    'input.headerValue',
    `${path}: with a matter density of ${matter} and a dark energy density of ${darkEnergy} there is no expansion at a = ${a}; expected densities of a model that reaches it`,
    'Correct these values, or give hubbleRate itself.',
  );
}

/**
 * Values of the items of the header that the frame needs, when particles are written.
 * @throws InputError `input.doesNotFit` if layout and particles are not of one mind
 */
export function frameHeader(
  path: string,
  comoving: LayoutComoving | undefined,
  frame: Frame,
): Record<string, number> {
  const refuse = (wanted: string, found: string): InputError =>
    new InputError(
      'input.doesNotFit',
      `${path}: the layout says ${wanted}, the particles ${found}`,
      'Correct the key "comoving" of the layout to write.',
    );
  if (comoving === undefined || frame.kind === 'physical') {
    if (comoving === undefined && frame.kind === 'physical') return {};
    throw refuse(
      `that coordinates are ${comoving === undefined ? 'physical' : 'comoving'}`,
      `that they are ${frame.kind}`,
    );
  }
  const own = {
    scaleFactor: frame.scaleFactor,
    redshift: 1 / frame.scaleFactor - 1,
    hubbleRate: frame.hubbleRate,
    boxSize: frame.boxSize,
    velocity: frame.velocity,
  };
  const header: Record<string, number> = {};
  for (const key of ['scaleFactor', 'redshift', 'hubbleRate', 'boxSize', 'velocity'] as const) {
    const stated = comoving[key];
    const value = own[key];
    if (stated === undefined) {
      if (key === 'boxSize' && value !== null) throw refuse('no boxSize', `boxSize ${value}`);
    } else if (typeof stated !== 'object') {
      if (stated !== value) throw refuse(`${key} ${stated}`, `${key} ${String(value)}`);
    } else {
      if (typeof value !== 'number') throw refuse(`a ${key}`, 'none');
      header[stated.header] = value / stated.scale;
    }
  }
  return header;
}
