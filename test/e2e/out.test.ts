/** Results in files and pipes: every format, whole or not at all. */
import { execFile, spawnSync } from 'node:child_process';
import {
  chmodSync,
  existsSync,
  mkdirSync,
  mkdtempSync,
  readdirSync,
  readFileSync,
  rmSync,
  writeFileSync,
} from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { tableFromIPC } from 'apache-arrow';
import { parse } from 'csv-parse/sync';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import type { MeasureRecord } from '../../src/index.ts';
import { BIN, ROOT, settlemark } from './run.ts';

let folder: string;
const at = (name: string): string => join(folder, name);
const SOLAR = readdirSync(join(ROOT, 'fixtures/solar/raw'))
  .filter((name) => name.endsWith('.bin'))
  .slice(0, 6)
  .map((name) => `fixtures/solar/raw/${name}`);
const solar = ['measure', ...SOLAR, '--quiet'];
let records: MeasureRecord[];

beforeAll(async () => {
  folder = mkdtempSync(join(tmpdir(), 'settlemark-out-'));
  chmodSync(folder, 0o755);
  const { out } = await settlemark([...solar, '--format', 'json']);
  records = JSON.parse(out) as MeasureRecord[];
  expect(records).toHaveLength(6);
});
afterAll(() => rmSync(folder, { recursive: true }));

/** Runs the program and gives what it writes to standard output as bytes. */
const bytesOf = (argv: string[]): Promise<Buffer> =>
  new Promise((resolve, reject) => {
    const options = { encoding: 'buffer', maxBuffer: 2 ** 26, cwd: ROOT } as const;
    execFile(process.execPath, [BIN, ...argv], options, (error, stdout) =>
      error ? reject(new Error(error.message)) : resolve(stdout),
    );
  });

describe('a table of records', () => {
  const files = () => records.map(({ file }) => file);
  const ratios = () => records.map(({ whole }) => whole.virialRatio);

  it('as CSV, in a pipe and in a file, is the same but for the clock', async () => {
    const piped = (await bytesOf([...solar, '--format', 'csv'])).toString();
    expect((await settlemark([...solar, '--out', at('a.csv')])).code).toBe(0);
    for (const text of [piped, readFileSync(at('a.csv'), 'utf8')]) {
      const rows: Record<string, string>[] = parse(text, { columns: true });
      expect(rows.map(({ file }) => file)).toEqual(files());
      expect(rows.map((row) => Number(row['whole.virialRatio']))).toEqual(ratios());
    }
  });

  it('as Arrow is a stream in a pipe and under .arrows, else a file', async () => {
    const piped = await bytesOf([...solar, '--format', 'arrow']);
    for (const name of ['a.arrows', 'a.arrow', 'a.feather'])
      expect((await settlemark([...solar, '--out', at(name)])).code).toBe(0);
    const [stream, file, feather] = ['a.arrows', 'a.arrow', 'a.feather'].map((name) =>
      readFileSync(at(name)),
    );
    for (const bytes of [piped, stream, file, feather]) {
      const table = tableFromIPC(bytes);
      expect([...(table.getChild('file') ?? [])]).toEqual(files());
      expect([...(table.getChild('whole.virialRatio') ?? [])]).toEqual(ratios());
    }
    // Source: Arrow columnar format, "IPC File Format": a file begins and ends with ARROW1.
    const isFile = (bytes: Buffer) =>
      bytes.subarray(0, 6).toString() === 'ARROW1' && bytes.subarray(-6).toString() === 'ARROW1';
    expect([piped, stream, file, feather].map(isFile)).toEqual([false, false, true, true]);
  });

  it('as CSV under another ending, because it was asked for', async () => {
    const argv = [...solar, '--format', 'csv', '--out', at('clash.json')];
    expect((await settlemark(argv)).code).toBe(0);
    expect(readFileSync(at('clash.json'), 'utf8').startsWith('record,file,time,')).toBe(true);
  });

  it('holds those that could be measured, and the exit code tells of the others', async () => {
    writeFileSync(at('cut.bin'), new Uint8Array(20));
    const argv = ['measure', at('cut.bin'), SOLAR[0], '--quiet'];
    const { code, err } = await settlemark([...argv, '--out', at('some.csv')]);
    expect(code).toBe(3);
    expect(err).toContain(at('cut.bin'));
    expect(parse(readFileSync(at('some.csv'), 'utf8'))).toHaveLength(2);
  });
});

