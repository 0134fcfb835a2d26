/** The live view: fits a terminal, says what is known, and draws over itself. */
import { PassThrough } from 'node:stream';
import { expect, it } from 'vitest';
import { LiveView, watchPage } from '../../src/cli/watchView.ts';
import { NO_PAINT } from '../../src/cli/style.ts';
import { madeRecord } from './made.ts';

const records = Array.from({ length: 30 }, (_, k) =>
  madeRecord({ time: k, file: `run/s${k}.arrow` }),
);
const run = {
  folder: 'run/of/a/name/that/is/far/too/long/for/a/line/of/eighty/columns/by/itself',
  records,
  verdict: null,
  forecast: { settledAt: 31.25, error: 0.5, toldAt: 40 },
  notes: ['one', 'two\u001b[31m', 'three', 'four'],
};

it('is at most 80 columns and 24 rows, shows the last notes, and lets no escape through', () => {
  const page = watchPage(run, NO_PAINT);
  const lines = page.trimEnd().split('\n');
  expect(lines.length).toBeLessThanOrEqual(24);
  expect(Math.max(...lines.map((line) => line.length))).toBeLessThanOrEqual(80);
  expect(page).toContain('31.25 ± 0.50');
  expect(page).toContain('! four.');
  expect(page).not.toContain('one');
  expect(page).not.toContain('\u001b');
});

it('is drawn over what it drew before', async () => {
  const stream = new PassThrough();
  const view = new LiveView(stream, NO_PAINT);
  await view.show({ ...run, records: records.slice(0, 1) });
  await view.note('something');
  view.close();
  const text = String(stream.read());
  const [first, second] = text.split('\u001b[0J');
  expect(second).toContain('! something.');
  const up = Number(/\[(\d+)A/.exec(first)?.[1]);
  expect(first.split('\u001b')[0].split('\n').length - 1).toBe(up);
});
