import { expect, it } from 'vitest';
import { columns, signRoom } from '../../src/cli/columns.ts';
import { printable, shorten, wrap } from '../../src/cli/layout.ts';

it('wraps words and breaks only those that are longer than a line', () => {
  const text = `${'word '.repeat(30)}${'x'.repeat(200)} end`;
  const lines = wrap(text, '    ', '  → ').split('\n');
  expect(lines.every((line) => line.length <= 80)).toBe(true);
  expect(lines[0].startsWith('  → word')).toBe(true);
  expect(lines.slice(1).every((line) => line.startsWith('    '))).toBe(true);
  expect(
    lines
      .map((line) => line.slice(4))
      .join(' ')
      .replace(/x x/g, 'xx'),
  ).toBe(text);
});

it('keeps a number and its unit together', () => {
  const text = `${'a'.repeat(76)} 12\u00a0ms`;
  expect(wrap(text).split('\n')[1]).toBe('12 ms');
});

it('shortens long names in the middle and keeps their end', () => {
  const name = `/runs/${'deep/'.repeat(40)}snapshot_0042.bin`;
  const short = shorten(name, 80);
  expect(short).toHaveLength(80);
  expect(short.startsWith('/runs/deep')).toBe(true);
  expect(short.endsWith('/snapshot_0042.bin')).toBe(true);
  expect(shorten('short.bin', 80)).toBe('short.bin');
});

it('lets no control character reach the terminal', () => {
  expect(printable('a\u001b[31mb\nc\u009b')).toBe('a?[31mb?c?');
});

it('lines up columns without spaces at the ends of lines', () => {
  const text = columns(
    [
      ['a', '1'],
      ['long', '22'],
    ],
    ['left', 'right'],
    '  ',
  );
  expect(text).toBe('  a      1\n  long  22');
  expect(signRoom('1')).toBe(' 1');
  expect(signRoom('-1')).toBe('-1');
});
