/** Small correct runs, each twice (time steps 0.04 and 0.035): the bank from which comparisons are drawn. */
import { makeModel, measureSnapshot, startCrew } from '../../dist/index.js';
import { comparedRun } from '../../dist/gate/compareRun.js';
import { leapfrog } from '../../dist/models/leapfrog.js';

const SOFTENING = { kernel: 'plummer', length: 0.1 };

/**
 * Plummer spheres (G = M = a = 1) over five crossing times.
 * @returns two runs a seed, in the short form of a comparison
 */
export async function makeBank({ count, seeds, firstSeed = 1, snapshots = 21, every = 1.6 }) {
  const crew = startCrew(1);
  const bank = [];
  try {
    for (let seed = firstSeed; seed < firstSeed + seeds; seed++) {
      const start = await makeModel({ model: 'plummer', count, seed });
      const twins = [];
      for (const timeStep of [0.04, 0.035]) {
        const records = [];
        const options = { gravity: 1, softening: SOFTENING, timeStep, every, snapshots };
        for await (const state of leapfrog(start, options, crew)) {
          const measured = { gravity: 1, softening: 0.1, softeningKernel: 'plummer' };
          records.push(await measureSnapshot(state, measured, crew));
        }
        twins.push(comparedRun(records, `seed ${seed}, step ${timeStep}`));
      }
      bank.push(twins);
    }
  } finally {
    await crew.close();
  }
  return bank;
}
