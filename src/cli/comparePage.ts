/** A comparison of runs, as a page of at most 80 columns. */
import type { Comparison } from '../index.ts';
import { short } from './figure.ts';
import { printable, shorten, wrap } from './layout.ts';
import { remarksText } from './remarks.ts';
import type { Paint } from './style.ts';

const START = {
  same: 'from the same bodies',
  paired: 'in pairs from the same bodies',
  other: 'of other seeds',
} as const;

export function comparePage(comparison: Comparison, paint: Paint): string {
  const { verdict, candidates, references, p, parts, falseAlarm, remarks } = comparison;
  const named = (names: readonly string[]) =>
    names.length === 1 ? shorten(names[0], 30) : `${names.length} runs`;
  const lines = [
    paint[verdict === 'same' ? 'good' : 'warn'](
      verdict === 'same' ? 'the same, as far as can be told' : 'different',
    ),
    wrap(
      printable(
        `${named(candidates)} against ${named(references)}, ${START[comparison.start]}, time ${short(comparison.from, 4)} to ${short(comparison.to, 4)}. Chance gives such differences to correct runs with probability ${short(p)}; below ${short(falseAlarm)} they are called different.`,
      ),
      '  ',
    ),
    ...(parts === null
      ? []
      : [
          wrap(
            `largest difference p = ${short(parts.largest)}, energy distance p = ${short(parts.energy)}, principal components p = ${short(parts.ensemble)}`,
            '  ',
          ),
        ]),
    '',
    row(['quantity', 'difference', '± chance', 'p (Holm)', 'seen from', 'at time'], ' '),
    ...comparison.quantities.map((one) => {
      const unit = one.scale === 'relative' ? 100 : 1;
      const sign = one.scale === 'relative' ? ' %' : '';
      const text = (value: number) => `${short(unit * value)}${sign}`;
      const at =
        one.to > one.from ? `${short(one.from, 3)}-${short(one.to, 3)}` : short(one.from, 3);
      const cells = [
        one.quantity,
        text(one.difference),
        text(one.standardError),
        short(one.adjusted),
        text(one.detectable),
        at,
      ];
      const line = row(cells, one.different ? '*' : ' ');
      return one.different ? paint.warn(line) : line;
    }),
    '',
    wrap(
      '* differs. "Seen from": a true difference that this test would see four times in five.',
      '  ',
    ),
    ...(remarks.length > 0 ? ['', remarksText(remarks, paint)] : []),
  ];
  return `${lines.join('\n')}\n`;
}

const WIDTHS = [22, 11, 10, 9, 10, 13] as const;

function row(cells: readonly string[], mark: string): string {
  return ` ${mark}${cells.map((cell, k) => (k === 0 ? cell.padEnd(WIDTHS[k]) : cell.padStart(WIDTHS[k]))).join('')}`;
}
