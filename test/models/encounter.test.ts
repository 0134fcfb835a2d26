import { describe, expect, it } from 'vitest';
import { startOfEncounter } from '../../src/models/encounter.ts';
import { makeModel } from '../../src/models/make.ts';
import type { EncounterOptions } from '../../src/models/options.ts';
import { within } from './within.ts';

/**
 * Least distance of two points from this start, by small steps of the equation of motion (leapfrog in
 * scaled time).
 */
function leastDistance(options: EncounterOptions, gm: number): number {
  const { separation, approach, sideways } = startOfEncounter(options, gm);
  let [x, y, vx, vy] = [separation, 0, -approach, sideways];
  let least = separation;
  for (let step = 0; step < 4e6; step++) {
    const dt = 2e-4 * Math.sqrt((x * x + y * y) ** 1.5 / gm);
    x += (vx * dt) / 2;
    y += (vy * dt) / 2;
    const r = Math.hypot(x, y);
    vx -= ((gm * x) / r ** 3) * dt;
    vy -= ((gm * y) / r ** 3) * dt;
    x += (vx * dt) / 2;
    y += (vy * dt) / 2;
    const now = Math.hypot(x, y);
    if (now > least && vx * x + vy * y > 0) break;
    least = Math.min(least, now);
  }
  return least;
}

describe('the start of an encounter', () => {
  const gm = 3;
  it.each([
    [{ separation: 10, pericentre: 1 }],
    [{ separation: 10, pericentre: 1, relativeVelocity: 'parabolic' as const }],
    [{ separation: 10, pericentre: 2, relativeVelocity: 3 }],
    [{ separation: 10, pericentre: 0.5, relativeVelocity: 0.4 }],
    [{ separation: 4, pericentre: 4 }],
  ])('%j passes at its pericentre', (options) => {
    within(leastDistance(options, gm), options.pericentre, 1e-5); // steps of 2e-4 of the dynamical time
  });

  it('has the speed asked for, or the parabolic one √(2GM/d)', () => {
    const speed = (options: EncounterOptions) => {
      const { approach, sideways } = startOfEncounter(options, gm);
      return Math.hypot(approach, sideways);
    };
    within(speed({ separation: 10, pericentre: 1 }), Math.sqrt(0.6), 1e-14);
    within(speed({ separation: 10 }), Math.sqrt(0.6), 1e-14);
    within(speed({ separation: 10, pericentre: 2, relativeVelocity: 3 }), 3, 1e-14);
  });

  it('passes the straight line at the impact parameter', () => {
    const { approach, sideways } = startOfEncounter(
      { separation: 10, impactParameter: 6, relativeVelocity: 5 },
      gm,
    );
    within(sideways, 3, 1e-14); // 6/10 of 5
    within(approach, 4, 1e-14);
    expect(startOfEncounter({ separation: 10 }, gm).sideways).toBe(0);
    expect(startOfEncounter({ separation: 2, relativeVelocity: 0 }, gm)).toEqual({
      separation: 2,
      approach: 0,
      sideways: 0,
    });
  });

  it.each([
    [{ separation: 0 }, 'usage.modelOption', '--separation'],
    [{ separation: 1, pericentre: -1 }, 'usage.modelOption', '--pericentre'],
    [{ separation: 1, impactParameter: NaN }, 'usage.modelOption', '--impact-parameter'],
    [{ separation: 1, impactParameter: 2 }, 'usage.modelOption', 'at most the separation, 1'],
    [{ separation: 1, relativeVelocity: -1 }, 'usage.modelOption', '--relative-velocity'],
    [{ separation: 1, relativeVelocity: 'hyperbolic' }, 'usage.modelOption', 'parabolic'],
    [{ separation: 1, pericentre: 0.1, impactParameter: 0 }, 'usage.encounter', 'Both'],
    [{ separation: 1, pericentre: 2 }, 'usage.encounter', 'at most 1'],
    // E < 0: p (2GM/d − v²) ≤ v² d, here p ≤ 1/5.
    [{ separation: 1, pericentre: 0.21, relativeVelocity: 1 }, 'usage.encounter', 'at most 0.2'],
    // At d = p this would be the apocentre.
    [{ separation: 1, pericentre: 1, relativeVelocity: 1 }, 'usage.encounter', 'at most 0.2'],
    [{ pericentre: 1 }, 'usage.modelOption', '--separation'],
  ])('%j is refused', (options, code, part) => {
    expect(() => startOfEncounter(options as EncounterOptions, gm)).toThrow(
      expect.objectContaining({
        code,
        message: expect.stringContaining(part) as string,
        remedy: expect.stringMatching(/./) as string,
      }),
    );
  });
});

describe('two spheres', () => {
  const first = { model: 'plummer', count: 300, mass: 2 } as const;
  const companion = { model: 'hernquist', count: 100, mass: 1, scaleRadius: 0.5 } as const;
  const encounter = { separation: 20, pericentre: 1 } as const;
  const both = makeModel({ ...first, seed: 3, companion, encounter });

  it('are the spheres, set on their orbit about the common centre of mass', () => {
    const alone = makeModel({ ...first, seed: 3 });
    const { approach, sideways } = startOfEncounter(encounter, 3);
    for (let i = 0; i < 300; i++) {
      expect(both.x[i] - alone.x[i]).toBeCloseTo(-20 / 3, 12);
      expect(both.y[i]).toBe(alone.y[i]);
      expect(both.vx[i] - alone.vx[i]).toBeCloseTo(approach / 3, 12);
      expect(both.vy[i] - alone.vy[i]).toBeCloseTo(-sideways / 3, 12);
    }
    const median = (column: ArrayLike<number>) =>
      Array.from(column)
        .slice(300)
        .sort((a, b) => a - b)[50];
    // The companion has a half-mass radius of 1.2: its median x within 0.5.
    expect(Math.abs(median(both.x) - 40 / 3)).toBeLessThan(0.5);
    expect(Math.abs(median(both.vx) + (2 * approach) / 3)).toBeLessThan(0.3);
  });

  it('are told apart by their component', () => {
    expect(both.componentNames).toEqual(['first', 'companion']);
    expect(Array.from(both.columns.component ?? [])).toEqual([
      ...Array<number>(300).fill(0),
      ...Array<number>(100).fill(1),
    ]);
    const second = { model: 'hernquist', count: 5 } as const;
    const galaxies = makeModel({
      ...{ ...first, model: 'hernquist', name: 'disc', second, seed: 1, encounter },
      companion: { ...companion, second },
    });
    expect(galaxies.componentNames).toEqual(['disc', 'second', 'companion', 'companion second']);
  });

  it('have bodies of their own, though they be alike', () => {
    const twins = makeModel({ ...first, seed: 3, companion: first, encounter });
    expect(twins.y.slice(300)).not.toEqual(twins.y.slice(0, 300));
  });
});
