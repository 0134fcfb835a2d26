/**
 * Benchmarks: `npm run bench [-- --counts 1e4,1e5 --models plummer,hernquist --threads 2 --json]`.
 *
 * Times are the least of some repetitions after a warm-up and mean little on another machine; the
 * ratios, taken in one run on the same bodies and threads, are what counts. Bodies are made from a
 * fixed seed, so every run sums the same.
 */
import { execFileSync } from 'node:child_process';
import { mkdtemp, rm } from 'node:fs/promises';
import { cpus, tmpdir } from 'node:os';
import { join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { parseArgs } from 'node:util';
import { measureParticles } from '../../dist/dynamics/measure.js';
import { makeModel } from '../../dist/models/make.js';
import { buildOctree } from '../../dist/octree/build.js';
import { gatherMultipoles, sumForces } from '../../dist/octree/forces.js';
import { sumsAtBodies } from '../../dist/octree/pointWalk.js';
import { startCrew } from '../../dist/parallel/crew.js';
import { readSnapshot } from '../../dist/snapshot/read.js';
import { writeArrow } from '../../dist/snapshot/arrow/write.js';
import { writeRaw } from '../../dist/snapshot/raw/write.js';
import { exactSums, least, printTable } from './tools.js';

const { values: asked } = parseArgs({
  options: {
    counts: { type: 'string', default: '1e4,1e5,1e6' },
    models: { type: 'string', default: 'plummer,hernquist' },
    threads: { type: 'string', default: '2' },
    json: { type: 'boolean', default: false },
  },
});
const counts = asked.counts.split(',').map(Number);
const models = asked.models.split(',');
const threads = Number(asked.threads);
const NONE = { kernel: 'none', length: 0 };
/** The classical walk that figures are held against: Barnes & Hut 1986 with quadrupoles. */
const CLASSICAL = { order: 2, openingAngle: 0.7, softening: NONE };
const EXACT_SAMPLE = 200;

const folder = await mkdtemp(join(tmpdir(), 'settlemark-bench-'));
const crew = startCrew(threads);
const one = startCrew(1);
const rows = [];
try {
  for (const model of models) {
    for (const count of counts) rows.push(await benchmark(model, count));
  }
} finally {
  await crew.close();
  await one.close();
  await rm(folder, { recursive: true });
}
if (asked.json) console.log(JSON.stringify({ machine: machine(), rows }, null, 2));
else report();

async function benchmark(model, count) {
  process.stderr.write(`${model} ${count} …\n`);
  const particles = makeModel({ model, count, seed: 1, masses: 'equal' });
  const raw = join(folder, 'bodies.bin');
  const arrow = join(folder, 'bodies.arrow');
  await writeRaw(raw, particles);
  await writeArrow(arrow, particles);
  const repeats = count >= 1e7 ? 1 : count >= 1e6 ? 3 : 5;
  const rawSeconds = await least(repeats, () => readSnapshot(raw, {}));
  const arrowSeconds = await least(repeats, () => readSnapshot(arrow, {}));
  const build = await least(repeats, () => buildOctree(particles, crew));
  const options = { gravity: 1, softening: NONE, errorWanted: 1e-5 };
  const force =
    (extra, workers = crew) =>
    () =>
      sumForces(particles, { ...options, ...extra }, workers);
  const forces = await least(repeats, force({}));
  const single = await least(1, force({}, one));
  const accelerations = await least(repeats, force({ accelerations: true }));
  const whole = await least(repeats, () => measureParticles(particles, {}, crew));

  const { result } = forces;
  const exact = exactSums(particles, EXACT_SAMPLE);
  const scale = 2 * Math.abs(result.potentialEnergy);
  const difference = (of) => rms(exact.map(({ body, phi }) => (of(body) - phi) / scale));
  const engineRms = difference((body) => -result.potential[body]);

  // The classical walk on the same bodies; beyond a million bodies on a part of them.
  const tree = build.result;
  const source = await gatherMultipoles(tree, CLASSICAL.order, NONE, crew);
  const part = Math.max(1, Math.ceil(count / 1e6));
  const places = Uint32Array.from({ length: Math.floor(count / part) }, (_, k) => k * part);
  const classical = await least(1, () => sumsAtBodies(source, places, CLASSICAL, crew));
  const placeOf = new Map(Array.from(places, (place, k) => [tree.bodies.input[place], k]));
  const sampled = exact.filter(({ body }) => placeOf.has(body));
  const classicalRms = rms(
    sampled.map(({ body, phi }) => (classical.result.sums[2 * placeOf.get(body)] - phi) / scale),
  );
  const directSeconds = (exact.seconds / EXACT_SAMPLE) * (count / threads);
  const inForces = forces.seconds - result.costs.seconds.error;
  return {
    model,
    count,
    rawGBs: (count * 56) / rawSeconds.seconds / 1e9,
    arrowGBs: (count * 56) / arrowSeconds.seconds / 1e9,
    buildNs: perBody(build.seconds, count),
    forcesNs: perBody(inForces, count),
    errorNs: perBody(result.costs.seconds.error, count),
    accelerationsNs: perBody(
      accelerations.seconds - accelerations.result.costs.seconds.error,
      count,
    ),
    wholeNs: perBody(whole.seconds, count),
    wholeSeconds: whole.seconds,
    errorOfU: (2.6 * result.potentialError) / Math.abs(result.potentialEnergy),
    rmsOfPhi: engineRms,
    classicalRms,
    overClassical: (classical.seconds * part) / inForces,
    overDirect: directSeconds / inForces,
    overOneThread: (single.seconds - single.result.costs.seconds.error) / inForces,
    peakBytes: peakMemory(raw) / count,
  };
}

/** Peak resident memory of a process that measures the file, less that of one that measures 1,000 bodies. */
function peakMemory(file) {
  const script = fileURLToPath(new URL('./peak.js', import.meta.url));
  const peak = (argument) =>
    Number(execFileSync(process.execPath, [script, argument, String(threads)]));
  return peak(file) - peak('few');
}

/** Nanoseconds of wall clock times threads, a body. */
function perBody(seconds, count) {
  return (seconds * threads * 1e9) / count;
}

function rms(values) {
  return Math.sqrt(values.reduce((sum, v) => sum + v * v, 0) / values.length);
}

function machine() {
  return `${cpus()[0].model}, ${threads} threads, Node ${process.version}`;
}

function report() {
  console.log(`\n${machine()}\nns a body are wall clock × threads; errors are relative\n`);
  const ns = (v) => v.toFixed(0);
  const small = (v) => v.toExponential(1);
  const times = (v) => `${v.toPrecision(3)} ×`;
  printTable(rows, [
    ['model', (r) => r.model],
    ['bodies', (r) => r.count.toExponential(0)],
    ['read raw GB/s', (r) => r.rawGBs.toFixed(2)],
    ['read Arrow GB/s', (r) => r.arrowGBs.toFixed(2)],
    ['tree', (r) => ns(r.buildNs)],
    ['tree + forces', (r) => ns(r.forcesNs)],
    ['with accelerations', (r) => ns(r.accelerationsNs)],
    ['error sample', (r) => ns(r.errorNs)],
    ['whole record', (r) => ns(r.wholeNs)],
    ['whole, s', (r) => r.wholeSeconds.toFixed(2)],
    ['bytes', (r) => ns(r.peakBytes)],
  ]);
  printTable(rows, [
    ['model', (r) => r.model],
    ['bodies', (r) => r.count.toExponential(0)],
    ['error of U', (r) => small(r.errorOfU)],
    ['rms of φ', (r) => small(r.rmsOfPhi)],
    ['classical: rms', (r) => small(r.classicalRms)],
    ['faster than classical', (r) => times(r.overClassical)],
    ['than direct', (r) => times(r.overDirect)],
    ['than one thread', (r) => times(r.overOneThread)],
  ]);
  const cost = (model, count) => rows.find((r) => r.model === model && r.count === count)?.forcesNs;
  for (const model of models) {
    const [few, many] = [cost(model, 1e5), cost(model, 1e6)];
    if (few && many) console.log(`${model}: cost a body from 1e5 to 1e6: ${times(many / few)}`);
  }
}
