/**
 * Does the measured error of U cover the true one? `npm run bench:accuracy [-- --seeds 7 --count 20000]`
 *
 * For each level of the engine, over models, softenings and seeds: the true error of U and W against
 * direct sums, and how often 2.6 σ of the measured error covers it.
 */
import { parseArgs } from 'node:util';
import { makeModel } from '../../dist/models/make.js';
import { sumForces } from '../../dist/octree/forces.js';
import { LEVELS } from '../../dist/octree/levels.js';
import { startCrew } from '../../dist/parallel/crew.js';
import { printTable } from './tools.js';

const { values: asked } = parseArgs({
  options: {
    count: { type: 'string', default: '20000' },
    seeds: { type: 'string', default: '7' },
    levels: { type: 'string', default: '6' },
    threads: { type: 'string', default: '2' },
  },
});
const count = Number(asked.count);
const levels = LEVELS.slice(0, Number(asked.levels));
const crew = startCrew(Number(asked.threads));
const SOFTENINGS = [
  { kernel: 'none', length: 0 },
  { kernel: 'plummer', length: 0.05 },
  { kernel: 'spline', length: 0.02 },
];
const SIGMAS = 2.6;

/** Two Plummer spheres far apart: no single centre. */
function clumps(seed) {
  const particles = makeModel({ model: 'plummer', count, seed, masses: 'salpeter' });
  for (let i = 0; i < count; i += 2) particles.x[i] += 30;
  return particles;
}
const SETS = {
  plummer: (seed) => makeModel({ model: 'plummer', count, seed, masses: 'equal' }),
  hernquist: (seed) => makeModel({ model: 'hernquist', count, seed, masses: 'equal' }),
  uniform: (seed) => makeModel({ model: 'uniform', count, seed, masses: 'salpeter' }),
  'two clumps': clumps,
};

const trials = levels.map(() => []);
for (const [name, make] of Object.entries(SETS)) {
  for (let seed = 1; seed <= Number(asked.seeds); seed++) {
    const particles = make(seed);
    for (const softening of SOFTENINGS) {
      const options = { gravity: 1, softening, errorWanted: 1e-5 };
      const exact = await sumForces(particles, { ...options, exact: true }, crew);
      for (const [k, level] of levels.entries()) {
        const start = performance.now();
        const tree = await sumForces(
          particles,
          { ...options, errorWanted: level.reaches, level },
          crew,
        );
        trials[k].push({
          seconds: (performance.now() - start) / 1000,
          potential: compared(tree.potentialEnergy, exact.potentialEnergy, tree.potentialError),
          clausius: compared(tree.clausius, exact.clausius, tree.clausiusError),
        });
      }
    }
  }
  process.stderr.write(`${name} done\n`);
}
await crew.close();

/** True error and promised bound, relative. */
function compared(value, exact, sigma) {
  return { error: Math.abs(value / exact - 1), bound: (SIGMAS * sigma) / Math.abs(exact) };
}

function median(values) {
  return values.toSorted((a, b) => a - b)[values.length >> 1];
}

const rows = levels.map((level, k) => ({ level, list: trials[k] }));
const share = (list, which) =>
  list.filter((trial) => trial[which].error <= trial[which].bound).length / list.length;
const small = (value) => value.toExponential(1);
const middle = (list, of) => small(median(list.map(of)));
console.log(`${count} bodies, ${trials.flat().length} trials\n`);
printTable(rows, [
  ['order', ({ level }) => String(level.order)],
  ['tolerance', ({ level }) => small(level.tolerance)],
  ['trials', ({ list }) => String(list.length)],
  ['error of U', ({ list }) => middle(list, (t) => t.potential.error)],
  ['2.6 σ', ({ list }) => middle(list, (t) => t.potential.bound)],
  ['covered', ({ list }) => `${(100 * share(list, 'potential')).toFixed(1)} %`],
  [
    'too wide',
    ({ list }) => median(list.map((t) => t.potential.bound / t.potential.error)).toFixed(1),
  ],
  ['error of W', ({ list }) => middle(list, (t) => t.clausius.error)],
  ['2.6 σ of W', ({ list }) => middle(list, (t) => t.clausius.bound)],
  ['W covered', ({ list }) => `${(100 * share(list, 'clausius')).toFixed(1)} %`],
  [
    'ns a body',
    ({ list }) =>
      ((median(list.map((t) => t.seconds)) * Number(asked.threads) * 1e9) / count).toFixed(0),
  ],
]);
