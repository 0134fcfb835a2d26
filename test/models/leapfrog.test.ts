/** The integrator against Kepler's laws, conserved quantities and its own reversal. */
import { describe, expect, it } from 'vitest';
import { makeModel } from '../../src/models/make.ts';
import { leapfrog, type LeapfrogOptions } from '../../src/models/leapfrog.ts';
import { NO_SOFTENING } from '../../src/octree/softening.ts';
import { sumForces } from '../../src/octree/forces.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import type { Particles } from '../../src/snapshot/particles.ts';

const crew = crewOfOne();

async function run(start: Particles, options: Partial<LeapfrogOptions>): Promise<Particles[]> {
  const list: Particles[] = [];
  const rest = { gravity: 1, softening: NO_SOFTENING, timeStep: 0.01, every: 1, snapshots: 2 };
  for await (const particles of leapfrog(start, { ...rest, ...options }, crew))
    list.push(particles);
  return list;
}

/** Two bodies at apocentre of an orbit with a = 1, G (m1 + m2) = 1, so its period is 2π (Kepler's third law). */
function pair(eccentricity: number): Particles {
  const two = makeModel({ model: 'plummer', count: 2, seed: 1 });
  const r = 1 + eccentricity;
  const v = Math.sqrt((1 - eccentricity) / r); // vis-viva at apocentre
  const masses = [0.75, 0.25];
  masses.forEach((m, i) => {
    const side = i === 0 ? -(1 - m) : 1 - m;
    two.mass[i] = m;
    [two.x[i], two.y[i], two.z[i]] = [side * r, 0, 0];
    [two.vx[i], two.vy[i], two.vz[i]] = [0, side * v, 0];
  });
  return two;
}

describe('leapfrog', () => {
  it('brings two bodies back after a period, at the second order of the step', async () => {
    const start = pair(0.3);
    const miss = async (timeStep: number) => {
      const [, end] = await run(start, { timeStep, every: 2 * Math.PI });
      return Math.hypot(end.x[1] - start.x[1], end.y[1] - start.y[1]);
    };
    const [coarse, fine] = [await miss(0.02), await miss(0.01)];
    expect(fine).toBeLessThan(2e-3);
    // Source: second order, Binney & Tremaine 2008, section 3.4.1.
    expect(coarse / fine).toBeGreaterThan(3.8);
    expect(coarse / fine).toBeLessThan(4.2);
  });

  it('keeps momentum to rounding and energy to the order of the step, and runs back', async () => {
    const start = makeModel({ model: 'plummer', count: 200, seed: 2 });
    const softening = { kernel: 'plummer', length: 0.1 } as const;
    const [, end] = await run(start, { softening, timeStep: 0.02, every: 2 });
    const momentum = (p: Particles) => {
      let sum = 0;
      for (let i = 0; i < p.count; i++) sum += p.mass[i] * p.vx[i];
      return sum;
    };
    expect(Math.abs(momentum(end) - momentum(start))).toBeLessThan(1e-15);
    const energy = async (p: Particles) => {
      const { potentialEnergy } = await sumForces(p, { gravity: 1, softening, errorWanted: 1e-5 });
      let kinetic = 0;
      for (let i = 0; i < p.count; i++) {
        kinetic += (p.mass[i] * (p.vx[i] ** 2 + p.vy[i] ** 2 + p.vz[i] ** 2)) / 2;
      }
      return kinetic + potentialEnergy;
    };
    const [before, after] = [await energy(start), await energy(end)];
    expect(Math.abs(after / before - 1)).toBeLessThan(2e-4);
    expect(after).not.toBe(before);
    for (const v of [end.vx, end.vy, end.vz]) v.forEach((value, i) => (v[i] = -value));
    const [, back] = await run(end, { softening, timeStep: 0.02, every: 2 });
    expect(back.time).toBe(4);
    back.x.forEach((value, i) => expect(Math.abs(value - start.x[i])).toBeLessThan(1e-10));
  });

  it('gives as many snapshots as asked, each its own', async () => {
    const start = pair(0);
    const list = await run(start, { every: 0.5, snapshots: 5 });
    expect(list.map((p) => p.time)).toEqual([0, 0.5, 1, 1.5, 2]);
    expect(list[0].x).toEqual(start.x);
    expect(new Set(list.map((p) => p.x[1])).size).toBe(5);
  });

  it.each([{ timeStep: 0 }, { every: -1 }, { snapshots: Number.NaN }])(
    'refuses %j',
    async (options) => {
      await expect(run(pair(0), options)).rejects.toThrow(/is (0|-1|NaN)/);
    },
  );
});
