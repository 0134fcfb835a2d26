/** The tables of the benchmark. */
import { printTable } from './tools.js';

const fixed = (digits) => (v) => v?.toFixed(digits);
const ns = fixed(0);
const small = (v) => v?.toExponential(1);
const times = (v) => (v === undefined ? undefined : `${v.toPrecision(3)} ×`);
const percent = (v) => `${(100 * v).toFixed(1)} %`;
const NAMES = [
  ['model', (r) => r.model],
  ['bodies', (r) => r.count.toExponential(0)],
];

export function report({ machine, threads, rows, series }) {
  console.log(`\n${machine}\n`);
  if (rows.length > 0) {
    costs(rows, threads);
    cold(rows);
    againstPlummer(rows);
    againstOthers(rows, threads);
    growth(rows);
  }
  if (series.length > 0) many(series);
}

function costs(rows, threads) {
  const perBody = (name) => (r) => ns((r[name] * threads * 1e9) / r.count);
  console.log('Warm pages, as in a series. ns a body are wall clock × threads.');
  console.log(
    '× with accelerations: of the sums, and of the record with what the sums then add.\n',
  );
  printTable(rows, [
    ...NAMES,
    ['read raw GB/s', (r) => r.rawGBs.toFixed(2)],
    ['Arrow GB/s', (r) => r.arrowGBs.toFixed(2)],
    ['tree', perBody('buildSeconds')],
    ['tree + forces', perBody('forcesSeconds')],
    ['with accelerations', perBody('accelerationsSeconds')],
    ['error sample', perBody('errorSeconds')],
    ['core record', perBody('wholeSeconds')],
    ['s', (r) => r.wholeSeconds.toPrecision(3)],
    ['error sample of record', (r) => percent(r.errorShare)],
    ['× with accelerations: sums', (r) => times(r.accelerationsSeconds / r.forcesSeconds)],
    ['record', (r) => times(r.wholeWithAccelerationsSeconds / r.wholeSeconds)],
    ['faster than one thread', (r) => times(r.overOneThread)],
  ]);
}

function cold(rows) {
  const s = (name) => (r) => r.cold.seconds[name].toFixed(3);
  console.log(
    'Cold, in a fresh process, the file in the page cache. Seconds; bytes a body are beyond 5000 bodies.\n',
  );
  printTable(rows, [
    ...NAMES,
    ...['read', 'tree', 'forces', 'error', 'dynamics', 'total', 'process'].map((name) => [
      name,
      s(name),
    ]),
    [
      'core record over warm',
      ({ cold: { seconds }, wholeSeconds }) => times((seconds.total - seconds.read) / wholeSeconds),
    ],
    // Of fewer bodies compiled code and workers' heaps take more than the arrays.
    ['bytes', (r) => (r.count >= 1e6 ? ns(r.cold.peakBytes / r.count) : undefined)],
  ]);
}

function againstPlummer(rows) {
  console.log(
    'Costs over those of the plain Plummer sphere of as many bodies, measured right after.\n',
  );
  printTable(rows, [
    ...NAMES,
    ['order', (r) => String(r.order ?? 'direct')],
    ['error of U', (r) => small(r.errorOfU)],
    ['tree + forces', (r) => times(r.overPlain.forces)],
    ['core record', (r) => times(r.overPlain.whole)],
  ]);
}

function againstOthers(rows, threads) {
  const compared = rows.filter((r) => r.others);
  if (compared.length === 0) return;
  console.log(
    [
      'Times faster (tree + forces, warm) than others on the same bodies; errors are rms, of φ over its',
      'mean, of a over |a|. The classical walk has quadrupoles and runs on the same tree and threads.',
      `Direct sums and the packages run on one thread, and their time, building too, is divided by ${threads}.`,
      'The packages have monopoles; d3-octree gives φ, ngraph.quadtreebh3d a, which is compared with',
      'sums with accelerations. All with θ = 0.7; beyond 1e5 bodies the packages sum a sample.\n',
    ].join('\n'),
  );
  const peer = (name) => (r) => r.others.peers?.[name];
  const [d3, ngraph] = [peer('d3-octree'), peer('ngraph.quadtreebh3d')];
  const faster = (found, seconds) =>
    found && times((found.buildSeconds + found.sumSeconds) / threads / seconds);
  printTable(compared, [
    ...NAMES,
    ['φ', (r) => small(r.others.rms)],
    ['a', (r) => small(r.errorOfA)],
    ['classical: φ', (r) => small(r.others.classical.rms)],
    ['faster', (r) => times(r.others.classical.seconds / r.forcesSeconds)],
    ['direct: faster', (r) => times(r.others.directSeconds / r.forcesSeconds)],
    ['d3-octree: φ', (r) => small(d3(r)?.rms)],
    ['faster', (r) => faster(d3(r), r.forcesSeconds)],
    ['ngraph: a', (r) => small(ngraph(r)?.rms)],
    ['faster', (r) => faster(ngraph(r), r.accelerationsSeconds)],
  ]);
}

/** How the cost of a body changes from the least number of bodies at or above 1e5. */
function growth(rows) {
  for (const model of new Set(rows.map((r) => r.model))) {
    const sizes = rows
      .filter((r) => r.model === model && r.count >= 1e5)
      .toSorted((a, b) => a.count - b.count);
    const [first] = sizes;
    for (const row of sizes.slice(1)) {
      const ratio = (name) => times(row[name] / row.count / (first[name] / first.count));
      console.log(
        `${model}, cost a body from ${first.count.toExponential(0)} to ${row.count.toExponential(0)}: ` +
          `tree + forces ${ratio('forcesSeconds')}, core record ${ratio('wholeSeconds')}`,
      );
    }
  }
  console.log('');
}

function many(series) {
  console.log('Many small snapshots in one process: ms a snapshot of wall clock, MB at the peak.');
  console.log(
    'Physics and reading are what records state, over threads; growth is past a tenth.\n',
  );
  const ms = (name) => (r) => r[name].toFixed(2);
  const mb = (name) => (r) => (r[name] / 1e6).toFixed(0);
  printTable(series, [
    ['files', (r) => String(r.files)],
    ['bodies', (r) => r.count.toExponential(0)],
    ['ms', ms('ms')],
    ['physics', ms('physicsMs')],
    ['reading', ms('readingMs')],
    ['beyond', ms('beyondMs')],
    ['start of the process', ms('startMs')],
    ['peak MB', mb('peakBytes')],
    ['growth', mb('growthBytes')],
  ]);
}
