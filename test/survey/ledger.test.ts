/** The ledger: measures only what is new, survives crashes and strangers, and never gives a wrong record. */
import { spawn } from 'node:child_process';
import {
  appendFileSync,
  copyFileSync,
  mkdirSync,
  mkdtempSync,
  readFileSync,
  renameSync,
  rmSync,
  statSync,
  truncateSync,
  utimesSync,
  writeFileSync,
} from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import {
  makeModel,
  measureFiles,
  openLedger,
  startCrew,
  writeSnapshot,
  type MeasureRecord,
  type SurveyOptions,
} from '../../dist/index.js';
import { Random } from '../../src/numerics/random.ts';
import { BIN, settlemark } from '../e2e/run.ts';

const crew = startCrew(2);
let folder = '';
let run = '';
let ledgerPath = '';
const COUNT = 12;
const paths = () => Array.from({ length: COUNT }, (_, k) => join(run, `s${k}.bin`));

async function writeModel(path: string, seed: number, time: number): Promise<void> {
  const particles = await makeModel({ model: 'plummer', count: 60, seed, masses: 'equal' });
  const format = path.endsWith('.bin') ? 'raw' : 'arrow';
  await writeSnapshot(path, { ...particles, time }, format);
}

/** A run whose files say their times. */
async function writeRun(name: string, count: number): Promise<string[]> {
  mkdirSync(join(run, name));
  const files = Array.from({ length: count }, (_, k) => join(run, name, `s${k}.arrow`));
  await Promise.all(files.map((path, k) => writeModel(path, k + 1, k)));
  return files;
}

beforeAll(() => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-ledger-'));
});
afterAll(async () => {
  await crew.close();
  rmSync(folder, { recursive: true });
});
beforeEach(async () => {
  run = mkdtempSync(join(folder, 'run-'));
  ledgerPath = join(run, 'settlemark.ledger');
  await Promise.all(paths().map((path, k) => writeModel(path, k + 1, k)));
});

/** Measures the run with a ledger; what was known, and the records. */
async function survey(options: SurveyOptions = {}, files = paths(), path = ledgerPath) {
  const ledger = await openLedger(path);
  const known: boolean[] = [];
  const records: (MeasureRecord | null)[] = [];
  for await (const outcome of await measureFiles(files, options, crew, ledger)) {
    known.push(outcome.isKnown === true);
    records.push(outcome.record);
  }
  await ledger.close();
  const codes = ledger.remarks.map(({ code }) => code);
  return { known: known.filter(Boolean).length, records, codes };
}

/** What makes the files look as if they had been there for long: clocks that tick slowly are not trusted. */
function lookOld(line: string): string {
  const head = JSON.parse(line.slice(0, line.indexOf(',"record":')) + '}') as { seen: number };
  return line.replace(`"seen":${head.seen}`, `"seen":${head.seen + 10_000}`);
}

