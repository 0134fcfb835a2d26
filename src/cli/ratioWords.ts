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
  const { noise } = record.whole;
  if (ratio === null) {
    return { name, figure: figure(null), words: 'there is nothing to divide by', tone: 'bad' };
  }
  const text = noise === null ? figure(ratio) : `${figure(ratio, noise)} (finite N)`;
  if (ratio >= UNBOUND_RATIO) {
    return {
      name,
      figure: text,
      words: 'more motion than gravity can hold: unbound as a whole',
      tone: 'bad',
    };
  }
  if (noise === null || noise === 0) return { name, figure: text, words: '', tone: 'warn' };
  const distance = Math.abs(ratio - 1) / noise;
  if (distance <= WITHIN_NOISE) {
    return { name, figure: text, words: '1, as in equilibrium, within the noise', tone: 'good' };
  }
  const side = ratio > 1 ? 'above 1: too much motion' : 'below 1: too little motion';
  return {
    name,
    figure: text,
    words: `${short(distance)} × the noise ${side} for balance`,
    tone: 'warn',
  };
}
