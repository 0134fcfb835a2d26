/** The third part of the demo: a small run of our own, from its fall to its rest. */
import {
  makeSnapshot,
  leapfrog,
  measureSnapshot,
  verdictOf,
  type Crew,
  type MeasureRecord,
  type Particles,
  type Verdict,
} from '../index.ts';
import { figure, short, wholeNumber } from './figure.ts';
import { wrap } from './layout.ts';
import { asSentence } from './remarks.ts';
import type { Paint } from './style.ts';

const STARS = 2000;
const SEED = 11;
const SNAPSHOTS = 60;
const EVERY = 0.2;
const TIME_STEP = 0.0125;
const START_RATIO = 0.2;
const SOFTENING = { kernel: 'plummer', length: 0.05 } as const;
/** Rows of the table: every third snapshot. */
const ROW = 3;
const BAR = 30;
/** The largest ratio that the bars have room for. */
const BAR_END = 2;
/** The end of the run that is spoken of as its rest: the last third. */
const REST = 2 / 3;

export const EMBER_SNAPSHOTS = SNAPSHOTS;

/** The snapshots of the run, one after the other. */
export async function* emberDrift(crew: Crew): AsyncGenerator<Particles> {
  const start = await makeSnapshot(
    {
      model: 'uniform',
      count: STARS,
      seed: SEED,
      virialRatio: START_RATIO,
      softening: SOFTENING.length,
      softeningKernel: SOFTENING.kernel,
    },
    crew,
  );
  yield* leapfrog(
    start,
    {
      gravity: 1,
      softening: SOFTENING,
      timeStep: TIME_STEP,
      every: EVERY,
      snapshots: SNAPSHOTS,
    },
    crew,
  );
}

/** Runs, measures, tells. `onRecord` is called after each snapshot. */
export async function collapse(
  crew: Crew,
  onSnapshot: (particles: Particles, done: number) => Promise<void>,
  paint: Paint,
): Promise<string> {
  const records: MeasureRecord[] = [];
  for await (const particles of emberDrift(crew)) {
    records.push(await measureSnapshot(particles, {}, crew));
    await onSnapshot(particles, records.length);
  }
  return tell(records, paint);
}

function tell(records: readonly MeasureRecord[], paint: Paint): string {
  const [first] = records;
  const deepest = records.reduce((a, b) => (b.halfMassRadius < a.halfMassRadius ? b : a));
  const rest = records.slice(Math.floor(REST * records.length));
  const last = records[records.length - 1];
  const lost = last.whole.particles - last.bound.particles;
  const mean = (of: (record: MeasureRecord) => number) =>
    rest.reduce((sum, record) => sum + of(record), 0) / rest.length;
  const ratio = (record: MeasureRecord) => record.whole.clausiusRatio ?? NaN;
  const boundRatio = (record: MeasureRecord) => record.bound.clausiusRatio ?? NaN;
  const energies = records.map(({ whole }) => whole.energy);
  const drift = Math.max(...energies.map((energy) => Math.abs(energy / energies[0] - 1)));
  const rows = records.filter((_, k) => k % ROW === 0 || k === records.length - 1);
  return [
    paint.strong(
      `3. A run of our own: the Ember Drift, ${wholeNumber(STARS)} stars that fall together`,
    ),
    wrap(
      `A homogeneous ball (mass 1, radius 1, G = 1) with a fifth of the motion that would hold it up, followed by leapfrog with forces softened over ${SOFTENING.length} and measured ${SNAPSHOTS} times. The ratio is 2T/|W| of the stars that are bound at the time:`,
      '   ',
    ),
    '',
    `   ${'time'.padStart(5)}  ${'2T/|W|'.padStart(6)}  ${'half-mass radius'}  ${axis()}`,
    ...rows.map((record) => row(record, boundRatio(record), paint)),
    '',
    wrap(
      `From ${short(boundRatio(first), 2)} the ratio shoots past 1 as the stars fall through the middle (half-mass radius ${short(first.halfMassRadius, 2)} → ${short(deepest.halfMassRadius, 2)} at time ${short(deepest.time ?? 0, 2)}), swings, and comes to rest: over the last third of the run its mean is ${short(mean(boundRatio), 3)}.`,
      '   ',
    ),
    ...(lost > 0
      ? [
          wrap(
            `${wholeNumber(lost)} stars were thrown out for good. They still move, so the ratio of all stars stays at ${short(mean(ratio), 3)} and would tell of imbalance where there is none: ask which stars a ratio speaks of.`,
            '   ',
          ),
        ]
      : []),
    wrap(
      `The energy of the run was never off by more than ${short(100 * drift, 1)} %: the time step was short enough for that fall.`,
      '   ',
    ),
    '',
    ...verdictLines(verdictOf(records), paint),
  ].join('\n');
}

/** What `settlemark track` says of the run, in three lines. */
function verdictLines(verdict: Verdict, paint: Paint): string[] {
  const { settledAt, settledAtError, independentSnapshots, evidence } = verdict;
  const good = settledAt !== null;
  const since = good ? ` since time ${figure(settledAt, settledAtError)}` : '';
  const worth = good
    ? ` The snapshots from then on are worth ${short(independentSnapshots ?? 0)} independent ones.`
    : '';
  return [
    `   ${paint.strong('The verdict:')} ${paint[good ? 'good' : 'warn'](`${verdict.verdict}${since}`)}`,
    wrap(`${evidence.map(({ text }) => asSentence(text)).join(' ')}${worth}`, '   '),
  ];
}

const place = (ratio: number) => Math.round((Math.min(ratio, BAR_END) / BAR_END) * BAR);

function axis(): string {
  const middle = place(1);
  return `0${'1'.padStart(middle)}${String(BAR_END).padStart(BAR - middle)}`;
}

function row(record: MeasureRecord, ratio: number, paint: Paint): string {
  const at = place(ratio);
  const middle = place(1);
  const track = Array.from({ length: BAR + 1 }, (_, k): string => (k === middle ? '|' : ' '));
  track[at] = 'o';
  const time = (record.time ?? 0).toFixed(1).padStart(5);
  const near = Math.abs(ratio - 1) < 2 * (record.bound.noise ?? 0);
  const text = ratio.toFixed(2).padStart(6);
  return `   ${time}  ${near ? paint.good(text) : text}  ${record.halfMassRadius.toFixed(3).padStart(16)}  ${track.join('').trimEnd()}`;
}
