/** The ratio that matters, and in words what it means and what it does not. */
import type { Balance, MeasureRecord } from '../index.ts';
import { figure, short } from './figure.ts';

export interface RatioWords {
  /** `2T/|U|` or, with softening, `2T/|W|`. */
  readonly name: string;
  readonly figure: string;
  readonly words: string;
  readonly tone: 'good' | 'warn' | 'bad';
}

/** So many times the noise off 1 is still what chance does. */
const WITHIN_NOISE = 2;
/** At this ratio and above T + U ≥ 0 (without softening). */
const UNBOUND_RATIO = 2;

export function isSoftened(record: MeasureRecord): boolean {
  return record.settings.softening.value.kernel !== 'none';
}

/** The ratio that is 1 in equilibrium: 2T/|W|, which is 2T/|U| without softening. */
export function ratioOf(record: MeasureRecord, set: 'whole' | 'bound'): number | null {
  const balance: Balance = record[set];
  return isSoftened(record) ? balance.clausiusRatio : balance.virialRatio;
}

export function ratioWords(record: MeasureRecord): RatioWords {
  const name = isSoftened(record) ? '2T/|W|' : '2T/|U|';
  const ratio = ratioOf(record, 'whole');
  const noise = noiseOf(record, 'whole');
  if (ratio === null) {
    return { name, figure: figure(null), words: 'there is nothing to divide by', tone: 'bad' };
  }
  const text = noise === null ? figure(ratio) : `${figure(ratio, noise)} (finite N)`;
  const say = (words: string, tone: RatioWords['tone']): RatioWords => {
    return { name, figure: text, words, tone };
  };
  if (ratio >= UNBOUND_RATIO) {
    return say('more motion than gravity can hold: unbound as a whole', 'bad');
  }
  if (ratio === 0) return say('nothing moves: a cold start that will collapse', 'bad');
  if (noise === null || noise === 0) {
    return say('bodies too few or too unequal for one moment to tell: average over orbits', 'warn');
  }
  const distance = Math.abs(ratio - 1) / noise;
  if (distance <= WITHIN_NOISE) return say('1, as in equilibrium, within the noise', 'good');
  const times = `by ${short(distance)} times the noise`;
  return ratio > 1
    ? say(`above 1 ${times}: more motion than equilibrium has`, 'warn')
    : say(`below 1 ${times}: less motion than equilibrium has`, 'warn');
}

/** The noise of finite N, or null where so few bodies carry the mass that it has no meaning. */
export function noiseOf(record: MeasureRecord, set: 'whole' | 'bound'): number | null {
  const isDominated = record.remarks.some(({ code }) => code === 'dominantBody');
  return isDominated ? null : record[set].noise;
}
