/**
 * The decision rule: from a ratio and radii in time to a state, with the numbers that decided it.
 *
 * Order matters: a broken run is named before all else, a fast collapse before a run is called too short,
 * a wave before a trend. Everything is judged in physical time (crossing times), on block means long
 * enough to be nearly independent, and against both a significance and a size that matters.
 */
import { average, bestStep, blockMeans, median, slopeOf, type Step } from './blocks.ts';
import { lastBurst } from './burst.ts';
import { cutAt } from './cut.ts';
import { FEWEST_BLOCKS, LIMITS, MOST_BLOCKS, studentPoint } from './limits.ts';
import { phaseAgreement, strongestWave } from './oscillation.ts';

/** What the rule looks at: one entry a snapshot, in order of time. */
export interface Track {
  /** Time [crossing times], from any origin. */
  readonly time: Float64Array;
  /** 2T/|W| (or 2T/|U| where forces are not softened). */
  readonly ratio: Float64Array;
  /** ln of the half-mass radius. */
  readonly logHalf: Float64Array;
  /** ln of the radius of a tenth of the mass; null if not known. */
  readonly logInner?: Float64Array | null;
  /** ln of the virial radius, which needs no centre; null if not known. */
  readonly logVirial?: Float64Array | null;
  /** (E − E_0)/|E_0|, or null where it may not be judged. */
  readonly energyError?: Float64Array | null;
  /** Effective number of bodies, or null if not known. */
  readonly effectiveNumber: number | null;
  /** Half-mass relaxation time [crossing times], or null. */
  readonly relaxationTime?: number | null;
  /** |Δ ln M| of all bodies from the first to the last snapshot. */
  readonly massChange?: number;
}

export type State =
  | 'settled'
  | 'relaxing'
  | 'oscillating'
  | 'collapsing'
  | 'expanding'
  | 'drifting'
  | 'broken'
  | 'undecided';

/** One number that decided, the threshold it was held against, and what it is. */
export interface Finding {
  readonly code: string;
  readonly value: number;
  readonly threshold: number;
  readonly text: string;
}

export interface Decision {
  readonly state: State;
  /** Index of the first snapshot of the settled part; null unless settled or relaxing. */
  readonly settledFrom: number | null;
  /** Index of the cut that was found, whatever the state; null if none was looked for. */
  readonly cut: number | null;
  readonly findings: readonly Finding[];
}

const number = (value: number, digits = 3): string =>
  Number.isFinite(value) ? String(Number(value.toPrecision(digits))) : String(value);

export function decide(track: Track): Decision {
  const { time: t } = track;
  const n = t.length;
  const findings: Finding[] = [];
  const note = (code: string, value: number, threshold: number, text: string) => {
    findings.push({ code, value, threshold, text });
  };
  const end = (state: State, cut: number | null, settledFrom: number | null = null): Decision => ({
    state,
    cut,
    settledFrom,
    findings,
  });

  const energy = worstEnergyError(track);
  if (energy !== null && energy > LIMITS.energy) {
    note(
      'energyError',
      energy,
      LIMITS.energy,
      `the energy is off by ${number(100 * energy)} % of its first value (limit ${100 * LIMITS.energy} %)`,
    );
    return end('broken', null);
  }
  const span = n > 0 ? t[n - 1] - t[0] : 0;
  if (n < LIMITS.snapshots) {
    note('fewSnapshots', n, LIMITS.snapshots, `${n} snapshots; ${LIMITS.snapshots} are needed`);
    return end('undecided', null);
  }
  if (span < LIMITS.span) {
    note('shortSpan', span, LIMITS.span, tooShort(span, LIMITS.span));
    return end('undecided', null);
  }
  const noise = noiseOf(track);
  const cuts = [
    cutAt(t, track.ratio, Math.max(LIMITS.floorRatio, noise / 2)),
    cutAt(t, track.logHalf, Math.max(LIMITS.floorRadius, noise / 2)),
    ...(track.logVirial
      ? [cutAt(t, track.logVirial, Math.max(LIMITS.floorRadius, noise / 2))]
      : []),
  ];
  let cut = Math.max(...cuts);
  const capped = t[cut] - t[0] > LIMITS.capped * span;
  if (!capped && headFits(track, cut, noise)) cut = 0;
  const disturbed = capped ? null : lastBurst(t.subarray(cut), track.ratio.subarray(cut), noise);
  const after = disturbed === null ? n : cut + disturbed.to + 1;
  // At rest again: judged from there on. Too late for that: told of below.
  const isOver = n - after >= LIMITS.tailSnapshots && t[n - 1] - t[after] >= LIMITS.tail;
  if (isOver) cut = after;

  const motion = motionNow(track, noise);
  if (motion !== null) {
    findings.push(motion.finding);
    return end(motion.state, cut);
  }
  const quiet = cut === 0 && isQuiet(track, noise);
  const needed = quiet ? LIMITS.quietSpan : LIMITS.settledSpan;
  if (span < needed) {
    note('shortSpan', span, needed, tooShort(span, needed));
    return end('undecided', cut);
  }
  const wave = waveNow(track, noise, isOver ? cut : 0);
  if (wave !== null) {
    findings.push(wave);
    return end('oscillating', cut);
  }
  const tail = sliceFrom(track, cut);
  const length = t[n - 1] - t[cut];
  if (!capped && (length < LIMITS.tail || tail.time.length < LIMITS.tailSnapshots)) {
    if (length < LIMITS.tail)
      note('shortTail', length, LIMITS.tail, tooShort(length, LIMITS.tail, true));
    else {
      const many = tail.time.length;
      note(
        'fewAfterCut',
        many,
        LIMITS.tailSnapshots,
        `${many} snapshots after the transient; ${LIMITS.tailSnapshots} are needed`,
      );
    }
    return end('undecided', cut);
  }
  if (disturbed !== null && !isOver) {
    const { rms, limit } = disturbed;
    note(
      'disturbance',
      rms,
      limit,
      `the ratio leaves its level by ${number(rms)} (rms over a crossing time, limit ${number(limit)}) late in the run`,
    );
    return end('drifting', cut);
  }
  return judgeTail(track, { cut, capped, disturbed: isOver }, noise, findings, end);
}

