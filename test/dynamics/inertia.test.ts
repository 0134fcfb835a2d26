/** d²I/dt² = 4T + 2W against moments of inertia followed in time, and its noise against many samples. */
import { describe, expect, it } from 'vitest';
import { makeModel } from '../../src/models/make.ts';
import type { Softening } from '../../src/octree/softening.ts';
import { columnsOf, plainField } from '../octree/samples.ts';
import { bodiesOf, cloud, measure, particlesOf, type Body } from './samples.ts';

/** One step of length h, velocity Verlet with a plain double loop. Source: textbook scheme. */
function step(bodies: readonly Body[], h: number, softening: Softening): Body[] {
  const pull = (list: readonly Body[]) =>
    plainField(columnsOf(list.map(([m, x, y, z]) => [m, x, y, z] as const)), softening);
  const before = pull(bodies);
  const moved = bodies.map(([m, x, y, z, u, v, w], i): Body => {
    const half = (h * h) / 2;
    return [
      m,
      x + h * u + half * before.ax[i],
      y + h * v + half * before.ay[i],
      z + h * w + half * before.az[i],
      u,
      v,
      w,
    ];
  });
  const after = pull(moved);
  return moved.map(([m, x, y, z, u, v, w], i): Body => [
    m,
    x,
    y,
    z,
    u + (h / 2) * (before.ax[i] + after.ax[i]),
    v + (h / 2) * (before.ay[i] + after.ay[i]),
    w + (h / 2) * (before.az[i] + after.az[i]),
  ]);
}

describe('against the moment of inertia a little earlier and later', () => {
  it.each<[string, Softening]>([
    ['unsoftened', { kernel: 'none', length: 0 }],
    ['Plummer softening', { kernel: 'plummer', length: 0.3 }],
    ['a spline', { kernel: 'spline', length: 0.3 }],
  ])('%s', async (_, softening) => {
    const bodies = cloud(40, 3);
    const options =
      softening.kernel === 'none'
        ? {}
        : { softening: softening.length, softeningKernel: softening.kernel };
    const inertiaOf = async (list: readonly Body[]) =>
      (await measure(particlesOf(list), options)).momentOfInertia;
    const h = 1e-3;
    const [before, now, after] = [
      await inertiaOf(step(bodies, -h, softening)),
      await inertiaOf(bodies),
      await inertiaOf(step(bodies, h, softening)),
    ];
    const record = await measure(particlesOf(bodies), { ...options, with: ['inertia'] });
    // Identity of Lagrange and Jacobi. The second difference errs by h²/12 times the fourth derivative,
    // which is of order 1e2 here, and by 1e-16 I/h² of rounding.
    const value = record.momentOfInertiaAcceleration ?? NaN;
    expect(Math.abs(value / ((after - 2 * now + before) / (h * h)) - 1)).toBeLessThan(1e-4);
    expect(record.momentOfInertiaAccelerationError).toBe(2 * record.whole.clausiusError);
  });
});

describe('in and out of equilibrium', () => {
  it('two bodies on a circle: 0', async () => {
    // Source: Kepler; m = 1/2 each at distance 1 move at 1/2 each.
    const record = await measure(
      particlesOf([
        [0.5, 0.5, 0, 0, 0, 0.5, 0],
        [0.5, -0.5, 0, 0, 0, -0.5, 0],
      ]),
      { with: ['inertia'] },
    );
    expect(Math.abs(record.momentOfInertiaAcceleration ?? NaN)).toBeLessThan(1e-15);
    expect(record.momentOfInertiaAccelerationNoise).toBeNull();
  });

  it('a cold start: −2|U|; half as warm as balance: −|U|', async () => {
    const particles = makeModel({ model: 'plummer', count: 3000, seed: 4 });
    const warm = await measure(particles);
    const { kinetic, potential } = warm.whole;
    for (const ratio of [0, 0.5]) {
      const bodies = bodiesOf(particles).map(([m, x, y, z, u, v, w]): Body => {
        const f = Math.sqrt((ratio * -potential) / (2 * kinetic));
        return [m, x, y, z, f * u, f * v, f * w];
      });
      const record = await measure(particlesOf(bodies), { with: ['inertia'] });
      const value = record.momentOfInertiaAcceleration ?? NaN;
      expect(Math.abs(value / (2 * (1 - ratio) * potential) - 1)).toBeLessThan(1e-12);
      expect(Math.abs(value)).toBeGreaterThan(
        20 * (record.momentOfInertiaAccelerationNoise ?? NaN),
      );
    }
  });

  it.each(['plummer', 'hernquist'] as const)('%s: 0 within its noise', async (model) => {
    const off: number[] = [];
    for (let seed = 1; seed <= 60; seed++) {
      const particles = makeModel({ model, count: 500, seed });
      const record = await measure(particles, { with: ['inertia'] });
      const noise = record.momentOfInertiaAccelerationNoise ?? NaN;
      off.push((record.momentOfInertiaAcceleration ?? NaN) / noise);
    }
    const mean = off.reduce((sum, x) => sum + x, 0) / off.length;
    const rms = Math.sqrt(off.reduce((sum, x) => sum + x * x, 0) / off.length);
    // 60 normal deviates: the mean to 0.13, the rms to 0.09 (1σ each).
    expect(Math.abs(mean)).toBeLessThan(0.4);
    expect(Math.abs(rms - 1)).toBeLessThan(0.3);
  });

  it('of a Plummer sphere the noise is that of the ratio', async () => {
    // 4T + 2W = 2|W| (Q − 1), so at Q = 1 the noise is 2|W| σ(Q); σ(Q) = 0.804/√N in closed form
    // (c² = 1024/(63π²) − 1) and |W| = 3π/32.
    const particles = makeModel({ model: 'plummer', count: 4000, seed: 8 });
    const record = await measure(particles, { with: ['inertia'] });
    const expected = ((2 * (3 * Math.PI)) / 32) * (0.8042830984 / Math.sqrt(4000));
    expect(Math.abs((record.momentOfInertiaAccelerationNoise ?? NaN) / expected - 1)).toBeLessThan(
      0.06,
    );
  });
});
