/** What the samplers of the models share: where drawn bodies go, and checks of a mass fraction. */
import { UsageError } from '../errors.ts';
import type { Random } from '../numerics/random.ts';
import type { FloatColumn } from '../snapshot/particles.ts';
import type { SphericalModel } from './model.ts';

/** Columns that a sampler fills, and the units they are in. */
export interface PhaseSpace {
  readonly x: FloatColumn;
  readonly y: FloatColumn;
  readonly z: FloatColumn;
  readonly vx: FloatColumn;
  readonly vy: FloatColumn;
  readonly vz: FloatColumn;
  /** Length and velocity of the model's unit, in the units of the columns. */
  readonly lengthScale: number;
  readonly velocityScale: number;
}

/** A model that can also be drawn from. */
export interface SampledModel extends SphericalModel {
  /**
   * Speed of a body at radius r, drawn from the model's isotropic velocity distribution there
   * [model units].
   */
  drawSpeed(r: number, random: Random): number;
}

/**
 * Fills bodies `begin` … `end − 1` of `target` with independent draws of radius, speed and two
 * directions. The mass fraction of a body is uniform in (0, `massFraction`).
 */
export function drawBodies(
  model: SampledModel,
  random: Random,
  massFraction: number,
  target: PhaseSpace,
  begin: number,
  end: number,
): void {
  const { x, y, z, vx, vy, vz, lengthScale, velocityScale } = target;
  const direction = new Float64Array(3);
  for (let i = begin; i < end; i++) {
    const r = model.radiusOfMass(massFraction * random.openUniform());
    random.unitVector(direction);
    const length = r * lengthScale;
    x[i] = length * direction[0];
    y[i] = length * direction[1];
    z[i] = length * direction[2];
    const speed = model.drawSpeed(r, random) * velocityScale;
    random.unitVector(direction);
    vx[i] = speed * direction[0];
    vy[i] = speed * direction[1];
    vz[i] = speed * direction[2];
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