/** The last stage: trends and steps after the cut. */
function judgeTail(
  track: Track,
  start: { readonly cut: number; readonly capped: boolean; readonly disturbed: boolean },
  noise: number,
  findings: Finding[],
  end: (state: State, cut: number | null, settledFrom?: number | null) => Decision,
): Decision {
  const { time: t } = track;
  const n = t.length;
  const { cut, capped } = start;
  const middle = t[0] + (t[n - 1] - t[0]) / 2;
  const from = start.disturbed ? cut : Math.min(cut, firstAt(t, middle));
  const window = sliceFrom(track, from);
  const tail = sliceFrom(track, cut);
  if (window.time.length < LIMITS.tailSnapshots) {
    const many = window.time.length;
    findings.push({
      code: 'fewAfterCut',
      value: many,
      threshold: LIMITS.tailSnapshots,
      text: `${many} snapshots in the second half; ${LIMITS.tailSnapshots} are needed`,
    });
    return end('undecided', cut);
  }
  const length = window.time[window.time.length - 1] - window.time[0];
  const blocks = blocksIn(length, window.time.length);
  const whole = capped ? window : tail;
  const look = (
    x: Float64Array | null | undefined,
    xPart: Float64Array | null | undefined,
    xAll: Float64Array | null | undefined,
    size: number,
  ): Changes | null => {
    if (!x || !xPart || !xAll) return null;
    const late = changesOf(window.time, x, whole.time, xPart, blocks, size);
    if (late.trend) return late;
    // A slow trend may be lost in the second half and plain in all of the run; there a step or what is
    // left of a transient is better described by two levels than by a line.
    const many = blocksIn(t[n - 1] - t[0], n);
    const all = trendOf(t, xAll, many, size);
    const isLine = all.t * all.t > bestStep(blockMeans(t, xAll, many)).f;
    if (!all.trend || !isLine) return late;
    return { ...late, ...all, change: (all.change * length) / (t[n - 1] - t[0]) };
  };
  const ratio = look(window.ratio, whole.ratio, track.ratio, LIMITS.trendRatio) as Changes;
  const half = look(window.logHalf, whole.logHalf, track.logHalf, LIMITS.trendRadius) as Changes;
  const virial = look(window.logVirial, whole.logVirial, track.logVirial, LIMITS.trendRadius);
  const inner = look(window.logInner, whole.logInner, track.logInner, LIMITS.trendInner);

  const trend = (name: string, { change, t: score }: Changes, size: number): Finding => ({
    code: `trend.${name}`,
    value: change,
    threshold: size,
    text: `${NAMES[name]} changes by ${number(change)} over the last ${number(length)} crossing times (limit ${size}, significance ${number(Math.abs(score))} against ${number(studentPoint(blocks))})`,
  });
  const step = (name: string, { step: s }: Changes, size: number): Finding => ({
    code: `step.${name}`,
    value: s?.jump ?? 0,
    threshold: 2 * size,
    text: `${NAMES[name]} jumps by ${number(s?.jump ?? 0)} at ${number(s?.time ?? 0)} crossing times (limit ${2 * size})`,
  });
  if (ratio.trend || ratio.step) {
    findings.push(
      ratio.trend
        ? trend('ratio', ratio, LIMITS.trendRatio)
        : step('ratio', ratio, LIMITS.trendRatio),
    );
    return end('drifting', cut);
  }
  for (const [name, changes] of [
    ['half', half],
    ['virial', virial],
  ] as const) {
    if (changes?.step && !changes.trend) {
      findings.push(step(name, changes, LIMITS.trendRadius));
      return end('drifting', cut);
    }
  }
  const level = average(blockMeans(window.time, window.ratio, 1).mean);
  const moving = inner?.trend
    ? (['inner', inner, LIMITS.trendInner] as const)
    : half.trend
      ? (['half', half, LIMITS.trendRadius] as const)
      : virial?.trend
        ? (['virial', virial, LIMITS.trendRadius] as const)
        : null;
  if (moving !== null) {
    const [name, changes, size] = moving;
    findings.push(trend(name, changes, size));
    const rate = track.relaxationTime
      ? (Math.abs(changes.change) / length) * track.relaxationTime
      : null;
    const halfRate = track.relaxationTime
      ? (Math.abs(half.change) / length) * track.relaxationTime
      : 0;
    const balanced = Math.abs(level - 1) < Math.max(0.05, 4 * noise);
    const byEncounters =
      rate !== null &&
      rate > LIMITS.relaxingLeast &&
      rate < LIMITS.relaxingMost &&
      balanced &&
      !((track.massChange ?? 0) > LIMITS.massChange) &&
      !(half.trend && halfRate > LIMITS.relaxingMost);
    if (!byEncounters || capped) return end('drifting', cut);
    findings.push({
      code: 'relaxationRate',
      value: rate,
      threshold: LIMITS.relaxingMost,
      text: `that is ${number(rate)} a half-mass relaxation time (encounters: ${LIMITS.relaxingLeast} to ${LIMITS.relaxingMost})`,
    });
    return end('relaxing', cut, cut);
  }
  if (capped) {
    findings.push({
      code: 'noEnd',
      value: (t[cut] - t[0]) / (t[n - 1] - t[0]),
      threshold: LIMITS.capped,
      text: `the change goes on into the last third of the span`,
    });
    return end('drifting', cut);
  }
  findings.push({
    code: 'steady',
    value: ratio.change,
    threshold: LIMITS.trendRatio,
    text: `no trend, step or wave beyond the limits in the last ${number(length)} crossing times; smallest trend of the ratio that would have been seen: ${number(ratio.detectable)}`,
  });
  return end('settled', cut, cut);
}

