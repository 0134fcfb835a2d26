/** Rows lined up in columns. */
import Table from 'cli-table3';

export type Align = 'left' | 'right';

/** Rows in columns, two spaces between them, no rules; no space at the ends of lines. */
export function columns(
  rows: readonly (readonly string[])[],
  aligns: readonly Align[],
  indent = '',
): string {
  const nothing = ['top', 'top-mid', 'top-left', 'top-right', 'bottom', 'bottom-mid'];
  const more = ['bottom-left', 'bottom-right', 'left', 'left-mid', 'mid', 'mid-mid', 'right'];
  const names = [...nothing, ...more, 'right-mid', 'middle'];
  const table = new Table({
    chars: Object.fromEntries(names.map((name) => [name, ''])),
    style: { 'padding-left': 0, 'padding-right': 2, head: [], border: [] },
    colAligns: [...aligns],
  });
  table.push(...rows.map((row) => [...row]));
  return table
    .toString()
    .split('\n')
    .map((line) => (indent + line).trimEnd())
    .join('\n');
}

/** Room for a minus sign before figures that have none, so that digits stand below digits. */
export function signRoom(text: string): string {
  return /^[-(]/.test(text) ? text : ` ${text}`;
}
