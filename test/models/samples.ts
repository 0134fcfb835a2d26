/** What the tests of the samplers measure on drawn bodies, by plain loops. */
import type { Particles } from '../../src/snapshot/particles.ts';

export const radius = (p: Particles, i: number): number => Math.hypot(p.x[i], p.y[i], p.z[i]);

export const speedSquared = (p: Particles, i: number): number =>
  p.vx[i] ** 2 + p.vy[i] ** 2 + p.vz[i] ** 2;

/** Greatest distance between the sample's distribution function and `cdf`, times √n (Kolmogorov). */
export function kolmogorov(sample: Float64Array, cdf: (value: number) => number): number {
  const sorted = sample.slice().sort();
  let greatest = 0;
  for (let i = 0; i < sorted.length; i++) {
    const expected = cdf(sorted[i]);
    greatest = Math.max(greatest, (i + 1) / sorted.length - expected, expected - i / sorted.length);
  }
  return greatest * Math.sqrt(sorted.length);
}

/**
 * Limit of {@link kolmogorov} at the 0.1 % point of its limiting distribution. Source: tables of the
 * Kolmogorov-Smirnov test, 1.949.
 */
export const KOLMOGOROV_LIMIT = 1.949;

/** T about the mean velocity, and the pair sum U with G = 1, each pair once. */
export function energies(p: Particles): { kinetic: number; potential: number } {
  let mass = 0;
  let kinetic = 0;
  let potential = 0;
  const momentum = [0, 0, 0];
  for (let i = 0; i < p.count; i++) {
    mass += p.mass[i];
    kinetic += 0.5 * p.mass[i] * speedSquared(p, i);
    momentum[0] += p.mass[i] * p.vx[i];
    momentum[1] += p.mass[i] * p.vy[i];
    momentum[2] += p.mass[i] * p.vz[i];
    for (let j = 0; j < i; j++) {
      const dx = p.x[i] - p.x[j];
      const dy = p.y[i] - p.y[j];
      const dz = p.z[i] - p.z[j];
      potential -= (p.mass[i] * p.mass[j]) / Math.sqrt(dx * dx + dy * dy + dz * dz);
    }
  }
  kinetic -= (momentum[0] ** 2 + momentum[1] ** 2 + momentum[2] ** 2) / (2 * mass);
  return { kinetic, potential };
}

/** Σ m² / (Σ m)², the inverse of the effective number of bodies. */
export function concentration(p: Particles): number {
  let sum = 0;
  let squares = 0;
  for (let i = 0; i < p.count; i++) {
    sum += p.mass[i];
    squares += p.mass[i] ** 2;
  }
  return squares / (sum * sum);
}
