/** The numbers that the decision rule is made of. They were calibrated together: see docs/settling.md. */

/** Two-sided 0.1 % points of Student's t for m block means, m − 2 degrees of freedom. Source: tables of Student's t. */
const STUDENT = new Map([
  [5, 12.92398],
  [6, 8.6103],
  [7, 6.86883],
  [8, 5.95882],
  [9, 5.40788],
  [10, 5.04131],
]);

export const FEWEST_BLOCKS = 5;
export const MOST_BLOCKS = 10;

export function studentPoint(blocks: number): number {
  const point = STUDENT.get(blocks);
  if (point === undefined) throw new RangeError(`no point for ${blocks} blocks`);
  return point;
}

/** All times in crossing times. */
export const LIMITS = {
  /** Fewest snapshots, and spans below which nothing or only a fast collapse is told. */
  snapshots: 20,
  span: 2,
  settledSpan: 6,
  /** A run inside its noise from the first snapshot needs no more than this. */
  quietSpan: 4,
  /** What is kept after the cut must last so long and have so many snapshots. */
  tail: 4,
  tailSnapshots: 10,
  /** Least deviations that count as a transient: of the ratio, of ln r. */
  floorRatio: 0.01,
  floorRadius: 0.02,
  /** Least changes over the window that count as a trend: ratio, ln r_h or ln r_v, ln r_10. */
  trendRatio: 0.02,
  trendRadius: 0.03,
  trendInner: 0.06,
  /** Running median of |E − E_0|/|E_0| above which a run is broken. */
  energy: 0.02,
  /** Waves: least amplitude, share of the variance, phase agreement of the halves, cycles. */
  wave: 0.03,
  waveShare: 0.6,
  waveAgreement: 0.7,
  waveCycles: 2,
  /** Steps: F statistic of two levels, and robust σ that the end may leave the rest by. */
  stepF: 40,
  endSigma: 4,
  /** Block length that makes block means nearly independent. */
  block: 1.5,
  /** Cut beyond this share of the span: no end of the transient was found. */
  capped: 0.62,
  /** |d ln r/dt| t_rh of encounters. */
  relaxingLeast: 0.005,
  relaxingMost: 2,
  /** |Δ ln M| of all bodies above which encounters are not what moves the radii. */
  massChange: 0.02,
  /** Scatter of the ratio over realisations, times √N: the floor where a run's own noise is not known. */
  noiseRatio: 0.8,
} as const;