describe('a second look', () => {
  it('measures nothing again and gives the same records', async () => {
    // Files that changed just before they were seen are read again, and noted once they are old.
    await new Promise((resolve) => setTimeout(resolve, 2100));
    const first = await survey();
    expect(first.known).toBe(0);
    const second = await survey();
    expect(second).toEqual({ ...first, known: COUNT });
    expect(readFileSync(ledgerPath, 'utf8').trim().split('\n')).toHaveLength(COUNT);
  });

  it('gives a snapshot the time that is stated now, and what is found about it now', async () => {
    const timesOf = (made: Awaited<ReturnType<typeof survey>>) => made.records.map((r) => r?.time);
    const count = Array.from({ length: COUNT }, (_, k) => k);
    const first = await survey({ interval: 1 });
    expect(timesOf(first)).toEqual(count);
    const twice = await survey({ interval: 2 });
    expect(timesOf(twice)).toEqual(count.map((k) => 2 * k));
    expect(timesOf(await survey())).toEqual(count.map(() => null));
    expect(await survey({ interval: 1 })).toEqual({ ...first, known: COUNT });
    // A row that is lost since is told, though nothing is measured again.
    const rows = count.map((k) => `s${k}.bin,${k}\n`).join('');
    const times = join(run, 'clock.csv');
    writeFileSync(times, `file,time\n${rows}`);
    await survey({ times });
    writeFileSync(times, `file,time\n${rows}gone.bin,99\n`);
    const { known, records } = await survey({ times });
    expect(known).toBe(COUNT);
    expect(records[0]?.remarks.map(({ code }) => code)).toContain('time.noFile');
  });

  it('measures what is new and what has changed, even if length and date were kept', async () => {
    await survey();
    await writeModel(join(run, 's3.bin'), 99, 3);
    const { atime, mtime } = statSync(join(run, 's4.bin'));
    await writeModel(join(run, 's4.bin'), 98, 4);
    utimesSync(join(run, 's4.bin'), atime, mtime);
    const again = await survey();
    expect(again.known).toBe(COUNT - 2);
    const fresh = await survey({}, paths(), join(run, 'other.ledger'));
    const ratios = (list: (MeasureRecord | null)[]) => list.map((r) => r?.whole.virialRatio);
    expect(ratios(again.records)).toEqual(ratios(fresh.records));
  });

  it('does not trust dates where it need not read the bytes: an entry seen long after the change is enough', async () => {
    await survey();
    const lines = readFileSync(ledgerPath, 'utf8').trim().split('\n').map(lookOld);
    writeFileSync(ledgerPath, `${lines.join('\n')}\n`);
    const { known } = await survey();
    expect(known).toBe(COUNT);
    // Nothing had to be read, so nothing was noted anew.
    expect(readFileSync(ledgerPath, 'utf8').trim().split('\n')).toHaveLength(COUNT);
  });

  it('measures again if an option changes a figure, and not if none does', async () => {
    await survey();
    expect((await survey({ softening: 0.1 })).known).toBe(0);
    expect((await survey({ softening: 0.1 })).known).toBe(COUNT);
    expect((await survey({ fractions: [0.3] })).known).toBe(0);
    expect((await survey()).known).toBe(COUNT);
  });

  it('measures again if the layout beside the data changes', async () => {
    await survey();
    const layout = {
      settlemark: 'layout/1',
      byteOrder: 'little',
      markers: 'none',
      headerBytes: 0,
      header: [],
      arrangement: 'interleaved',
      fields: [
        { name: 'mass', type: 'float64' },
        { name: 'position', type: 'float64', width: 3, scale: 2 },
        { name: 'velocity', type: 'float64', width: 3 },
      ],
    };
    const first = await survey();
    expect(first.known).toBe(COUNT);
    writeFileSync(join(run, 'layout.json'), JSON.stringify(layout));
    const scaled = await survey();
    expect(scaled.known).toBe(0);
    const ratio =
      (scaled.records[0]?.halfMassRadius ?? 0) / (first.records[0]?.halfMassRadius ?? 1);
    expect(ratio).toBeCloseTo(2, 9);
  });

  it('knows files by their bytes when folder or names have changed', async () => {
    await survey();
    renameSync(join(run, 's0.bin'), join(run, 'renamed.bin'));
    const moved = `${run}-moved`;
    renameSync(run, moved);
    run = moved;
    ledgerPath = join(run, 'settlemark.ledger');
    const files = [...paths().slice(1), join(run, 'renamed.bin')];
    const { known, records } = await survey({}, files);
    expect(known).toBe(COUNT);
    expect(records.map((record) => record?.file)).toEqual(files);
  });
});

