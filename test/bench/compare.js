/**
 * How often does `compare` call correct runs different, and does it see what it says it would?
 * `npm run build && nice -n 19 node test/bench/compare.js [--draws 300] [--seeds 40]`: a bank of small
 * runs is made, comparisons are drawn from it. The table in docs/compare.md is this one.
 */
import { parseArgs } from 'node:util';
import { compareRuns } from '../../dist/gate/compare.js';
import { Random } from '../../dist/numerics/random.js';
import { makeBank } from './compare-bank.js';
import { printTable } from './tools.js';

const { values: asked } = parseArgs({
  options: { draws: { type: 'string', default: '300' }, seeds: { type: 'string', default: '40' } },
});
const draws = Number(asked.draws);

/** Candidates, references, and whether they start from the same bodies. */
const KINDS = [
  ['10 against 10', 10, 10, false],
  ['1 against 19', 1, 19, false],
  ['8 pairs', 8, 8, true],
  ['1 against 1', 1, 1, false],
  ['1 against 5', 1, 5, false],
  ['1 against 1, same bodies', 1, 1, true],
];

function draw(bank, random, a, b, paired) {
  const order = bank.map((_, k) => k);
  for (let k = order.length - 1; k > 0; k--) {
    const other = Math.floor(random.uniform() * (k + 1));
    [order[k], order[other]] = [order[other], order[k]];
  }
  // Which of the two time steps makes no difference to a correct run, so it is drawn as well.
  const flip = () => (random.uniform() < 0.5 ? 0 : 1);
  if (paired) {
    const some = order.slice(0, a).map((k) => [bank[k], flip()]);
    return [some.map(([twins, t]) => twins[t]), some.map(([twins, t]) => twins[1 - t])];
  }
  const runs = order.slice(0, a + b).map((k) => bank[k][flip()]);
  return [runs.slice(0, a), runs.slice(a)];
}

/** A run that is off by so much in one quantity, from the second snapshot on: it starts as it did. */
function shifted(run, quantity, by) {
  const column = run.values[quantity].map((value, k) => (k === 0 ? value : value + by));
  return { ...run, values: { ...run.values, [quantity]: column } };
}

const rates = [];
const power = [];
let comparisons = 0;
let alarms = 0;
for (const count of [64, 128, 256]) {
  const bank = await makeBank({ count, seeds: Number(asked.seeds) });
  const random = new Random(count);
  for (const [kind, a, b, paired] of KINDS) {
    let different = 0;
    const detectable = new Map();
    const seen = new Map();
    const enough = Math.max(20, draws / 5);
    for (let k = 0; k < draws; k++) {
      const [candidates, references] = draw(bank, random, a, b, paired);
      const found = compareRuns(candidates, references);
      if (found.verdict === 'different') different++;
      for (const name of ['ratio', 'lagrangian[0.1]', 'lagrangian[0.5]']) {
        const size = found.quantities.find(({ quantity }) => quantity === name).detectable;
        detectable.set(name, [...(detectable.get(name) ?? []), size]);
        if (k >= enough) continue;
        const moved = candidates.map((run) => shifted(run, name, size));
        const { verdict } = compareRuns(moved, references);
        seen.set(name, (seen.get(name) ?? 0) + (verdict === 'different' ? 1 : 0));
      }
    }
    comparisons += draws;
    alarms += different;
    rates.push([count, kind, draws, `${((100 * different) / draws).toFixed(1)} %`]);
    const cell = (name) => {
      const sorted = detectable.get(name).sort((x, y) => x - y);
      return `${sorted[sorted.length >> 1].toFixed(3)} (${((100 * seen.get(name)) / enough).toFixed(0)} %)`;
    };
    power.push([count, kind, cell('ratio'), cell('lagrangian[0.1]'), cell('lagrangian[0.5]')]);
  }
}
const columns = (heads) => heads.map((head, k) => [head, (row) => String(row[k])]);
printTable(rates, columns(['N', 'runs', 'comparisons', 'called different']));
console.log(`\nall: ${alarms} of ${comparisons}, ${((100 * alarms) / comparisons).toFixed(2)} %\n`);
printTable(power, columns(['N', 'runs', 'ratio', 'ln r_10', 'ln r_h']));
