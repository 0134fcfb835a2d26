/**
 * Benchmarks: `npm run bench [-- --counts 1e4,1e5 --models plummer,disc --threads 2 --json]`.
 *
 *   --rows plummer:1e7     rows besides every model at every count
 *   --compare plummer      models that are also summed by other means (none: `--compare ''`)
 *   --series 1e3,1e4       sizes of many small snapshots (none: `--series ''`), --files 1000 of each
 *
 * Times are the least of some repetitions after a warm-up and mean little on another machine; the
 * ratios, taken in one run on the same bodies and threads, are what counts. Bodies are made from a
 * fixed seed, so every run sums the same.
 */
import { mkdtemp, rm } from 'node:fs/promises';
import { cpus, tmpdir } from 'node:os';
import { join } from 'node:path';
import { parseArgs } from 'node:util';
import { reusingMemory } from '../../dist/numerics/reuse.js';
import { startCrew } from '../../dist/parallel/crew.js';
import { writeArrow } from '../../dist/snapshot/arrow/write.js';
import { writeRaw } from '../../dist/snapshot/raw/write.js';
import { coldCosts, coreCosts, readingRates, warmCosts } from './engine.js';
import { MODELS, NONE, softeningOf } from './models.js';
import { classicalWalk } from './references.js';
import { report } from './report.js';
import { seriesCosts } from './series.js';
import { exactSums, inFreshProcess, rms } from './tools.js';

const { values: asked } = parseArgs({
  options: {
    counts: { type: 'string', default: '1e4,1e5,1e6' },
    models: { type: 'string', default: Object.keys(MODELS).join(',') },
    rows: { type: 'string', default: '' },
    compare: { type: 'string', default: 'plummer,hernquist' },
    series: { type: 'string', default: '1e3,1e4' },
    files: { type: 'string', default: '1000' },
    threads: { type: 'string', default: '2' },
    json: { type: 'boolean', default: false },
  },
});
const list = (text) => text.split(',').filter((word) => word !== '');
const threads = whole(asked.threads);
const models = list(asked.models).map(known);
const compared = list(asked.compare).map(known);
const wanted = [
  ...models.flatMap((model) => list(asked.counts).map((count) => ({ model, count: whole(count) }))),
  ...list(asked.rows).map((text) => {
    const [model, count] = text.split(':');
    return { model: known(model), count: whole(count) };
  }),
];
const EXACT_SAMPLE = 200;
/** The packages keep an object for every body and cell: more do not fit into their heap. */
const PEERS_UP_TO = 1e6;

const folder = await mkdtemp(join(tmpdir(), 'settlemark-bench-'));
const crews = { all: startCrew(threads), one: startCrew(1) };
const rows = [];
const series = [];
try {
  for (const { model, count } of wanted) {
    process.stderr.write(`${model} ${count} …\n`);
    rows.push(await benchmark(model, count));
    await reusingMemory(async () => {}); // drops what was kept for the next snapshot
  }
  for (const count of list(asked.series).map(whole)) {
    process.stderr.write(`${asked.files} files of ${count} …\n`);
    series.push(await seriesCosts(folder, whole(asked.files), count, threads));
  }
} finally {
  await crews.all.close();
  await crews.one.close();
  await rm(folder, { recursive: true });
}
const machine = `${cpus()[0].model}, ${threads} threads, Node ${process.version}`;
if (asked.json) console.log(JSON.stringify({ machine, threads, rows, series }, null, 2));
else report({ machine, threads, rows, series });

async function benchmark(model, count) {
  const particles = MODELS[model].make(count);
  const softening = softeningOf(model);
  const raw = join(folder, 'bodies.bin');
  const arrow = join(folder, 'bodies.arrow');
  await writeRaw(raw, particles);
  await writeArrow(arrow, particles);
  const [rawGBs, arrowGBs] = await readingRates(count, [raw, arrow]);
  const exact = compared.includes(model) ? exactSums(particles, EXACT_SAMPLE) : [];
  const { picked, ...warm } = await warmCosts(
    particles,
    softening,
    crews,
    exact.map(({ body }) => body),
  );
  // The plain sphere right after: a machine that others use too changes from minute to minute.
  const plain =
    model === 'plummer' ? warm : await coreCosts(MODELS.plummer.make(count), NONE, crews.all);
  const overPlain = {
    forces: warm.forcesSeconds / plain.forcesSeconds,
    whole: warm.wholeSeconds / plain.wholeSeconds,
  };
  const others = exact.length > 0 ? await byOthers(particles, exact, picked, raw) : null;
  const cold = coldCosts(raw, count, softening, threads);
  return { model, count, rawGBs, arrowGBs, ...warm, overPlain, others, cold };
}

async function byOthers(particles, exact, picked, file) {
  const { count } = particles;
  return {
    rms: rms(exact.map(({ phi }, k) => (-picked[k] - phi) / exact.mean)),
    classical: await classicalWalk(particles, exact, crews.all),
    directSeconds: (exact.seconds / exact.length) * (count / threads),
    peers: count <= PEERS_UP_TO ? inFreshProcess('peers.js', file) : null,
  };
}

function known(model) {
  if (Object.hasOwn(MODELS, model)) return model;
  throw new Error(`"${model}" is no model; there are ${Object.keys(MODELS).join(', ')}`);
}

function whole(text) {
  const value = Number(text);
  if (Number.isInteger(value) && value >= 1) return value;
  throw new Error(`"${text}" is not a whole number of at least 1`);
}