const NAMES: Record<string, string> = {
  ratio: 'the ratio',
  half: 'ln r_h',
  virial: 'ln r_v',
  inner: 'ln r_10',
};

interface Changes {
  /** Slope times length of the window. */
  readonly change: number;
  readonly t: number;
  readonly trend: boolean;
  readonly step: Step | null;
  /** The smallest change that would have been called a trend. */
  readonly detectable: number;
}

type Trend = Pick<Changes, 'change' | 't' | 'trend' | 'detectable'>;

function trendOf(t: Float64Array, x: Float64Array, blocks: number, size: number): Trend {
  const length = t[t.length - 1] - t[0];
  const line = slopeOf(blockMeans(t, x, blocks));
  const point = studentPoint(blocks);
  let trend = Math.abs(line.t) > point && Math.abs(line.slope) * length > size;
  if (trend) {
    // A trend must go on at the end: the rest of a transient does not.
    const late = firstAt(t, t[t.length - 1] - 0.6 * length);
    if (t.length - late >= 8) {
      const last = slopeOf(blockMeans(t.subarray(late), x.subarray(late), FEWEST_BLOCKS));
      trend =
        last.slope * line.slope > 0 &&
        Math.abs(last.slope) > 0.4 * Math.abs(line.slope) &&
        Math.abs(last.t) > 1.6;
    }
  }
  return {
    change: line.slope * length,
    t: line.t,
    trend,
    detectable: Math.max(size, line.error * point * length),
  };
}

function changesOf(
  t: Float64Array,
  x: Float64Array,
  tPart: Float64Array,
  xPart: Float64Array,
  blocks: number,
  size: number,
): Changes {
  const split = bestStep(blockMeans(tPart, xPart, Math.max(blocks, 6)));
  const stepped = split.f > LIMITS.stepF && Math.abs(split.jump) > 2 * size;
  return { ...trendOf(t, x, blocks, size), step: stepped ? split : lateStep(t, x, size) };
}

