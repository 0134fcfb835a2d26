import { mkdirSync, mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { basename, join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import { measureFile } from '../../src/survey/measure.ts';
import { prepareSnapshots } from '../../src/survey/prepare.ts';
import { findSeries, type SeriesOptions } from '../../src/survey/series.ts';
import { crewOfOne } from '../../src/parallel/crew.ts';
import { writeArrow } from '../../src/snapshot/arrow/write.ts';
import { makeModel } from '../../src/models/make.ts';

const root = mkdtempSync(join(tmpdir(), 'settlemark-series-'));
afterAll(() => rmSync(root, { recursive: true }));

const LAYOUT = {
  settlemark: 'layout/1',
  headerBytes: 8,
  header: [{ name: 'time', type: 'float64', offset: 0 }],
  fields: ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'].map((name) => ({ name, type: 'float64' })),
};
const PAIR = [1, 0.5, 0, 0, 0, 0.7, 0, 1, -0.5, 0, 0, 0, -0.7, 0];

let runs = 0;
/** A folder of raw snapshots with these times in their headers, or without any header. */
function run(times: Readonly<Record<string, number | null>>, files: Record<string, string> = {}) {
  const folder = join(root, `run${runs++}`);
  mkdirSync(folder);
  const hasTimes = Object.values(times).some((time) => time !== null);
  if (hasTimes) writeFileSync(join(folder, 'layout.json'), JSON.stringify(LAYOUT));
  for (const [name, time] of Object.entries(times)) {
    const numbers = time === null ? PAIR : [time, ...PAIR];
    writeFileSync(join(folder, name), new Uint8Array(Float64Array.from(numbers).buffer));
  }
  for (const [name, text] of Object.entries(files)) writeFileSync(join(folder, name), text);
  return folder;
}
async function series(folder: string, options: SeriesOptions = {}) {
  const found = await findSeries([folder], options);
  return found.map(({ file, time }) => [basename(file), time?.value ?? null] as const);
}
const names = async (folder: string, options: SeriesOptions = {}) =>
  (await series(folder, options)).map(([name]) => name);
const codes = async (folder: string, options: SeriesOptions = {}) =>
  (await findSeries([folder], options)).flatMap(({ remarks }) => remarks.map(({ code }) => code));
const failure = (promise: Promise<unknown>) =>
  promise.then(
    () => expect.fail('nothing was thrown'),
    (reason: unknown) => reason as { code: string; message: string },
  );

const TIMELESS = { 'a_1.bin': null, 'a_2.bin': null, 'a_10.bin': null };

describe('order', () => {
  it('is that of the times in the headers', async () => {
    expect(await names(run({ 'a.bin': 3, 'b.bin': 1, 'c.bin': 2 }))).toEqual([
      'b.bin',
      'c.bin',
      'a.bin',
    ]);
  });

  it('is the natural one of names without times', async () => {
    expect(await names(run(TIMELESS))).toEqual(['a_1.bin', 'a_2.bin', 'a_10.bin']);
  });

  it('keeps what cannot be read behind its neighbour by name, for its error to be told', async () => {
    const folder = run({ 'a.bin': 2, 'c.bin': 1 }, { 'b.bin': 'cut' });
    expect(await names(folder)).toEqual(['c.bin', 'a.bin', 'b.bin']);
    expect(await names(folder, { from: 1.5 })).toEqual(['a.bin', 'b.bin']);
  });

  it('reads times from the schema of Arrow files and streams', async () => {
    const folder = run({});
    for (const [name, time] of [
      ['a.arrow', 2],
      ['b.arrows', 1],
    ] as const) {
      const made = makeModel({ model: 'plummer', count: 10, seed: 1 });
      await writeArrow(join(folder, name), { ...made, time });
    }
    expect(await names(folder)).toEqual(['b.arrows', 'a.arrow']);
  });
});

describe('times that repeat', () => {
  it('keep the last by name, with a remark', async () => {
    const folder = run({
      's_1.bin': 0,
      's_2.bin': 1,
      's_3.bin': 2,
      's_4.bin': 1,
      's_5.bin': 2,
      's_6.bin': 3,
    });
    expect(await names(folder)).toEqual(['s_1.bin', 's_4.bin', 's_5.bin', 's_6.bin']);
    const [, kept] = await findSeries([folder]);
    expect(kept.remarks.map(({ code }) => code)).toEqual(['time.repeated']);
    expect(kept.remarks[0].text).toMatch(/time 1 .*s_4\.bin is kept.*s_2\.bin is left out/);
  });

  it('are told within rounding', async () => {
    const folder = run({ 'a.bin': 0, 'b.bin': 0.1 + 0.2, 'c.bin': 0.3, 'd.bin': 1 });
    expect(await names(folder)).toEqual(['a.bin', 'c.bin', 'd.bin']);
  });

  it('are no repeats where all are at one time, as models are', async () => {
    const folder = run({ 'a.bin': 0, 'b.bin': 0 });
    expect(await names(folder)).toEqual(['a.bin', 'b.bin']);
    expect(await codes(folder)).toEqual([]);
  });
});

describe('times from a table', () => {
  it('that lies beside are found, and said so', async () => {
    const folder = run(TIMELESS, { 'times.csv': 'file,time\na_10.bin,0\na_1.bin,1\na_2.bin,2\n' });
    expect(await series(folder)).toEqual([
      ['a_10.bin', 0],
      ['a_1.bin', 1],
      ['a_2.bin', 2],
    ]);
    const [first] = await findSeries([folder]);
    expect(first.time).toEqual({ value: 0, source: 'times file', from: 'default' });
    expect(first.remarks.map(({ code }) => code)).toEqual(['time.found']);
    expect(await series(folder, { times: false })).toEqual([
      ['a_1.bin', null],
      ['a_2.bin', null],
      ['a_10.bin', null],
    ]);
  });

  it('go before the header, which is told where it differs', async () => {
    const folder = run(
      { 'a.bin': 5, 'b.bin': 6 },
      { 'times.csv': 'file,time\na.bin,7\nb.bin,6.0000001\n' },
    );
    const records = [];
    for (const snapshot of await findSeries([folder])) {
      records.push(await measureFile(snapshot, {}, crewOfOne()));
    }
    expect(records.map(({ time }) => time)).toEqual([6.0000001, 7]);
    const told = records.map(({ remarks }) => remarks.some(({ code }) => code === 'time.differs'));
    expect(told).toEqual([false, true]);
    expect(records[1].settings.time).toEqual({ value: 7, source: 'times file', from: 'default' });
  });

  it('that are named, by option or run file', async () => {
    const folder = run(TIMELESS, { 'clock.csv': 'file,time\na_1.bin,3\na_2.bin,2\na_10.bin,1\n' });
    const times = join(folder, 'clock.csv');
    const [byOption] = await findSeries([folder], { times });
    expect(byOption.time).toEqual({ value: 1, source: 'times file', from: 'option' });
    writeFileSync(join(folder, 'settlemark.json'), '{ "times": "clock.csv" }');
    const [byRunFile] = await findSeries([folder]);
    expect(byRunFile.time).toEqual({ value: 1, source: 'times file', from: 'run file' });
    // The caller decides about times altogether.
    expect(await series(folder, { interval: 5 })).toEqual([
      ['a_1.bin', 0],
      ['a_2.bin', 5],
      ['a_10.bin', 10],
    ]);
  });

  it('that lack a snapshot leave it to its header, with a remark', async () => {
    const folder = run({ 'a.bin': 5, 'b.bin': 6 }, { 'clock.csv': 'file,time\na.bin,7\n' });
    const found = await findSeries([folder], { times: join(folder, 'clock.csv') });
    expect(found.map(({ file, time }) => [basename(file), time?.value])).toEqual([
      ['b.bin', undefined],
      ['a.bin', 7],
    ]);
    expect(found[0].remarks.map(({ code }) => code)).toEqual(['time.missing']);
  });

  it('that have none of the snapshots are the wrong table', async () => {
    const folder = run(TIMELESS, { 'clock.csv': 'file,time\nz.bin,7\n' });
    const error = await failure(findSeries([folder], { times: join(folder, 'clock.csv') }));
    expect(error.code).toBe('input.timesNone');
  });
});

describe('rows of a table for files that are nowhere', () => {
  const TABLE = 'file,time\na_1.bin,3\na_2.bin,2\na_10.bin,1\ngone.bin,0\nold/b.bin,0.5\n';

  it('are told once, of a table that is named and of one that is found', async () => {
    const named = run(TIMELESS, { 'clock.csv': TABLE });
    for (const [folder, options] of [
      [named, { times: join(named, 'clock.csv') }],
      [run(TIMELESS, { 'times.csv': TABLE }), {}],
    ] as const) {
      const remarks = (await findSeries([folder], options)).flatMap((one) => one.remarks);
      const lost = remarks.filter(({ code }) => code === 'time.noFile');
      expect(lost).toHaveLength(1);
      expect(lost[0].text).toContain('2 row(s) for files that are not there: gone.bin, old/b.bin');
    }
  });

  it('are not those of snapshots that are there and were not asked for', async () => {
    const folder = run(TIMELESS, { 'times.csv': TABLE.split('gone')[0] });
    const some = ['a_1.bin', 'a_2.bin'].map((name) => join(folder, name));
    const remarks = (await prepareSnapshots(some)).flatMap((one) => one.remarks);
    expect(remarks.map(({ code }) => code)).toEqual(['time.found', 'time.found']);
  });
});

describe('snapshots in parts', () => {
  const PARTS = { a_1_0: 4, a_1_1: 4, a_2_0: 3, a_2_1: 3, a_10_0: 2, a_10_1: 2 };
  // The file that is written last counts: a layout with parts in place of the one without.
  const inParts = () =>
    run(PARTS, { 'layout.json': JSON.stringify({ ...LAYOUT, parts: 'a_*_{part}' }) });

  it('count once, and have the time of their header', async () => {
    const folder = inParts();
    expect(await names(folder)).toEqual(['a_10_0', 'a_2_0', 'a_1_0']);
    expect(await names(folder, { from: 3 })).toEqual(['a_2_0', 'a_1_0']);
  });

  it('are counted by an interval, of the call or of the run file', async () => {
    const folder = inParts();
    const expected = [
      ['a_1_0', 0],
      ['a_2_0', 0.5],
      ['a_10_0', 1],
    ];
    expect(await series(folder, { interval: 0.5 })).toEqual(expected);
    writeFileSync(join(folder, 'settlemark.json'), '{ "interval": 0.5 }');
    expect(await series(folder)).toEqual(expected);
    const [last] = await prepareSnapshots([join(folder, 'a_10_1')]);
    expect([basename(last.file), last.time?.value]).toEqual(['a_10_0', 1]);
  });

  it('may stand in a table by any of their parts', async () => {
    const folder = inParts();
    writeFileSync(join(folder, 'times.csv'), 'file,time\na_1_1,7\na_2_0,8\na_10_0,9\n');
    expect(await series(folder)).toEqual([
      ['a_1_0', 7],
      ['a_2_0', 8],
      ['a_10_0', 9],
    ]);
  });
});

describe('times from an interval', () => {
  it('count in the natural order of names', async () => {
    const folder = run(TIMELESS);
    expect(await series(folder, { interval: 0.5, start: 10 })).toEqual([
      ['a_1.bin', 10],
      ['a_2.bin', 10.5],
      ['a_10.bin', 11],
    ]);
    // Named in another order they are the same series.
    const files = ['a_10.bin', 'a_2.bin'].map((name) => join(folder, name));
    const prepared = await prepareSnapshots(files, { interval: 0.5 });
    expect(prepared.map(({ time }) => time?.value)).toEqual([0.5, 0]);
  });

  it('of a run file count in its folder, whatever is named', async () => {
    const folder = run(TIMELESS, { 'settlemark.json': '{ "interval": 0.5 }' });
    const [only] = await prepareSnapshots([join(folder, 'a_10.bin')]);
    expect(only.time).toEqual({ value: 1, source: 'interval', from: 'run file' });
    const [later] = await prepareSnapshots([join(folder, 'a_10.bin')], { start: 3 });
    expect(later.time?.value).toBe(4);
  });
});

describe('times from names', () => {
  it('are the number in them, or a step times an interval', async () => {
    const folder = run(TIMELESS);
    expect(await series(folder, { timePattern: 'a_{time}.bin' })).toEqual([
      ['a_1.bin', 1],
      ['a_2.bin', 2],
      ['a_10.bin', 10],
    ]);
    const steps = { timePattern: 'a_{step}.*', interval: 0.1, start: 1 };
    expect((await series(folder, steps)).map(([, time]) => time)).toEqual([1.1, 1.2, 2]);
  });

  it('that do not fit are told, and refused if none does', async () => {
    const folder = run({ 'a_1.bin': null, 'b.bin': null });
    expect(await codes(folder, { timePattern: 'a_{time}.bin' })).toEqual(['time.missing']);
    const error = await failure(findSeries([folder], { timePattern: 'snap_{time}' }));
    expect(error).toMatchObject({ code: 'usage.times' });
    expect(error.message).toContain('a_1.bin');
  });
});

describe('a part of a series', () => {
  const TEN = Object.fromEntries(Array.from({ length: 10 }, (_, k) => [`s${k}.bin`, k * 0.1]));

  it('lies between two times, both included within rounding', async () => {
    const folder = run(TEN);
    expect(await names(folder, { from: 0.3, to: 0.6 })).toEqual([
      's3.bin',
      's4.bin',
      's5.bin',
      's6.bin',
    ]);
    expect(await names(folder, { to: 0.1 })).toEqual(['s0.bin', 's1.bin']);
  });

  it('takes every n-th of what is left', async () => {
    const folder = run(TEN, { 'settlemark.json': '{ "every": 2, "from": 0.1 }' });
    expect(await names(folder)).toEqual(['s1.bin', 's3.bin', 's5.bin', 's7.bin', 's9.bin']);
    expect(await names(folder, { every: 4 })).toEqual(['s1.bin', 's5.bin', 's9.bin']);
    expect(await names(folder, { every: 100 })).toEqual(['s1.bin']);
  });

  it('that is empty says what times there are', async () => {
    const error = await failure(findSeries([run(TEN)], { from: 5 }));
    expect(error.code).toBe('unanswerable.emptySeries');
    expect(error.message).toMatch(/from 0 to 0\.9/);
  });

  it('needs times', async () => {
    const error = await failure(findSeries([run(TIMELESS)], { to: 5 }));
    expect(error.code).toBe('unanswerable.noTime');
    expect(error.message).toContain('a_1.bin');
  });
});

describe('settings of times and ranges that cannot be', () => {
  it.each<[SeriesOptions, code: string, part: RegExp]>([
    [{ every: 0 }, 'usage.range', /every.*found 0/],
    [{ every: 1.5 }, 'usage.range', /every.*1\.5/],
    [{ from: 2, to: 1 }, 'usage.range', /1 is before 2/],
    [{ from: NaN }, 'usage.range', /from.*NaN/],
    [{ interval: 0 }, 'usage.times', /--interval: found 0/],
    [{ interval: -1 }, 'usage.times', /--interval: found -1/],
    [{ start: 1 }, 'usage.times', /--start.*without an interval/],
    [{ interval: 1, start: Infinity }, 'usage.times', /--start: found Infinity/],
    [{ interval: 1, times: 't.csv' }, 'usage.times', /a table of times and an interval/],
    [{ interval: 1, timePattern: '{time}' }, 'usage.times', /an interval and a pattern/],
    [{ timePattern: '{step}' }, 'usage.times', /\{step\}.*without an interval/],
    [{ timePattern: 'snap' }, 'usage.times', /no placeholder/],
  ])('%j', async (options, code, part) => {
    const folder = run(TIMELESS);
    const error = await failure(findSeries([folder], options));
    expect(error.code).toBe(code);
    expect(error.message).toMatch(part);
    // The same in a run file, with its place.
    const settings = JSON.stringify(options);
    if (settings.includes('null')) return; // JSON has no NaN and no Infinity.
    writeFileSync(join(folder, 'settlemark.json'), settings);
    const inFile = await failure(findSeries([folder]));
    expect(inFile.code).toBe('usage.runFileInvalid');
    expect(inFile.message).toContain('settlemark.json, line 1, column ');
  });
});
