/**
 * A bank of small real runs whose state is known from how they were made: started, and where needed
 * disturbed, on purpose, and integrated by our own leapfrog. G = 1, mass 1, virial radius about 1, so that
 * a crossing time is about 2.83.
 */

const CROSSING = 2 * Math.SQRT2;
/** Scale radius that gives a Plummer sphere a virial radius of 1. */
const SCALE = (3 * Math.PI) / 16;
const AT_REST = ['settled', 'relaxing'];

const plummer = (count, virialRatio) => ({
  model: 'plummer',
  scaleRadius: SCALE,
  cut: 8 * SCALE,
  count,
  virialRatio,
});
const ball = (count, virialRatio) => ({ model: 'uniform', scaleRadius: 1.2, count, virialRatio });
const merger = (count) => ({
  ...plummer(count / 2, 1),
  mass: 0.5,
  companion: { ...plummer(count / 2, 1), virialRatio: undefined, mass: 0.5 },
  encounter: { separation: 4, pericentre: 0.3 },
});

/** All velocities and positions times a factor. */
function scaled(particles, { velocity = 1, length = 1, mass = 1 }) {
  const times = (column, factor) => column.map((value) => value * factor);
  const { vx, vy, vz, x, y, z } = particles;
  return {
    ...particles,
    mass: times(particles.mass, mass),
    ...{ x: times(x, length), y: times(y, length), z: times(z, length) },
    ...{ vx: times(vx, velocity), vy: times(vy, velocity), vz: times(vz, velocity) },
  };
}

/** A kick that keeps the energy: lengths go by `length`, and the velocities pay for it. */
async function stretched(particles, length, { library, crew }) {
  const far = scaled(particles, { length });
  const { whole: now } = await library.measureSnapshot(particles, {}, crew);
  const { whole: then } = await library.measureSnapshot(far, {}, crew);
  const kinetic = now.kinetic + now.potential - then.potential;
  return scaled(far, { velocity: Math.sqrt(kinetic / now.kinetic) });
}

/**
 * Kinds: how each starts, what is done to it, what may rightly be said of it and why. `span` and `every` in
 * crossing times. `settles`: it has a time of settling, had from the mean over the seeds.
 */
export const KINDS = {
  equilibrium: {
    start: (count) => plummer(count, 1),
    counts: [128, 256, 400],
    span: 20,
    allowed: AT_REST,
    why: 'few bodies relax meanwhile',
  },
  'cold collapse': {
    start: (count) => ball(count, 0.1),
    counts: [256, 400],
    span: 16,
    timeStep: 0.015,
    settles: true,
    allowed: AT_REST,
    why: 'the core relaxes meanwhile',
  },
  'mild collapse': {
    start: (count) => plummer(count, 0.5),
    counts: [256, 400],
    span: 20,
    settles: true,
    allowed: AT_REST,
    why: 'the core relaxes meanwhile',
  },
  'collapse under way': {
    start: (count) => ball(count, 0.02),
    counts: [256],
    span: 0.45,
    every: 0.015,
    timeStep: 0.01,
    allowed: ['collapsing', 'undecided'],
    why: 'shorter than any span that a verdict needs',
  },
  'expansion, bound': {
    start: (count) => plummer(count, 1.35),
    counts: [256, 400],
    span: 25,
    settles: true,
    allowed: AT_REST,
    why: 'grows, and comes to rest larger',
  },
  dispersing: {
    start: (count) => plummer(count, 2.6),
    counts: [256, 400],
    span: 12,
    allowed: ['dispersing'],
    why: '',
  },
  merger: {
    start: merger,
    counts: [256, 400],
    span: 25,
    settles: true,
    allowed: AT_REST,
    why: 'the remnant relaxes meanwhile',
  },
  'merger under way': {
    start: (count) => ({ ...merger(count), encounter: { separation: 8, pericentre: 0.3 } }),
    counts: [256],
    span: 4,
    every: 0.1,
    allowed: ['collapsing', 'drifting', 'undecided', 'oscillating'],
    why: 'all but at rest',
  },
  'breathing, damped': {
    start: (count, seed) => plummer(count, [0.7, 0.8, 1.2, 1.3][seed % 4]),
    counts: [256, 400],
    span: 20,
    allowed: AT_REST,
    why: 'mixes to rest within a few crossing times',
  },
  'breathing on': {
    // Softened beyond its size it is nearly harmonic: all bodies swing in one period, and nothing mixes.
    start: (count, seed) => ball(count, [0.5, 0.65, 1.4, 1.5][seed % 4]),
    counts: [256],
    softening: 5,
    timeStep: 0.3,
    span: 150,
    every: 1,
    allowed: ['oscillating'],
    why: '',
  },
  'binary-rich': {
    start: (count) => ({
      ...plummer(count, 1),
      binaries: { share: 0.5, semiMajorAxis: [0.02, 0.04] },
    }),
    counts: [128],
    softening: 0.01,
    timeStep: 0.0015,
    span: 9,
    every: 0.1,
    with: ['pairs'],
    allowed: AT_REST,
    why: 'pairs change nothing of that',
  },
  'too long a step': {
    start: (count) => plummer(count, 0.6),
    counts: [256],
    softening: 0.03,
    timeStep: 0.6,
    span: 15,
    allowed: ['broken'],
    why: '',
  },
  'cut short': {
    start: (count, seed) => plummer(count, [1, 0.6, 0.8, 1.3][seed % 4]),
    counts: [256],
    span: 3,
    every: 0.1,
    allowed: ['undecided', 'collapsing', 'expanding'],
    why: 'a motion under way may be named',
  },
  'losing mass': {
    start: (count) => plummer(count, 1),
    counts: [256, 400],
    span: 20,
    each: (particles, share) => scaled(particles, { mass: 1 - 0.4 * share }),
    allowed: ['drifting', 'expanding'],
    why: 'its growth is slow',
  },
  'drifting G': {
    start: (count) => plummer(count, 1),
    counts: [256, 400],
    span: 20,
    gravity: (share) => 1 + 0.5 * share,
    allowed: ['drifting', 'broken'],
    why: 'its energy goes with G',
  },
  relaxing: {
    start: (count) => plummer(count, 1),
    counts: [128],
    softening: 0.01,
    timeStep: 0.01,
    span: 40,
    every: 0.4,
    allowed: ['relaxing', 'broken'],
    why: 'close pairs break a constant step',
  },
  're-heated': {
    start: (count) => plummer(count, 1),
    counts: [256, 400],
    span: 20,
    kicks: [{ at: 0.6, kick: (particles) => scaled(particles, { velocity: 1.25 }) }],
    allowed: ['broken'],
    why: 'a kick brings energy; the states tell the rest before it',
    before: true,
  },
  'disturbed at the end': {
    start: (count) => plummer(count, 1),
    counts: [256, 400],
    span: 20,
    kicks: [{ at: 0.88, kick: (particles, tools) => stretched(particles, 1.4, tools) }],
    allowed: ['drifting', 'oscillating', 'undecided', 'collapsing'],
    why: 'energy is kept: all but at rest',
    before: true,
  },
  'disturbed and at rest again': {
    start: (count) => plummer(count, 1),
    counts: [256, 400],
    span: 30,
    kicks: [{ at: 0.4, kick: (particles, tools) => stretched(particles, 1.4, tools) }],
    settles: true,
    allowed: AT_REST,
    why: 'the states tell of the rest before',
    before: true,
  },
};

