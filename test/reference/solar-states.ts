/**
 * The real Sun and planets for tests: states from the ephemeris, and their energies by plain double
 * loops that share nothing with the engine.
 */
import {
  BODIES,
  DAYS_PER_YEAR,
  GRAVITY,
  solarState,
  solarStates,
  writeRawSeries,
  type SolarState,
} from '../../fixtures/solar/make.js';

export { BODIES, DAYS_PER_YEAR, GRAVITY, solarState, solarStates, writeRawSeries, type SolarState };

/** 1 January of `year`, 12:00 UTC. */
export const noon = (year: number): Date => new Date(Date.UTC(year, 0, 1, 12));

/** The moment `days` after noon of 1 January of `year`. */
export const daysAfter = (year: number, days: number): Date =>
  new Date(noon(year).getTime() + days * 86400e3);

/** T and İ in the frame of the set's own centre and mean velocity, U; all in au, yr, solar masses. */
export interface SolarBalance {
  readonly time: number;
  readonly kinetic: number;
  readonly potential: number;
  /** dI/dt = 2 Σ m (x − x_c)·(v − v_c) */
  readonly momentOfInertiaRate: number;
}

/** @param members - indices of the bodies taken, all if not given */
export function solarBalance(
  state: SolarState,
  members: readonly number[] = BODIES.map((_, i) => i),
): SolarBalance {
  const { mass, position, velocity } = state;
  let total = 0;
  const centre = [0, 0, 0];
  const mean = [0, 0, 0];
  for (const i of members) {
    total += mass[i];
    for (let k = 0; k < 3; k++) {
      centre[k] += mass[i] * position[3 * i + k];
      mean[k] += mass[i] * velocity[3 * i + k];
    }
  }
  let kinetic = 0;
  let potential = 0;
  let rate = 0;
  for (const i of members) {
    for (let k = 0; k < 3; k++) {
      const x = position[3 * i + k] - centre[k] / total;
      const v = (velocity[3 * i + k] - mean[k] / total) * DAYS_PER_YEAR;
      kinetic += 0.5 * mass[i] * v * v;
      rate += 2 * mass[i] * x * v;
    }
    for (const j of members) {
      if (j >= i) continue;
      const r = Math.hypot(...[0, 1, 2].map((k) => position[3 * i + k] - position[3 * j + k]));
      potential -= (GRAVITY * mass[i] * mass[j]) / r;
    }
  }
  return { time: state.time, kinetic, potential, momentOfInertiaRate: rate };
}

/** Mean of `values` over the time of the series, by the trapezoid rule. */
export function timeMean(times: readonly number[], values: readonly number[]): number {
  let sum = 0;
  for (let k = 1; k < times.length; k++) {
    sum += 0.5 * (values[k] + values[k - 1]) * (times[k] - times[k - 1]);
  }
  return sum / (times[times.length - 1] - times[0]);
}

/** The virial theorem averaged over a series: 2⟨T⟩/|⟨U⟩| = 1 + boundary term + residual. */
export function averageVirial(series: readonly SolarBalance[]): {
  ratio: number;
  boundary: number;
  residual: number;
  smallest: number;
  greatest: number;
} {
  const times = series.map(({ time }) => time);
  const mean = (key: 'kinetic' | 'potential') =>
    timeMean(
      times,
      series.map((balance) => balance[key]),
    );
  const potential = Math.abs(mean('potential'));
  const ratio = (2 * mean('kinetic')) / potential;
  const [first, last] = [series[0], series[series.length - 1]];
  const boundary =
    (last.momentOfInertiaRate - first.momentOfInertiaRate) /
    (2 * (last.time - first.time) * potential);
  const single = series.map(({ kinetic, potential }) => (2 * kinetic) / Math.abs(potential));
  return {
    ratio,
    boundary,
    residual: ratio - 1 - boundary,
    smallest: Math.min(...single),
    greatest: Math.max(...single),
  };
}
