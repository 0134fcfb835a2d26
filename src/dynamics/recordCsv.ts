/** Records as comma-separated values. */
import type { MeasureRecord } from './record.ts';
import { recordColumns, type Cell } from './recordColumns.ts';

/**
 * A head and one line a record, with the columns of {@link recordColumns}. Numbers have the fewest
 * digits that give the same double again, a null is an empty field, lines end in a line feed.
 * Source: RFC 4180, section 2 (quotes), but for the line end.
 */
export async function recordsToCsv(records: readonly MeasureRecord[]): Promise<string> {
  const columns = await recordColumns(records);
  const lines = [columns.map(({ name }) => csvField(name)).join(',')];
  for (let row = 0; row < records.length; row++) {
    lines.push(columns.map(({ cells }) => csvField(cells[row])).join(','));
  }
  return `${lines.join('\n')}\n`;
}

/** A text is quoted if it needs to be, an empty one always: without quotes it would be a null. */
export function csvField(cell: Cell): string {
  if (cell === null) return '';
  const text = String(cell);
  const needsQuotes = text === '' || /[",\r\n]|^\s|\s$/.test(text);
  return needsQuotes ? `"${text.replaceAll('"', '""')}"` : text;
}
