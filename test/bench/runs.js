/**
 * Verdicts on the bank of real runs: a table of how often they are right, and when. Some minutes.
 * `node test/bench/runs.js [seeds] [parts,of,the,kinds’,names]`; SETTLEMARK_RUNS_SHOW=1 prints each verdict.
 */
import { crewOfOne } from '../../dist/parallel/crew.js';
import * as library from '../../dist/index.js';
import { KINDS, recordsOf } from './runBank.js';

const [seeds = '6', parts = ''] = process.argv.slice(2);
const crew = crewOfOne();
const AT_REST = ['settled', 'relaxing'];
const median = (values) => values.toSorted((a, b) => a - b)[values.length >> 1];
const mean = (values) => values.reduce((sum, value) => sum + value, 0) / values.length;

/** Deviations of the mean over seeds below this are rest: of the ratio, of ln r_v. */
const REST = [0.03, 0.06];

/** When the mean over the seeds of the ratio and of ln r_v comes to rest [time]. */
function truthOf(runs, from) {
  const curves = [
    ({ bound }) => bound.clausiusRatio,
    ({ bound, settings }) =>
      Math.log((settings.gravity.value * bound.mass ** 2) / (-2 * bound.potential)),
  ].map((of) => {
    const perRun = runs.map(({ records }) => {
      const values = records.map(of);
      const level = mean(values.slice(Math.floor((2 * values.length) / 3)));
      return values.map((value) => value - level);
    });
    return perRun[0].map((_, k) => mean(perRun.map((run) => run[k])));
  });
  const [{ records }] = runs;
  let last = from;
  for (const [c, curve] of curves.entries()) {
    const end = curve.slice(Math.floor((2 * curve.length) / 3));
    const limit = Math.max(REST[c], 3 * Math.sqrt(mean(end.map((value) => value * value))));
    last = Math.max(
      last,
      curve.findLastIndex((value) => Math.abs(value) > limit),
    );
  }
  return records[Math.min(last + 1, records.length - 1)].time;
}

const rows = [];
for (const [kind, how] of Object.entries(KINDS)) {
  if (!parts.split(',').some((part) => kind.includes(part))) continue;
  for (const count of how.counts) {
    const runs = [];
    const start = performance.now();
    for (let seed = 1; seed <= Number(seeds); seed++) {
      const { records, disturbed } = await recordsOf(library, kind, { count, seed }, crew);
      runs.push({ records, disturbed, verdict: library.verdictOf(records) });
    }
    const seconds = (performance.now() - start) / 1000;
    const names = runs.map(({ verdict }) => verdict.verdict);
    const share = (of) => `${names.filter(of).length}/${names.length}`;
    const rest = how.allowed.some((name) => AT_REST.includes(name));
    const truth = how.settles ? truthOf(runs, runs[0].disturbed[0] ?? 0) : null;
    const timed = runs.filter(({ verdict }) => verdict.settledAt !== null);
    const errors = timed.map(({ verdict }) =>
      truth === null ? NaN : (verdict.settledAt - truth) / verdict.crossingTime,
    );
    const told = runs.filter(({ verdict, records, disturbed }) => {
      const [at] = disturbed.map((k) => records[k].time);
      return verdict.states.some(
        ({ from, to, state }) =>
          AT_REST.includes(state) && to > 0.6 * at && from < 0.5 * at && to <= 1.1 * at,
      );
    });
    const tally = Object.entries(Object.groupBy?.(names, (name) => name) ?? tallied(names));
    rows.push({
      kind,
      count,
      allowed: how.allowed.join(', '),
      right: share((name) => how.allowed.includes(name)),
      falseRest: share((name) => AT_REST.includes(name) && !rest),
      falseUnrest: share((name) => !AT_REST.includes(name) && rest),
      settled:
        timed.length === 0
          ? ''
          : median(timed.map(({ verdict: v }) => v.settledAt / v.crossingTime)).toFixed(1),
      error:
        truth === null || timed.length === 0
          ? ''
          : `${median(errors).toFixed(1)} (${median(errors.map(Math.abs)).toFixed(1)})`,
      before: how.before ? `${told.length}/${runs.length}` : '',
    });
    console.log(
      `| ${Object.values(rows.at(-1)).join(' | ')} | ${tally.map(([name, all]) => `${all.length} ${name}`).join(', ')} (${seconds.toFixed(0)} s)`,
    );
    if (process.env.SETTLEMARK_RUNS_SHOW) {
      for (const { verdict: v } of runs) {
        const states = v.states
          .map(
            ({ from, to, state }) =>
              `${(from / v.crossingTime).toFixed(1)}–${(to / v.crossingTime).toFixed(1)} ${state}`,
          )
          .join(', ');
        console.log(
          `    ${v.verdict} [${v.ratio.set} ${v.ratio.kind} ${v.ratio.mean.toFixed(3)}] ${v.evidence.map(({ text }) => text).join('; ')} | ${states} | E ${v.audit.energyDrift?.toPrecision(2)}`,
        );
      }
    }
  }
}

function tallied(names) {
  const tally = {};
  for (const name of names) (tally[name] ??= []).push(name);
  return tally;
}