/** Number of blocks that are long enough to be nearly independent. */
function blocksIn(length: number, snapshots: number): number {
  return clamp(
    Math.floor(Math.min(length / LIMITS.block, snapshots / 2)),
    FEWEST_BLOCKS,
    MOST_BLOCKS,
  );
}

/** The last 5, 10 or 20 % that leave the rest. */
function lateStep(t: Float64Array, x: Float64Array, size: number): Step | null {
  const n = t.length;
  const length = t[n - 1] - t[0];
  for (const share of [0.05, 0.1, 0.2]) {
    const at = firstAt(t, t[n - 1] - share * length);
    if (n - at < 2 || at < 2) continue;
    const before = x.subarray(0, at);
    const level = median(before);
    const sigma = 1.4826 * median(Float64Array.from(before, (value) => Math.abs(value - level)));
    const jump = median(x.subarray(at)) - level;
    if (Math.abs(jump) > Math.max(2 * size, LIMITS.endSigma * sigma))
      return { f: 0, jump, time: t[at] };
  }
  return null;
}

/** Largest running median over three snapshots of |E − E_0|/|E_0|; null if it may not be judged. */
function worstEnergyError({ energyError: e }: Track): number | null {
  if (!e || e.length < 3) return null;
  let worst = 0;
  for (let k = 0; k < e.length; k++) {
    const near = e.subarray(Math.max(0, k - 1), k + 2).map(Math.abs);
    worst = Math.max(worst, median(near));
  }
  return worst;
}

/** Scatter of the ratio over realisations; 0 if the number of bodies is not known. */
export function noiseOf({ effectiveNumber }: Track): number {
  return effectiveNumber ? LIMITS.noiseRatio / Math.sqrt(effectiveNumber) : 0;
}

/** Collapse or expansion in the last quarter of the span. */
function motionNow(
  track: Track,
  noise: number,
): { state: 'collapsing' | 'expanding'; finding: Finding } | null {
  const { time: t } = track;
  const n = t.length;
  const quarter = t[n - 1] - 0.25 * (t[n - 1] - t[0]);
  let from = firstAt(t, quarter);
  if (n - from < 6) from = n - 6;
  const last = sliceFrom(track, from);
  const { time, mean } = blockMeans(last.time, last.logHalf, 5);
  const steps = Array.from({ length: 4 }, (_, k) => mean[k + 1] - mean[k]);
  const change = mean[4] - mean[0];
  const oneWay = steps.every((d) => d > 0) || steps.every((d) => d < 0);
  const least = Math.max(0.05, 3 * noise);
  if (!oneWay || Math.abs(change) <= least) return null;
  const level = blockMeans(last.time, last.ratio, 1).mean[0];
  const fast =
    Math.abs(change) / (time[4] - time[0]) > 0.05 &&
    Math.abs(level - 1) > least &&
    Math.abs(change) > 0.1;
  const beyond = Math.max(0.15, 4 * noise);
  const state =
    change < 0 && (level < 1 - beyond || fast)
      ? 'collapsing'
      : change > 0 && (level > 1 + beyond || fast)
        ? 'expanding'
        : null;
  if (state === null) return null;
  return {
    state,
    finding: {
      code: 'motion',
      value: change,
      threshold: least,
      text: `ln r_h goes one way in the last quarter, by ${number(change)} (limit ${number(least)}), at a ratio of ${number(level)}`,
    },
  };
}

/** Snapshots among which a wave is sought. */
const WAVE_SNAPSHOTS = 2000;

