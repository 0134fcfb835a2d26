/** What the samplers of the models share: where drawn bodies go, and checks of a mass fraction. */
import { UsageError } from '../errors.ts';
import type { Random } from '../numerics/random.ts';
import type { FloatColumn } from '../snapshot/particles.ts';
import type { Profile, SphericalModel } from './model.ts';

/** Columns of positions and velocities. */
export interface Motion {
  readonly x: FloatColumn;
  readonly y: FloatColumn;
  readonly z: FloatColumn;
  readonly vx: FloatColumn;
  readonly vy: FloatColumn;
  readonly vz: FloatColumn;
}

export interface BodyView extends Motion {
  readonly mass: FloatColumn;
}

/** Columns that a sampler fills, and the units they are in. */
export interface PhaseSpace extends Motion {
  /** Length and velocity of the model's unit, in the units of the columns. */
  readonly lengthScale: number;
  readonly velocityScale: number;
}

/** A model that can also be drawn from. */
export interface SampledModel extends SphericalModel {
  /** What an inversion needs; null if the model has no distribution function. */
  readonly profile: Profile | null;
  /**
   * Speed of a body at radius r, drawn from the model's isotropic velocity distribution there
   * [model units].
   */
  drawSpeed(r: number, random: Random): number;
}

/** Where the radii and speeds of bodies come from, in the model's units. */
export interface BodySource {
  radiusOfMass(f: number): number;
  drawSpeed(r: number, random: Random): number;
  /**
   * r_a of Osipkov and Merritt: tangential velocities are divided by √(1 + r²/r_a²); isotropic if Infinity
   * or not given.
   */
  readonly anisotropyRadius?: number;
}

/**
 * Fills bodies `begin` … `end − 1` of `target` with independent draws of radius, speed and two
 * directions. The mass fraction of a body is uniform in (0, `massFraction`).
 */
export function drawBodies(
  source: BodySource,
  random: Random,
  massFraction: number,
  target: PhaseSpace,
  begin: number,
  end: number,
): void {
  const { x, y, z, vx, vy, vz, lengthScale, velocityScale } = target;
  const { anisotropyRadius = Infinity } = source;
  const direction = new Float64Array(3);
  for (let i = begin; i < end; i++) {
    const r = source.radiusOfMass(massFraction * random.openUniform());
    random.unitVector(direction);
    const nx = direction[0];
    const ny = direction[1];
    const nz = direction[2];
    const length = r * lengthScale;
    x[i] = length * nx;
    y[i] = length * ny;
    z[i] = length * nz;
    const speed = source.drawSpeed(r, random) * velocityScale;
    random.unitVector(direction);
    if (anisotropyRadius === Infinity) {
      vx[i] = speed * direction[0];
      vy[i] = speed * direction[1];
      vz[i] = speed * direction[2];
      continue;
    }
    const tangential = speed / Math.hypot(1, r / anisotropyRadius);
    const along = nx * direction[0] + ny * direction[1] + nz * direction[2];
    const radial = (speed - tangential) * along;
    vx[i] = tangential * direction[0] + radial * nx;
    vy[i] = tangential * direction[1] + radial * ny;
    vz[i] = tangential * direction[2] + radial * nz;
  }
}

/** @throws UsageError `usage.massFraction` unless 0 ≤ f < 1 */
export function requireMassFraction(f: number): void {
  if (!(f >= 0 && f < 1)) {
    throw new UsageError(
      'usage.massFraction',
      `The mass fraction is ${f}, but must be at least 0 and less than 1.`,
      'Give a fraction such as 0.5.',
    );
  }
}
