/** Remarks for people: what was found, and what to do about it. */
import type { Remark } from '../index.ts';
import { wrap } from './layout.ts';
import { NO_PAINT, type Paint } from './style.ts';

/** All remarks, wrapped to the page; empty if there are none. Ends without a line break. */
export function remarksText(remarks: readonly Remark[], paint: Paint = NO_PAINT): string {
  return remarks
    .map(({ code, text, remedy }) =>
      [
        wrap(asSentence(text), '  ', paint.warn('! ')),
        ...(remedy === '' ? [] : [wrap(asSentence(remedy), '    ', '  → ')]),
        paint.faint(`    (${code})`),
      ].join('\n'),
    )
    .join('\n');
}

/** With a capital and a full stop, unless it begins with a name that has neither (a file, an option). */
export function asSentence(text: string): string {
  const trimmed = text.trim();
  const first = /^[a-z]+(?=[ ,:])/.test(trimmed)
    ? trimmed.charAt(0).toUpperCase() + trimmed.slice(1)
    : trimmed;
  return /[.!?]$/.test(first) ? first : `${first}.`;
}