function waveNow(track: Track, noise: number, earliest: number): Finding | null {
  const { time: t } = track;
  const n = t.length;
  let from = firstAt(t, t[n - 1] - 0.5 * (t[n - 1] - t[0]));
  from = Math.max(from, earliest);
  if (n - from < 10) from = n - 10;
  // A wave that is there now is there in the last few thousand; the work grows as the square of their number.
  from = Math.max(from, n - WAVE_SNAPSHOTS);
  const half = sliceFrom(track, from);
  const gaps = Float64Array.from(
    { length: half.time.length - 1 },
    (_, k) => half.time[k + 1] - half.time[k],
  );
  const wave = strongestWave(half.time, half.ratio, Math.max(2.2 * median(gaps), 0.4));
  const { agreement } = phaseAgreement(half.time, half.ratio, wave.period);
  const length = half.time[half.time.length - 1] - half.time[0];
  const split = bestStep(
    blockMeans(half.time, half.ratio, clamp(Math.floor(half.time.length / 2), 5, 12)),
  );
  const jumps =
    Math.abs(split.jump) > LIMITS.trendRatio &&
    Math.abs(split.jump) / 2 > 0.7 * wave.rms &&
    split.f > 25;
  if (jumps) return null;
  const least = Math.max(LIMITS.wave, 3 * noise);
  if (
    wave.amplitude > least &&
    wave.share > LIMITS.waveShare &&
    length / wave.period >= LIMITS.waveCycles &&
    agreement > LIMITS.waveAgreement
  ) {
    return {
      code: 'wave',
      value: wave.amplitude,
      threshold: least,
      text: `the ratio swings by ± ${number(wave.amplitude)} (limit ${number(least)}) with a period of ${number(wave.period)} crossing times`,
    };
  }
  const leastRms = Math.max(0.7 * LIMITS.wave, 2.5 * noise);
  if (noise > 0 && wave.rms > leastRms) {
    const line = slopeOf(blockMeans(half.time, half.ratio, FEWEST_BLOCKS));
    if (!(Math.abs(line.t) > studentPoint(FEWEST_BLOCKS))) {
      return {
        code: 'scatter',
        value: wave.rms,
        threshold: leastRms,
        text: `the ratio scatters by ${number(wave.rms)} in the second half, more than its noise allows (${number(leastRms)}); no single period explains it`,
      };
    }
  }
  return null;
}

/** Deviations that a settled run's snapshots may have from the mean of the rest, in σ of one snapshot. */
const FITTING_SIGMA = 3.5;

/** Whether what lies before the cut is no different from what lies after it: then nothing needs cutting. */
function headFits(track: Track, cut: number, noise: number): boolean {
  if (cut === 0 || noise === 0) return cut === 0;
  const { time: t } = track;
  return (
    [
      [track.ratio, Math.max(LIMITS.floorRatio, noise)],
      [track.logHalf, Math.max(LIMITS.floorRadius, noise)],
    ] as const
  ).every(([x, floor]) => {
    const tail = x.subarray(cut);
    const level = average(tail);
    let squares = 0;
    for (const value of tail) squares += (value - level) ** 2;
    const sigma = Math.min(floor, Math.max(Math.sqrt(squares / tail.length), 0.5 * floor));
    for (let k = 0; k < cut; k++) if (Math.abs(x[k] - level) > FITTING_SIGMA * sigma) return false;
    // The mean before must agree too: its noise integrates to a fifth of a crossing time.
    const mean = cut > 1 ? blockMeans(t.subarray(0, cut), x.subarray(0, cut), 1).mean[0] : x[0];
    const independent = Math.max(1, (t[cut] - t[0]) / 0.4);
    return Math.abs(mean - level) < (FITTING_SIGMA * sigma) / Math.sqrt(independent);
  });
}

/** Whether ratio and radius never left the band of their noise: then four crossing times tell enough. */
function isQuiet(track: Track, noise: number): boolean {
  if (noise === 0) return false;
  const within = (x: Float64Array, level: number, band: number) =>
    x.every((value) => Math.abs(value - level) < band);
  return (
    within(track.ratio, 1, Math.max(LIMITS.wave, 3 * noise)) &&
    within(track.logHalf, average(track.logHalf), Math.max(LIMITS.trendRadius, 4 * noise))
  );
}

/** Samples from `begin` up to, not including, `end`, of all columns. */
export function partOf(track: Track, begin: number, end: number): Track {
  const cut = (x: Float64Array | null | undefined) => (x ? x.subarray(begin, end) : null);
  return {
    ...track,
    time: track.time.subarray(begin, end),
    ratio: track.ratio.subarray(begin, end),
    logHalf: track.logHalf.subarray(begin, end),
    logInner: cut(track.logInner),
    logVirial: cut(track.logVirial),
    energyError: cut(track.energyError),
  };
}

const sliceFrom = (track: Track, from: number): Track => partOf(track, from, track.time.length);

/** Index of the first time not before `when`. */
function firstAt(t: Float64Array, when: number): number {
  const k = t.findIndex((time) => time >= when);
  return k < 0 ? t.length - 1 : k;
}

const clamp = (value: number, low: number, high: number): number =>
  Math.min(high, Math.max(low, value));

function tooShort(length: number, needed: number, tail = false): string {
  return `${number(length)} crossing times${tail ? ' after the transient' : ''}; ${needed} are needed`;
}
