import { describe, expect, it } from 'vitest';
import { main } from '../../src/cli/main.ts';
import { FORMATS, formatOf } from '../../src/cli/output.ts';
import { Collector, madeStreams } from './made.ts';

describe('the format of the output', () => {
  it.each([
    [undefined, undefined, 'table'],
    [undefined, 'a.json', 'json'],
    [undefined, 'a.NDJSON', 'ndjson'],
    [undefined, 'a.jsonl', 'ndjson'],
    [undefined, 'runs.csv/a.csv', 'csv'],
    [undefined, 'a.arrow', 'arrow'],
    [undefined, 'a.arrows', 'arrow'],
    [undefined, 'a.feather', 'arrow'],
    // The ending of a folder, a name without one, and an ending that says nothing.
    [undefined, 'runs.csv/a', 'table'],
    [undefined, 'csv', 'table'],
    [undefined, 'a.txt', 'table'],
    [undefined, 'a.constructor', 'table'],
    // What is said goes before what the ending says.
    ['csv', 'a.json', 'csv'],
    ['table', 'a.arrow', 'table'],
  ] as const)('asked %s, --out %s: %s', (asked, out, format) => {
    expect(formatOf(asked, out, FORMATS)).toBe(format);
  });

  it('is refused where the ending names one that the command does not have', () => {
    expect(formatOf(undefined, 'a.json', ['table', 'json'])).toBe('json');
    expect(() => formatOf(undefined, 'a.csv', ['table', 'json'])).toThrow(
      expect.objectContaining({ code: 'usage.format' }),
    );
    expect(formatOf('json', 'a.csv', ['table', 'json'])).toBe('json');
  });
});

it('Arrow is kept from a terminal, before anything is read', async () => {
  const streams = { ...madeStreams(), stdout: new Collector(true) };
  expect(await main(['measure', 'nowhere.bin', '--format', 'arrow'], streams)).toBe(2);
  expect(streams.stdout.text).toBe('');
  expect(streams.stderr.text).toContain('--out FILE');
  expect(streams.stderr.text).toContain('(usage.terminal)');
});