describe('a file that cannot be written', () => {
  const failed = {
    code: 3,
    out: '',
    err: expect.stringMatching(/\(input\.cannotWrite\)/) as string,
  };

  it('is told before anything is measured', async () => {
    for (const name of ['no/such/folder/a.csv', 'cut.bin/a.csv', '.']) {
      const argv = ['measure', SOLAR[0], '--out', at(name)];
      const outcome = await settlemark(argv);
      expect(outcome).toMatchObject(failed);
      expect(outcome.err).not.toContain('layout.found');
      expect(outcome.err).not.toMatch(/\n +at /);
    }
  });

  it('is told by track before it measures, and may not be its own input', async () => {
    const far = await settlemark(['track', ...SOLAR, '--out', at('no/such/folder/a.json')]);
    expect(far).toMatchObject(failed);
    writeFileSync(at('own.ndjson'), records.map((record) => JSON.stringify(record)).join('\n'));
    const argv = ['track', at('own.ndjson'), '--format', 'json', '--out', at('own.ndjson')];
    const own = await settlemark(argv);
    expect(own).toMatchObject({ code: 2, out: '' });
    expect(own.err).toContain('(usage.outIsInput)');
  });

  // /dev/full refuses every write with ENOSPC (Linux manual page full(4)).
  it.skipIf(!existsSync('/dev/full'))('on a full device', async () => {
    for (const format of ['table', 'ndjson', 'csv', 'arrow']) {
      const outcome = await settlemark([...solar, '--format', format, '--out', '/dev/full']);
      expect(outcome).toMatchObject(failed);
      expect(outcome.err).toContain('the disk is full');
    }
  });

  // A file system of its own, seen by nobody else, where the system lets a user have one.
  const inNamespace = (script: string, ...argv: string[]) =>
    spawnSync('unshare', ['--map-root-user', '--mount', 'sh', '-c', script, 'sh', ...argv], {
      encoding: 'utf8',
      cwd: ROOT,
    });
  const canMount = inNamespace('mount -t tmpfs tmpfs /mnt').status === 0;

  // Permissions do not bind root, who therefore gives up the right to pass over them.
  const isRoot = process.getuid?.() === 0;
  const BOUND_BY_PERMISSIONS = [
    'setpriv',
    '--bounding-set=-dac_override',
    '--inh-caps=-dac_override',
  ];
  const canDropRights =
    spawnSync('setpriv', [...BOUND_BY_PERMISSIONS.slice(1), 'true']).status === 0;

  it.skipIf(!canMount)('on a small disk leaves the old file as it was', () => {
    mkdirSync(at('small'));
    const script = `
      mount -t tmpfs -o size=8k tmpfs "$1" && printf old > "$1/a.csv" || exit 99
      "$2" "$3" measure ${SOLAR.join(' ')} --quiet --out "$1/a.csv"; echo "exit $?"
      ls -A "$1"; cat "$1/a.csv"`;
    const { stdout, stderr } = inNamespace(script, at('small'), process.execPath, BIN);
    expect(stdout).toBe('exit 3\na.csv\nold');
    expect(stderr).toContain('the disk is full');
    expect(stderr).toContain('(input.cannotWrite)');
    // The same file does not fit: it is larger than the disk.
    expect(readFileSync(at('a.csv')).length).toBeGreaterThan(8192);
  });

  it.skipIf(!canMount)('on a disk that is read-only', () => {
    mkdirSync(at('fixed'));
    const script = `
      mount -t tmpfs -o ro tmpfs "$1" || exit 99
      "$2" "$3" measure ${SOLAR.join(' ')} --quiet --out "$1/a.csv"; echo "exit $?"`;
    const { stdout, stderr } = inNamespace(script, at('fixed'), process.execPath, BIN);
    expect(stdout).toBe('exit 3\n');
    expect(stderr).toContain('read-only');
  });

  it.skipIf(isRoot && !canDropRights)('in a folder that may not be written to', () => {
    mkdirSync(at('locked'));
    writeFileSync(at('locked/a.csv'), 'old');
    chmodSync(at('locked'), 0o555);
    const argv = [process.execPath, BIN, ...solar, '--out', at('locked/a.csv')];
    const [program = '', ...rest] = isRoot ? [...BOUND_BY_PERMISSIONS, ...argv] : argv;
    const options = { encoding: 'utf8', cwd: ROOT } as const;
    const { status, stderr } = spawnSync(program, rest, options);
    chmodSync(at('locked'), 0o755);
    expect({ status, stderr }).toMatchObject({ status: 3 });
    expect(stderr).toContain('permission denied');
    expect(readFileSync(at('locked/a.csv'), 'utf8')).toBe('old');
    expect(readdirSync(at('locked'))).toEqual(['a.csv']);
  });
});