describe('a ledger that was damaged', () => {
  it('loses only the line that was torn, wherever it was cut', async () => {
    const whole = await survey();
    const { size } = statSync(ledgerPath);
    const random = new Random(5);
    for (let k = 0; k < 10; k++) {
      truncateSync(ledgerPath, size - 1 - Math.floor(random.uniform() * 1500));
      const again = await survey();
      expect(again.known).toBeGreaterThanOrEqual(COUNT - 1);
      expect(again.records.map((r) => r?.whole)).toEqual(whole.records.map((r) => r?.whole));
      writeFileSync(ledgerPath, readFileSync(ledgerPath).subarray(0, size));
    }
  });

  it('says so, and measures again what it lost', async () => {
    await survey();
    const lines = readFileSync(ledgerPath, 'utf8').trim().split('\n');
    lines[2] = lines[2].slice(0, 700);
    writeFileSync(ledgerPath, lines.join('\n') + '\n');
    const again = await survey();
    expect([again.known, again.codes]).toEqual([COUNT - 1, ['ledgerTorn']]);
  });

  it('keeps lines of another version and sets them aside with a remark', async () => {
    await survey();
    const text = readFileSync(ledgerPath, 'utf8');
    const other = text.replaceAll('"ledger":1', '"ledger":7');
    writeFileSync(ledgerPath, other);
    const again = await survey();
    expect([again.known, again.codes]).toEqual([0, ['ledgerOfOtherVersion']]);
    expect(readFileSync(ledgerPath, 'utf8').startsWith(other)).toBe(true);
    writeFileSync(ledgerPath, text.replaceAll('"figures":1', '"figures":0'));
    expect(await survey()).toMatchObject({ known: 0, codes: ['ledgerOfOtherVersion'] });
  });

  it('is left alone if it is something else', async () => {
    writeFileSync(ledgerPath, 'my notes\nabout this run\n');
    await expect(survey()).rejects.toMatchObject({ code: 'input.notALedger' });
    expect(readFileSync(ledgerPath, 'utf8')).toBe('my notes\nabout this run\n');
  });

  it('does not keep what changed while it was measured', async () => {
    const ledger = await openLedger(ledgerPath);
    const outcomes = await measureFiles(paths().slice(0, 1), {}, crew, ledger);
    // The first file is looked at when the first outcome is asked for, and changes before it is kept.
    const keep = ledger.keep.bind(ledger);
    ledger.keep = async (...args) => {
      appendFileSync(join(run, 's0.bin'), '');
      copyFileSync(join(run, 's1.bin'), join(run, 's0.bin'));
      await keep(...args);
    };
    await outcomes.next();
    await ledger.close();
    expect((await openLedger(ledgerPath)).size).toBe(0);
  });
});

it('is written by two processes at once without harm', async () => {
  const files = await writeRun('two', 20);
  const argv = ['track', join(run, 'two'), '--quiet', '--format', 'json'];
  const [a, b] = await Promise.all([settlemark(argv), settlemark(argv)]);
  expect([a.code, b.code]).toEqual([0, 0]);
  expect(JSON.parse(a.out)).toEqual(JSON.parse(b.out));
  const { known, codes } = await survey({}, files, join(run, 'two', 'settlemark.ledger'));
  expect([known, codes]).toEqual([files.length, []]);
});

it('survives 50 kills at any moment: what was kept is whole, and the end is the same', async () => {
  const files = await writeRun('many', 30);
  const path = join(run, 'many', 'settlemark.ledger');
  const argv = [BIN, 'track', join(run, 'many'), '--quiet', '--threads', '1'];
  const random = new Random(11);
  /** Runs until the end or until it is killed; how long it took [ms]. */
  const killedAfter = async (delay: number) => {
    const begin = performance.now();
    const child = spawn(process.execPath, argv, { stdio: 'ignore' });
    const timer = setTimeout(() => child.kill('SIGKILL'), delay);
    await new Promise((resolve) => child.once('exit', resolve));
    clearTimeout(timer);
    return performance.now() - begin;
  };
  const duration = await killedAfter(60_000);
  rmSync(path);
  let kept = 0;
  const sizes: number[] = [];
  for (let kill = 0; kill < 50; kill++) {
    await killedAfter(duration * (0.3 + 0.7 * random.uniform()));
    const ledger = await openLedger(path);
    expect(ledger.size).toBeGreaterThanOrEqual(kept);
    sizes.push(ledger.size - kept);
    kept = ledger.size;
    if (kept === files.length && kill < 49) {
      rmSync(path);
      kept = 0;
    }
  }
  // Some were killed on the way, not all before they began or after they had ended.
  expect(sizes.filter((size) => size > 0 && size < files.length).length).toBeGreaterThan(0);
  const end = await survey({}, files, path);
  const fresh = await survey({}, files, join(run, 'fresh.ledger'));
  expect(kept).toBeGreaterThan(0);
  expect(end.known).toBe(kept);
  expect(end.records.map((r) => r?.whole)).toEqual(fresh.records.map((r) => r?.whole));
}, 300_000);
