/** Small plots: every value is where its axis says. No source: what a plot is. */
import { describe, expect, it } from 'vitest';
import { terminalPlot } from '../../src/figures/terminalPlot.ts';

const label = (value: number): string => value.toFixed(1);
const size = { width: 24, height: 5, label };

describe('a plot', () => {
  it('has its size, the extremes on its axis and a dot for each value', () => {
    const x = Array.from({ length: 40 }, (_, k) => k);
    const rows = terminalPlot([{ x, y: x }], size);
    expect(rows).toHaveLength(5);
    expect(rows.every((row) => row.length <= 24)).toBe(true);
    expect([rows[0].trim().split(' ')[0], rows[4].trim().split(' ')[0]]).toEqual(['41.0', '-2.0']);
    // A rising line: each row begins further left than the one above it.
    const begin = rows.map((row) => row.search(/[\u2801-\u28ff]/));
    expect(begin).toEqual([...begin].sort((a, b) => b - a));
    const dots = rows.join('').match(/[\u2801-\u28ff]/g) ?? [];
    const bits = dots.map((c) =>
      [...(c.charCodeAt(0) - 0x2800).toString(2)].filter((b) => b === '1'),
    );
    expect(bits.flat().length).toBeGreaterThan(30);
  });

  it('marks the edges of a band where no curve is', () => {
    const rows = terminalPlot([{ x: [0, 1], y: [0, 10] }], { ...size, band: [4, 6] });
    expect(rows.filter((row) => row.includes('┈')).length).toBeGreaterThan(0);
  });

  it('leaves out what is no number, and bears one value and none', () => {
    expect(terminalPlot([{ x: [0, 1], y: [NaN, NaN] }], size)).toEqual(['', '', '', '', '']);
    const one = terminalPlot([{ x: [3], y: [7] }], size);
    expect(one.join('')).toMatch(/[\u2801-\u28ff]/);
    expect(one.join('')).not.toContain('NaN');
  });
});