/** Snapshots of one run: `{ particles, disturbed }`, the places after which it was kicked. */
export async function runOf(library, kind, { count, seed }, crew) {
  const how = KINDS[kind];
  const { span, every = 0.2, softening: length = 0.05, timeStep = 0.03, kicks = [] } = how;
  const softening = { kernel: 'plummer', length };
  const made = await library.makeSnapshot(
    { ...how.start(count, seed), seed, softening: length, softeningKernel: 'plummer' },
    crew,
  );
  const snapshots = Math.round(span / every) + 1;
  const step = (how.every ?? 0.2) * CROSSING;
  const piecewise = how.each !== undefined || how.gravity !== undefined;
  const ends = piecewise
    ? Array.from({ length: snapshots - 1 }, (_, k) => k + 1)
    : [...kicks.map(({ at }) => Math.round(at * (snapshots - 1))), snapshots - 1];
  const disturbed = kicks.map(({ at }) => Math.round(at * (snapshots - 1)));
  const mass = made.mass[0];
  const given = [];
  let state = made;
  let begin = 0;
  for (const [piece, end] of ends.entries()) {
    const share = begin / (snapshots - 1);
    const gravity = how.gravity?.(share) ?? 1;
    const options = { gravity, softening, timeStep, every: step, snapshots: end - begin + 1 };
    if (how.each !== undefined) state = scaled(state, { mass: mass / state.mass[0] });
    if (how.each !== undefined) state = how.each(state, share);
    let k = begin;
    for await (const particles of library.leapfrog(state, options, crew)) {
      if (k > begin || begin === 0) given.push(particles);
      state = particles;
      k++;
    }
    if (piece < kicks.length) state = await kicks[piece].kick(state, { library, crew });
    begin = end;
  }
  return { snapshots: given, disturbed };
}

/** The records of a run. */
export async function recordsOf(library, kind, which, crew) {
  const { snapshots, disturbed } = await runOf(library, kind, which, crew);
  const extras = KINDS[kind].with;
  const options = extras === undefined ? {} : { with: extras };
  const records = [];
  for (const [k, particles] of snapshots.entries()) {
    const record = await library.measureSnapshot(particles, options, crew);
    records.push({ ...record, file: `${kind}-${k}` });
  }
  return { records, disturbed };
}
