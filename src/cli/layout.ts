/** Text on a page of 80 columns: words wrapped, names shortened. */

/** No line of ours is wider; a terminal of this width wraps none of them. */
export const PAGE_WIDTH = 80;

/** Replaces characters that would move a terminal's cursor or change its colours. */
export function printable(text: string): string {
  // eslint-disable-next-line no-control-regex
  return text.replace(/[\u0000-\u001f\u007f-\u009f]/g, '?');
}

/** A name that fits into `width`, with its middle left out if it must be. */
export function shorten(name: string, width: number): string {
  const characters = [...printable(name)];
  if (characters.length <= width) return characters.join('');
  const tail = Math.ceil((width - 1) * 0.6);
  return [...characters.slice(0, width - 1 - tail), '…', ...characters.slice(-tail)].join('');
}

/**
 * Wraps words to lines of at most {@link PAGE_WIDTH}, each after `indent`; a word longer than a line
 * is broken. Lines do not end at a no-break space (U+00A0), which becomes a plain one.
 * @param first - what the first line begins with instead of the indent; as wide as the indent
 */
export function wrap(text: string, indent = '', first = indent): string {
  const width = PAGE_WIDTH - indent.length;
  const lines: string[] = [];
  let line = '';
  for (const word of printable(text).split(/ +/)) {
    let rest = word;
    if (line !== '' && line.length + 1 + rest.length > width) {
      lines.push(line);
      line = '';
    }
    while (rest.length > width) {
      lines.push(rest.slice(0, width));
      rest = rest.slice(width);
    }
    line = line === '' ? rest : `${line} ${rest}`;
  }
  lines.push(line);
  return lines
    .map((each, index) => (index === 0 ? first : indent) + each)
    .join('\n')
    .replaceAll('\u00a0', ' ');
}
