/** Figures that rules need beside those of the record and the verdict: ratios that hold for any units. */
import type { MeasureRecord } from '../dynamics/record.ts';
import { median } from '../settling/blocks.ts';
import type { Verdict } from '../settling/verdict.ts';

export interface Reading {
  readonly value: number | string | boolean | null;
  /** 1σ; null if none is known or there is none. */
  readonly error: number | null;
}

interface Derived<T> {
  readonly text: string;
  readonly of: (subject: T) => Reading;
}

const ratio = (value: number, scale: number): number | null => (scale > 0 ? value / scale : null);

/**
 * Of one snapshot. Errors are the standard errors of means of N_eff independent bodies; that of
 * `expansion` is its upper bound, reached by purely radial orbits.
 */
export const OF_SNAPSHOT: Readonly<Record<string, Derived<MeasureRecord>>> = {
  boundFraction: {
    text: 'mass of the bound bodies over that of all',
    of: ({ bound, whole }) => ({ value: ratio(bound.mass, whole.mass), error: null }),
  },
  centreOffset: {
    text: 'distance of the centre of mass from the origin over the half-mass radius',
    of: ({ frame, halfMassRadius, momentOfInertia, whole, effectiveNumber }) => ({
      value: ratio(Math.hypot(...frame.centreOfMass), halfMassRadius),
      error: ratio(Math.sqrt(momentOfInertia / whole.mass / effectiveNumber), halfMassRadius),
    }),
  },
  bulkMotion: {
    text: 'speed of the centre of mass over the one-dimensional dispersion',
    of: ({ frame, velocityDispersion, effectiveNumber }) => ({
      value: ratio(Math.hypot(...frame.meanVelocity), velocityDispersion),
      error: Math.sqrt(3 / effectiveNumber),
    }),
  },
  expansion: {
    text: 'Σ m x·v/√(Σ m x² Σ m v²): 1 if all bodies stream outward, −1 inward, 0 in equilibrium',
    of: ({ momentOfInertia, momentOfInertiaRate, whole, effectiveNumber }) => ({
      value: ratio(momentOfInertiaRate / 2, Math.sqrt(momentOfInertia * 2 * whole.kinetic)),
      error: 1 / Math.sqrt(effectiveNumber),
    }),
  },
};

interface Run {
  readonly verdict: Verdict;
  readonly records: readonly MeasureRecord[];
}

/** Of a run. */
export const OF_RUN: Readonly<Record<string, Derived<Run>>> = {
  spanInCrossingTimes: {
    text: 'time from the first snapshot to the last over the crossing time',
    of: ({ verdict }) => ({ value: ratio(verdict.span, verdict.crossingTime), error: null }),
  },
  spanInRelaxationTimes: {
    text: 'the same over the median of the half-mass relaxation times',
    of: ({ verdict, records }) => {
      const times = records.flatMap(({ relaxation }) => relaxation.time ?? []);
      return { value: times.length > 0 ? ratio(verdict.span, median(times)) : null, error: null };
    },
  },
  settledAfterCrossingTimes: {
    text: 'time from the first snapshot to settling over the crossing time',
    of: ({ verdict, records }) => {
      const { settledAt, settledAtError, crossingTime } = verdict;
      const start = records.find(({ time }) => time !== null)?.time ?? null;
      if (settledAt === null || start === null) return { value: null, error: null };
      return {
        value: ratio(settledAt - start, crossingTime),
        error: settledAtError === null ? null : ratio(settledAtError, crossingTime),
      };
    },
  },
};
