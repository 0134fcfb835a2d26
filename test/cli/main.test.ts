import { describe, expect, it } from 'vitest';
import { bugText, reportFailure } from '../../src/cli/failure.ts';
import { main } from '../../src/cli/main.ts';
import { startProgress } from '../../src/cli/progress.ts';
import { InputError, InterruptedError, UnanswerableError, UsageError } from '../../src/errors.ts';
import { Collector, madeStreams } from './made.ts';

const run = async (...argv: string[]) => {
  const streams = madeStreams();
  const code = await main(argv, streams);
  return { code, out: streams.stdout.text, err: streams.stderr.text };
};

const MAKE = ['make', 'plummer', '--count', '5', '--out', 'x.bin'];

describe('wrong usage ends with 2, nothing on stdout, and the nearest name', () => {
  it.each([
    [['measure', '--sofening', '0.1', 'x.bin'], '--softening', 'usage.unknownOption'],
    [['make', 'plummer', '--cuont', '5'], '--count', 'usage.unknownOption'],
    [['mesure', 'x.bin'], 'measure', 'usage.unknownCommand'],
    [['measure'], 'snapshot', 'usage.missingArgument'],
    [['measure', 'x.bin', '--format', 'xml'], 'ndjson, csv, arrow', 'usage.invalidArgument'],
    [['describe', 'x.bin', '--out', 'x.csv'], '--format', 'usage.format'],
    [['measure', 'x.bin', '--gravity', 'one'], '--gravity "one"', 'usage.value'],
    [['measure', 'x.bin', '--columns', 'mas=w'], 'mass', 'usage.unknownField'],
    [['measure', 'no-such.bin', '--with', 'pairs,shels'], 'shells', 'usage.with'],
    [['measure', 'x.bin', '--shells', '2.5'], '--shells "2.5"', 'usage.value'],
    [['make', 'plummer', '--out', 'x.bin'], '--count', 'usage.missingOption'],
    [['make', 'plummer', '--count', '5'], '--out', 'usage.missingOption'],
    [['make', 'plummer', '--count', '5', '--out', 'x.txt'], '--format', 'usage.format'],
    [['make', 'plumer', '--count', '5', '--out', 'x.bin'], 'plummer', 'usage.model'],
    [
      ['make', 'king', '--count', '5', '--out', 'x.bin'],
      '--central-potential',
      'usage.modelOption',
    ],
    [['make', 'x', '--second', 'modle=king'], 'Did you mean model', 'usage.value'],
    [['make', 'x', '--second', 'king'], 'key=value', 'usage.value'],
    [['make', 'x', '--second', 'count=1.5'], '--second count "1.5"', 'usage.value'],
    [['make', 'x', '--companion', 'mass=heavy'], '--companion mass "heavy"', 'usage.value'],
    [['make', 'x', '--companion', 'mass=1,mass=2'], 'twice', 'usage.value'],
    [['make', 'x', '--relative-velocity', 'fast'], '--relative-velocity "fast"', 'usage.value'],
    [[...MAKE, '--second', 'model=jaffe'], '--second lacks count', 'usage.missingOption'],
    [[...MAKE, '--second', 'count=5'], '--second lacks model', 'usage.missingOption'],
    [[...MAKE, '--binaries', '0.1'], '--semi-major-axis', 'usage.missingOption'],
    [[...MAKE, '--semi-major-axis', '1,2'], '--binaries', 'usage.missingOption'],
    [
      [...MAKE, '--binaries', '0.1', '--semi-major-axis', '1'],
      '--semi-major-axis "1"',
      'usage.value',
    ],
    [[...MAKE, '--escaper-speed', '1'], '--escapers', 'usage.missingOption'],
    [[...MAKE, '--companion'], '--separation', 'usage.encounter'],
    [[...MAKE, '--separation', '3'], '--companion', 'usage.encounter'],
    [[...MAKE, '--anisotropy-radius', '0.1'], 'Give at least 0.75', 'usage.distributionFunction'],
  ])('%j', async (argv, hint, code) => {
    const result = await run(...argv);
    expect(result).toMatchObject({ code: 2, out: '' });
    expect(result.err).toContain(hint);
    expect(result.err).toContain(`(${code})`);
  });

  it('prints the help on stderr if no command is given', async () => {
    const { code, out, err } = await run();
    expect({ code, out }).toEqual({ code: 2, out: '' });
    expect(err).toContain('Usage: settlemark');
  });
});

describe('help and version are results', () => {
  it.each([['--help'], ['help', 'measure'], ['make', '--help']])('%s %s', async (...argv) => {
    const { code, out, err } = await run(...argv.filter(Boolean));
    expect({ code, err }).toEqual({ code: 0, err: '' });
    expect(out).toContain('Usage: settlemark');
    expect(out.split('\n').filter((line) => line.length > 80)).toEqual([]);
  });

  it('--version', async () => {
    expect(await run('--version')).toEqual({ code: 0, out: '0.1.0\n', err: '' });
  });
});

describe('failures', () => {
  it.each([
    [new UsageError('usage.units', 'no such units', 'take others'), 2],
    [new InputError('input.notFound', 'no such file', 'look again'), 3],
    [new UnanswerableError('unanswerable.emptySeries', 'nothing there', 'look elsewhere'), 4],
  ])('%s', async (error, code) => {
    const streams = madeStreams();
    expect(await reportFailure(error, streams)).toBe(code);
    expect(streams.stderr.text).toContain(error.message);
    expect(streams.stderr.text.toLowerCase()).toContain(`→ ${error.remedy}`);
    expect(streams.stderr.text).toContain(`(${error.code})`);
    expect(streams.stderr.text).not.toContain('at ');
    expect(streams.stdout.text).toBe('');
  });

  it('an interruption ends with 130', async () => {
    expect(await reportFailure(new InterruptedError(), madeStreams())).toBe(130);
  });

  it('a bug ends with 5 and says how to report it; its stack shows only when asked for', async () => {
    const quiet = madeStreams();
    expect(await reportFailure(new TypeError('x is undefined'), quiet)).toBe(5);
    expect(quiet.stderr.text).toBe(`${bugText(new TypeError('x is undefined'))}\n`);
    const loud = madeStreams({ SETTLEMARK_DEBUG: '1' });
    await reportFailure(new TypeError('x is undefined'), loud);
    expect(loud.stderr.text).toMatch(/\n +at /);
  });
});

describe('progress', () => {
  const crew = { threads: 1, progress: () => ({ done: 1, jobs: 4 }) } as never;

  it('says nothing within the first second, on a pipe, or when quiet', async () => {
    const [early, pipe, quiet] = [new Collector(true), new Collector(false), new Collector(true)];
    const all = [
      startProgress(early, false, crew),
      startProgress(pipe, false, crew),
      startProgress(quiet, true, crew),
    ];
    all[0].stage('a.bin', 'forces', null);
    all[0].close();
    await new Promise((resolve) => setTimeout(resolve, 1200));
    for (const progress of all.slice(1)) progress.stage('a.bin', 'forces', null);
    for (const progress of all) progress.close();
    expect([early.text, pipe.text, quiet.text]).toEqual(['', '', '']);
  });

  it('shows the stage and its share after a second, and takes the line away', async () => {
    const terminal = new Collector(true);
    const progress = startProgress(terminal, false, crew);
    progress.stage('a.bin', 'forces', null);
    await new Promise((resolve) => setTimeout(resolve, 1400));
    progress.close();
    expect(terminal.text).toContain('a.bin: summing forces 25 %');
    expect(terminal.text.endsWith('\r\u001b[2K')).toBe(true);
  });
});
