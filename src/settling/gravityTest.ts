/** The gravity test: which G, or which softening, would balance a run that stays as it is but off 1. */
import { knownGravityNear } from '../dynamics/knownGravity.ts';
import type { MeasureRecord } from '../dynamics/record.ts';
import type { Remark } from '../snapshot/particles.ts';
import { average, median } from './blocks.ts';

export interface ImpliedGravity {
  /** G that the motions ask for, and 1σ of it. */
  readonly gravity: number;
  readonly error: number;
  /** The same over the G that was used. */
  readonly factor: number;
}

const BLOCKS = 6;
/** Snapshots that a block needs for its time averages. */
const LEAST_A_BLOCK = 3;
/** The half-mass radius of a system that stays changes no more than this from block to block. */
const STAYS = 0.3;
/** Times r_h/σ that a run must last: some three crossing times of a system at rest. */
const LEAST_SPAN = 5;

/**
 * G from the Lagrange–Jacobi identity over time, (İ₂ − İ₁)/(2Δt) = 2⟨T⟩ + ⟨W⟩: as W goes with G, it is
 * G (2⟨T⟩ − (İ₂ − İ₁)/(2Δt))/|⟨W⟩|. Exact for any isolated system, escapers and waves included, so that what
 * is left must be G, the unit, or the form of the force. All bodies count. The error is that of the mean
 * over six stretches of time, each with its own end terms, and the measured error of W.
 *
 * @param records - of one run, in order of time, each with a time
 * @returns null if there is nothing to tell: too few snapshots, some of the bodies only, bodies that come
 *   and go, a system that does not stay as it is (half-mass radii of six stretches within 30 %) for five
 *   times r_h/σ; none of these needs G
 * Source: the identity is Jacobi's (1843, Vorlesungen über Dynamik, from memory)
 */
export function impliedGravity(records: readonly MeasureRecord[]): ImpliedGravity | null {
  if (records.length < BLOCKS * LEAST_A_BLOCK + 1) return null;
  const [first] = records;
  const { gravity } = first.settings;
  const isOneSystem = records.every(
    ({ whole, settings, selection, external }) =>
      selection === undefined &&
      external === undefined &&
      whole.particles === first.whole.particles &&
      Math.abs(whole.mass / first.whole.mass - 1) < 1e-9 &&
      settings.gravity.value === gravity.value &&
      whole.clausius < 0,
  );
  if (!isOneSystem || !stays(records)) return null;
  const factors = Float64Array.from(blocksOf(records), factorOf);
  const factor = factorOf(records);
  const level = average(factors);
  const squares = factors.reduce((sum, value) => sum + (value - level) ** 2, 0);
  const scatter = Math.sqrt(squares / (BLOCKS - 1) / BLOCKS);
  const ofW = median(records.map(({ whole }) => whole.clausiusError / -whole.clausius));
  const error = Math.hypot(scatter, factor * ofW);
  if (!(factor > 0) || !Number.isFinite(error)) return null;
  return { gravity: gravity.value * factor, error: gravity.value * error, factor };
}

/** Stretches of the run; the last snapshot of one is the first of the next. */
function blocksOf(records: readonly MeasureRecord[]): MeasureRecord[][] {
  const edge = (b: number) => Math.floor((b * (records.length - 1)) / BLOCKS);
  return Array.from({ length: BLOCKS }, (_, b) => records.slice(edge(b), edge(b + 1) + 1));
}

/** Whether the half-mass radius stays, for long enough by the speeds that the bodies have. */
function stays(records: readonly MeasureRecord[]): boolean {
  const radii = blocksOf(records).map((block) =>
    median(block.map(({ halfMassRadius }) => halfMassRadius)),
  );
  const typical = median(radii);
  const speed = median(records.map(({ velocityDispersion }) => velocityDispersion));
  const [from, to] = [timeOf(records[0]), timeOf(records[records.length - 1])];
  const range = Math.max(...radii) - Math.min(...radii);
  return typical > 0 && range < STAYS * typical && (to - from) * speed > LEAST_SPAN * typical;
}

