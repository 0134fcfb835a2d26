/** Small plots in text: dots of Braille patterns, two by four to a character. */

export interface PlotCurve {
  readonly x: ArrayLike<number>;
  readonly y: ArrayLike<number>;
}

export interface PlotOptions {
  /** Characters of the whole plot, labels included. */
  readonly width: number;
  readonly height: number;
  /** A band to mark, such as what noise allows. */
  readonly band?: readonly [low: number, high: number] | null;
  /** Text of an axis label. */
  readonly label: (value: number) => string;
}

/** U+2800 and the bits of its dots, from the top in the left and the right column. */
const BLANK = 0x2800;
const DOTS = [
  [0x01, 0x02, 0x04, 0x40],
  [0x08, 0x10, 0x20, 0x80],
] as const;

/**
 * Rows of text: on the left the greatest and least value, a line of `┈` at each edge of the band.
 * Values that are not finite are left out; without any, rows are blank.
 */
export function terminalPlot(
  curves: readonly PlotCurve[],
  { width, height, band = null, label }: PlotOptions,
): string[] {
  const xs = curves.flatMap(({ x, y }) => Array.from(x).filter((_, k) => Number.isFinite(y[k])));
  const ys = curves.flatMap(({ y }) => Array.from(y).filter(Number.isFinite));
  if (ys.length === 0) return Array.from({ length: height }, () => '');
  const [low, high] = rangeOf([...ys, ...(band ?? [])]);
  const [first, last] = [Math.min(...xs), Math.max(...xs)];
  const labels = [label(high), label(low)];
  const margin = Math.max(...labels.map((text) => text.length)) + 1;
  const columns = Math.max(1, width - margin);
  const cells = Array.from({ length: height }, () => new Uint8Array(columns));
  const rowOf = (y: number) => Math.round(((high - y) / (high - low)) * (4 * height - 1));
  for (const { x, y } of curves) {
    for (let k = 0; k < y.length; k++) {
      if (!Number.isFinite(y[k])) continue;
      const share = last > first ? (x[k] - first) / (last - first) : 0;
      const column = Math.round(share * (2 * columns - 1));
      const row = rowOf(y[k]);
      cells[row >> 2][column >> 1] |= DOTS[column & 1][row & 3];
    }
  }
  const edges = new Set((band ?? []).map((edge) => rowOf(edge) >> 2));
  return cells.map((row, r) => {
    const blank = edges.has(r) ? '┈' : ' ';
    const text = Array.from(row, (bits) => (bits ? String.fromCharCode(BLANK + bits) : blank));
    const name = r === 0 ? labels[0] : r === height - 1 ? labels[1] : '';
    return `${name.padStart(margin - 1)} ${text.join('')}`.trimEnd();
  });
}

/** Least and greatest value, a little apart even if all are the same. */
function rangeOf(values: readonly number[]): [number, number] {
  const low = values.reduce((a, b) => Math.min(a, b));
  const high = values.reduce((a, b) => Math.max(a, b));
  const room = Math.max((high - low) * 0.05, Math.abs(high) * 1e-6, 1e-300);
  return [low - room, high + room];
}
