/** Values of options, from text. */
import { UsageError } from '../errors.ts';

/** A parser for one option's number; anything that is not all of a finite number is refused. */
export function numberOf(option: string): (text: string) => number {
  return (text) => {
    const value = text.trim() === '' ? NaN : Number(text);
    if (Number.isFinite(value)) return value;
    throw notA(option, text, 'a number', 'Write it as 0.01 or 1e-5.');
  };
}

/** A softening length, or `column` for those of the single bodies. */
export function softeningOf(option: string): (text: string) => number | 'column' {
  return (text) => {
    const value = text.trim() === '' ? NaN : Number(text);
    if (Number.isFinite(value)) return value;
    if (text.trim() === 'column') return 'column';
    throw notA(option, text, 'a length or "column"', 'Write it as 0.01 or column.');
  };
}

/** A whole number of at least `least`; `1e6` and `100_000` are read as people mean them. */
export function wholeOf(option: string, least: number): (text: string) => number {
  return (text) => {
    const plain = text.replace(/(?<=\d)_(?=\d)/g, '');
    const value = plain.trim() === '' ? NaN : Number(plain);
    if (Number.isSafeInteger(value) && value >= least) return value;
    throw notA(option, text, `a whole number of at least ${least}`, 'Write it as 100000 or 1e5.');
  };
}

/** A whole number of any size, exactly. */
export function integerOf(option: string): (text: string) => number | bigint {
  return (text) => {
    if (!/^[-+]?\d+$/.test(text.trim())) {
      throw notA(option, text, 'a whole number', 'Write it as 12.');
    }
    const value = Number(text);
    return Number.isSafeInteger(value) ? value : BigInt(text.trim().replace(/^\+/, ''));
  };
}

/** Numbers separated by commas. */
export function listOf(option: string): (text: string) => number[] {
  const parse = numberOf(option);
  return (text) => text.split(',').map(parse);
}

/** Words separated by commas. */
export function wordsOf(text: string): string[] {
  return text.split(',').map((word) => word.trim());
}

/** Three numbers separated by commas. */
export function vectorOf(option: string): (text: string) => readonly [number, number, number] {
  const parse = numberOf(option);
  return (text) => {
    const parts = text.split(',').map(parse);
    if (parts.length !== 3) {
      throw notA(option, text, 'three numbers separated by commas', 'Write it as 1,0,-2.5.');
    }
    return [parts[0], parts[1], parts[2]];
  };
}

function notA(option: string, text: string, expected: string, remedy: string): UsageError {
  return new UsageError('usage.value', `${option} "${text}" is not ${expected}`, remedy);
}
