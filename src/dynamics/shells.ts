/**
 * Streaming, dispersions, anisotropy and rotation in shells of equal number, and 2T_r/T_t.
 *
 * Means and dispersions are weighted by mass. Dispersions are about the shell's own mean radial and
 * mean azimuthal velocity, with the bias of a mean found from the same bodies taken out.
 * Sources: β of Binney 1980, MNRAS 190, 873; 2T_r/T_t of Polyachenko & Shukhman 1981 (from memory);
 * errors to first order in the sums that a figure is made of, docs/methods.md.
 */
import { LAYERS, ofShell, type Layers, type Spread } from './layers.ts';
import type { Vector } from './record.ts';

/** Figures of the shells, innermost first; null where a shell has too few bodies or none that move. */
export interface Shells {
  /** Which bodies the shells are made of. */
  readonly set: 'whole' | 'bound';
  readonly axis: Vector | null;
  readonly particles: readonly number[];
  readonly mass: readonly number[];
  readonly inner: readonly number[];
  readonly outer: readonly number[];
  readonly radii: readonly number[];
  readonly radialVelocity: Figures;
  readonly radialVelocityErrors: Figures;
  readonly radialDispersion: Figures;
  readonly radialDispersionErrors: Figures;
  readonly tangentialDispersion: Figures;
  readonly tangentialDispersionErrors: Figures;
  readonly anisotropy: Figures;
  readonly anisotropyErrors: Figures;
  readonly rotation: Figures;
  readonly rotationErrors: Figures;
}

type Figures = readonly (number | null)[];

/** Of fewer effective bodies, (Σm)²/Σm², no velocity figure is told. */
const FEWEST = 3;
/** Squares smaller than this times all squares are what rounding makes of nothing. */
const ROUNDING = 1e-28;

/** All that the record says of the shells. */
export function shellFigures(
  layers: Layers,
  spreads: readonly Spread[],
  set: Shells['set'],
): Shells {
  const motions = spreads.map((spread, k) => motionOf(layers, spread, k));
  const figures = (key: keyof ShellMotion) => motions.map((motion) => motion?.[key] ?? null);
  const each = (valueOf: (k: number) => number) => motions.map((_, k) => valueOf(k));
  const hasAxis = layers.axis.some((component) => component !== 0);
  return {
    set,
    axis: hasAxis ? layers.axis : null,
    particles: each((k) => ofShell(layers.particles, k)),
    mass: each((k) => ofShell(layers.mass, k)),
    inner: each((k) => (k === 0 ? 0 : layers.outer[LAYERS * k - 1])),
    outer: each((k) => layers.outer[LAYERS * (k + 1) - 1]),
    radii: each((k) => layers.outer[LAYERS * k + LAYERS / 2 - 1]),
    radialVelocity: figures('radialVelocity'),
    radialVelocityErrors: figures('radialVelocityError'),
    radialDispersion: figures('radialDispersion'),
    radialDispersionErrors: figures('radialDispersionError'),
    tangentialDispersion: figures('tangentialDispersion'),
    tangentialDispersionErrors: figures('tangentialDispersionError'),
    anisotropy: figures('anisotropy'),
    anisotropyErrors: figures('anisotropyError'),
    rotation: hasAxis ? figures('rotation') : motions.map(() => null),
    rotationErrors: hasAxis ? figures('rotationError') : motions.map(() => null),
  };
}

interface ShellMotion {
  readonly radialVelocity: number;
  readonly radialVelocityError: number;
  readonly rotation: number;
  readonly rotationError: number;
  readonly radialDispersion: number;
  readonly radialDispersionError: number | null;
  readonly tangentialDispersion: number;
  readonly tangentialDispersionError: number | null;
  readonly anisotropy: number | null;
  readonly anisotropyError: number | null;
}

/** Velocities of shell k, or null if its bodies are too few. */
function motionOf(layers: Layers, spread: Spread, k: number): ShellMotion | null {
  const mass = ofShell(layers.mass, k);
  const squaredMass = ofShell(layers.squaredMass, k);
  const share = squaredMass / (mass * mass);
  if (!(share * FEWEST <= 1)) return null;
  const radialVelocity = ofShell(layers.radial, k) / mass;
  const rotation = ofShell(layers.azimuthal, k) / mass;
  // Means found from the same bodies take their share of the squares with them.
  const radial2 = spread.radial / (mass * (1 - share));
  const tangential2 = spread.tangential / (2 * mass * (1 - share / 2));
  const errorOfMean = (square: number) => Math.sqrt(square / (1 - share)) / mass;
  const streaming = mass * (radialVelocity ** 2 + rotation ** 2);
  const isRadial = spread.radial > ROUNDING * (spread.radial + spread.tangential + streaming);
  const { radial2: a, radial4: aa, tangential2: t, tangential4: tt } = spread;
  return {
    radialVelocity,
    radialVelocityError: errorOfMean(spread.radial2),
    rotation,
    rotationError: errorOfMean(spread.azimuthal2),
    radialDispersion: Math.sqrt(radial2),
    radialDispersionError: rootError(radial2, spread.radial, a, aa, mass, squaredMass),
    tangentialDispersion: Math.sqrt(tangential2),
    tangentialDispersionError: rootError(tangential2, spread.tangential, t, tt, mass, squaredMass),
    anisotropy: isRadial ? 1 - tangential2 / radial2 : null,
    anisotropyError: isRadial ? quotientError(spread) / 2 : null,
  };
}

/**
 * Error of √square, where `square` goes as a sum Σm a: half its relative error, from the variance
 * Σm²(a − ⟨a⟩)² of the sum.
 */
function rootError(
  square: number,
  sum: number,
  sum2: number,
  sum4: number,
  mass: number,
  squaredMass: number,
): number {
  if (!(sum > 0)) return 0;
  const mean = sum / mass;
  const variance = sum4 - 2 * mean * sum2 + mean * mean * squaredMass;
  return (Math.sqrt(square) * Math.sqrt(Math.max(0, variance))) / (2 * sum);
}

/** Error of Σm t / Σm a: body i moves it by m (t − λ a)/Σm a, with λ the quotient. */
function quotientError({ radial, tangential, radial4, tangential4, mixed4 }: Spread): number {
  const quotient = tangential / radial;
  const variance = tangential4 - 2 * quotient * mixed4 + quotient * quotient * radial4;
  return Math.sqrt(Math.max(0, variance)) / radial;
}

export interface RadialToTangential {
  /** 2T_r/T_t; null if nothing moves across the radius. */
  readonly radialToTangential: number | null;
  readonly radialToTangentialError: number | null;
}

/** 2T_r/T_t of all shells together, streaming included. */
export function radialToTangential(all: Spread): RadialToTangential {
  const { radial, tangential } = all;
  if (!(tangential > ROUNDING * (radial + tangential))) {
    return { radialToTangential: null, radialToTangentialError: null };
  }
  const ratio = (2 * radial) / tangential;
  // The error of a quotient is that of its inverse times the square of it; written so that T_r may be 0.
  const variance = 4 * all.radial4 - 4 * ratio * all.mixed4 + ratio * ratio * all.tangential4;
  return {
    radialToTangential: ratio,
    radialToTangentialError: Math.sqrt(Math.max(0, variance)) / tangential,
  };
}
