/** The sample that errors are measured on, and the trial of a level before it is walked. */
import { describe, expect, it } from 'vitest';
import { buildOctree } from '../../src/octree/build.ts';
import { drawByMass, someOf } from '../../src/octree/draw.ts';
import { leastError, makeReference } from '../../src/octree/errorSample.ts';
import { expansionsFor } from '../../src/octree/expansions.ts';
import { acceptanceOf, PROMISED_SIGMAS, sumForces } from '../../src/octree/forces.ts';
import { LEVELS } from '../../src/octree/levels.ts';
import { pairKernelsOf, pairSofteningOf } from '../../src/octree/pairs.ts';
import { sumTowards } from '../../src/octree/pathWalk.ts';
import { isOfEach, NO_SOFTENING } from '../../src/octree/softening.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { changed, modelColumns, natural, SOFTENINGS } from './samples.ts';

const crew = crewOfOne();

describe('bodies drawn by mass', () => {
  it('a body with three tenths of the mass is drawn in three tenths of the cases', async () => {
    const bodies = modelColumns('plummer', 5000, 1);
    const rest = bodies.mass.reduce((sum, m) => sum + m, 0) - bodies.mass[77];
    bodies.mass[77] = (3 / 7) * rest;
    const tree = await buildOctree(bodies, crew);
    const { places, of } = drawByMass(tree, 500);
    expect(of.length).toBe(500);
    expect(new Set(places).size).toBe(places.length);
    const heavy = places.findIndex((place) => tree.bodies.input[place] === 77);
    const times = of.filter((k) => k === heavy).length;
    // One in each equal share of the mass: only the two shares at its ends can go either way.
    expect(Math.abs(times - 150)).toBeLessThanOrEqual(2);
    const some = someOf({ places, of }, 50);
    expect(some.draws.of.length).toBe(50);
    some.chosen.forEach((k, at) =>
      expect(some.draws.places[some.draws.of[at]]).toBe(places[of[k]]),
    );
  });

  it('bodies without mass are never drawn', async () => {
    const bodies = changed(modelColumns('plummer', 4000, 2), (i, body) => {
      if (i % 2) body.mass = 0;
    });
    const tree = await buildOctree(bodies, crew);
    const { places, of } = drawByMass(tree, 300);
    expect(of.length).toBe(300);
    for (const place of places) expect(tree.bodies.mass[place]).toBeGreaterThan(0);
  });
});

describe('a level tried on few bodies', () => {
  const ofEach = Float64Array.from({ length: 12_000 }, (_, i) => [0.3, 0.001, 0][i % 3]);
  const softenings = [
    ...SOFTENINGS,
    // So long that a cell is seen as a whole even by bodies in it, if it may be.
    { kernel: 'plummer', length: 0.5 },
    { kernel: 'plummer', length: 0.3, lengths: ofEach },
    { kernel: 'spline', length: 0.3, lengths: ofEach },
  ] as const;
  it.each(softenings)('gives them what the walk of all gives: $kernel', async (softening) => {
    const level = LEVELS[3];
    const bodies = modelColumns('hernquist', 12_000, 3);
    const forces = await sumForces(bodies, natural(softening, { level }));
    if (!forces.tree) throw new Error('no tree');
    const { input, count } = forces.tree.tree.bodies;
    const tools = {
      expansions: expansionsFor(level.order, softening),
      pairs: pairKernelsOf(softening.kernel, false, isOfEach(softening)),
      softenedByEach: isOfEach(softening),
      pairSoftening: pairSofteningOf(softening.kernel, softening.length),
      acceptance: acceptanceOf(level, softening),
    };
    // Powers of lengths have both signs: their sums are rounded more than those of one sign.
    const rounding = isOfEach(softening) ? 5e-12 : 1e-12;
    for (let place = 0; place < count; place += 97) {
      const out = new Float64Array(5);
      sumTowards(forces.tree, place, tools, out);
      const i = input[place];
      expect(Math.abs(-out[0] / forces.potential[i] - 1)).toBeLessThan(rounding);
      const share = -out[0] + (softening.kernel === 'none' ? 0 : out[1]);
      expect(Math.abs(share / forces.clausiusShare[i] - 1)).toBeLessThan(rounding);
    }
  });

  const sets = {
    'Plummer sphere': modelColumns('plummer', 15_000, 4),
    'thin disc': changed(modelColumns('plummer', 15_000, 5), (_, body) => (body.z *= 0.01)),
  };
  it.each(Object.entries(sets))(
    'tells the error that the walk is going to have: %s',
    async (_, bodies) => {
      for (const level of LEVELS.slice(0, 6)) {
        const walked = await sumForces(bodies, natural(NO_SOFTENING, { level }));
        if (!walked.tree) throw new Error('no tree');
        const reference = await makeReference(walked.tree, level, NO_SOFTENING, 1e-5, null, crew);
        const acceptance = acceptanceOf(level, NO_SOFTENING);
        const least = await leastError(
          reference,
          walked.tree,
          level,
          NO_SOFTENING,
          acceptance,
          crew,
        );
        const measured = walked.potentialError / Math.abs(walked.potentialEnergy);
        // Half the bodies, and the offset taken at its smaller side. No source: within a factor of 2.
        expect(least).toBeLessThan(2 * measured);
        expect(least).toBeGreaterThan(measured / 2);
      }
    },
  );

  it('a disc finds its level without walking the ones before', async () => {
    const bodies = sets['thin disc'];
    const forces = await sumForces(bodies, natural(NO_SOFTENING, { errorWanted: 1e-5 }));
    const level = forces.level ?? LEVELS[0];
    expect(PROMISED_SIGMAS * forces.potentialError).toBeLessThan(
      1e-5 * Math.abs(forces.potentialEnergy),
    );
    expect(LEVELS.indexOf(level)).toBeGreaterThan(3);
    // As many interactions as the last level alone takes: those before were refused on trial.
    const alone = await sumForces(bodies, natural(NO_SOFTENING, { level }));
    expect(forces.costs.cellInteractions).toBe(alone.costs.cellInteractions);
    expect(forces.costs.pairInteractions).toBe(alone.costs.pairInteractions);
  });
});