const timeOf = ({ time }: MeasureRecord): number => time ?? NaN;

function factorOf(records: readonly MeasureRecord[]): number {
  let kinetic = 0;
  let clausius = 0;
  for (let k = 1; k < records.length; k++) {
    const [a, b] = [records[k - 1], records[k]];
    const half = (timeOf(b) - timeOf(a)) / 2;
    kinetic += half * (a.whole.kinetic + b.whole.kinetic);
    clausius += half * (a.whole.clausius + b.whole.clausius);
  }
  const ends = records[records.length - 1].momentOfInertiaRate - records[0].momentOfInertiaRate;
  return (2 * kinetic - ends / 2) / -clausius;
}

/** How far from 1 the factor must be to be told: this, and so many of its σ. */
const OFF = 0.03;
const SIGMAS = 4;

/** A remark on a G that is off; none if it is not. */
export function gravityTest(records: readonly MeasureRecord[]): Remark[] {
  const implied = impliedGravity(records);
  if (implied === null) return [];
  const { gravity, error, factor } = implied;
  const used = records[0].settings.gravity.value;
  if (Math.abs(factor - 1) <= Math.max(OFF, (SIGMAS * error) / used)) return [];
  const known = knownGravityNear(gravity, error / gravity);
  const length = known === null ? softeningFor(records, factor) : null;
  const softening =
    length === null
      ? ''
      : ` With the G that was used, a Plummer-equivalent softening length of about ${short(length, 2)} would do it in a Plummer sphere of this half-mass radius.`;
  return [
    {
      code: 'gravityTest',
      text: `The system stays as it is, and its motions ask for G = ${figure(gravity, error)}${known ? `, that of ${known.words}` : ''}, where G = ${short(used, 6)} was used.${softening}`,
      remedy: known
        ? `If these are the units of the run, measure again with ${known.remedy}.`
        : `Check --units and --gravity, the scales of masses, lengths and velocities, the softening, and whether all bodies and external forces are there.`,
    },
  ];
}

/**
 * |W| of a Plummer sphere with Plummer softening, over that without, by the softening length in half-mass
 * radii. Source: own direct sums over 16,000 bodies; a test sums again.
 */
export const SOFTENED_CLAUSIUS: readonly (readonly [length: number, share: number])[] = [
  [0, 1],
  [0.01, 0.999],
  [0.02, 0.9965],
  [0.05, 0.9842],
  [0.1, 0.9535],
  [0.2, 0.8764],
  [0.3, 0.7949],
  [0.5, 0.646],
  [0.75, 0.499],
  [1, 0.3904],
];

/** The softening length that makes |W| `factor` times what it was, or null if none up to r_h does. */
function softeningFor(records: readonly MeasureRecord[], factor: number): number | null {
  const radius = median(records.map(({ halfMassRadius }) => halfMassRadius));
  const { length } = records[0].settings.softening.value;
  const lengths = SOFTENED_CLAUSIUS.map(([x]) => x);
  const shares = SOFTENED_CLAUSIUS.map(([, share]) => share);
  const now = between(lengths, shares, length / radius);
  const wanted = now === null ? null : factor * now;
  // Shares fall with the length: turned round they grow.
  const found =
    wanted === null
      ? null
      : between(
          shares.map((share) => -share),
          lengths,
          -wanted,
        );
  return found === null ? null : found * radius;
}

/** Linear interpolation in a table whose first column grows; null outside. */
function between(x: readonly number[], y: readonly number[], at: number): number | null {
  for (let k = 1; k < x.length; k++) {
    if (at < x[k - 1] || at > x[k]) continue;
    return y[k - 1] + ((at - x[k - 1]) / (x[k] - x[k - 1])) * (y[k] - y[k - 1]);
  }
  return null;
}

function short(value: number, digits: number): string {
  return String(Number(value.toPrecision(digits)));
}

/** `0.004301 ± 0.000012` */
function figure(value: number, error: number): string {
  const digits = Math.ceil(Math.log10(Math.abs(value) / error)) + 2;
  return `${short(value, Math.min(7, Math.max(2, digits)))} ± ${short(error, 2)}`;
}
