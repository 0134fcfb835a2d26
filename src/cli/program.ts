/** The commands and their options; each command's work is loaded when it is called. */
import { readFileSync } from 'node:fs';
import { Command, Option } from 'commander';
import type { CompareCommandOptions } from './compare.ts';
import type { ConvertCommandOptions } from './convert.ts';
import type { DemoOptions } from './demo.ts';
import type { DescribeOptions } from './describe.ts';
import type { GateOptions } from './gate.ts';
import type { MakeCommandOptions } from './make.ts';
import type { MeasureCommandOptions } from './measure.ts';
import type { TrackOptions } from './track.ts';
import type { WatchOptions } from './watch.ts';
import { modelling } from './makeOptions.ts';
import { integerOf, listOf, numberOf, softeningOf, vectorOf, wholeOf, wordsOf } from './parse.ts';
import type { Streams } from './streams.ts';
import type { ExitCode } from '../errors.ts';

const KERNELS = ['none', 'plummer', 'spline'] as const;
const ANSWERS = `Exit codes: 0 done, 1 a rule fails or a run differs, 2 wrong usage,
3 input unusable, 4 no answer from this input, 5 internal error,
130 interrupted.`;

const GATE_ANSWERS = `Exit codes: 0 passed, 1 a rule fails (with --strict also if one cannot be
told), 2 wrong usage or rules, 3 input unusable, 4 no snapshots, or too few.`;
const append = (value: string, before: readonly string[] = []): string[] => [...before, value];

/**
 * Builds the program.
 * @param done - gets the exit code of the command that ran
 */
export function buildProgram(streams: Streams, done: (code: ExitCode) => void): Command {
  const program = new Command('settlemark')
    .description(
      'Is an N-body run in virial equilibrium, and can it be trusted? Measures T, U and 2T/|U| of snapshots, with errors.',
    )
    .version(packageVersion(), '--version', 'print the version')
    .helpOption('--help', 'print this help')
    .helpCommand('help [command]', 'print the help of a command')
    .exitOverride()
    .configureOutput({
      writeOut: (text) => void streams.stdout.write(text),
      writeErr: (text) => void streams.stderr.write(text),
      outputError: () => undefined, // Told by reportFailure, like all other errors.
      getOutHelpWidth: () => 80,
      getErrHelpWidth: () => 80,
    })
    .addHelpText('after', `\n${ANSWERS}`);

  reading(program.command('describe <file...>'))
    .description('say what is in a file: columns, types, count, time, units, first findings')
    .addOption(formats(['table', 'json']))
    .addOption(new Option('--out <file>', 'write to a file instead of standard output'))
    .action(async (files: string[], options: DescribeOptions) => {
      done(await (await import('./describe.ts')).describe(files, options, streams));
    });

  following(measuring(reading(program.command('measure <snapshot...>'))))
    .description('measure snapshots: energies, virial ratio, radii, times, each with its error')
    .addOption(formats(['table', 'json', 'ndjson', 'csv', 'arrow']))
    .addOption(new Option('--out <file>', 'write to a file; its ending may name the format'))
    .option('--quiet', 'no progress and no remarks on standard error')
    .action(async (snapshots: string[], options: MeasureCommandOptions) => {
      done(await (await import('./measure.ts')).measure(snapshots, options, streams));
    });

  following(measuring(reading(program.command('track <run...>'))))
    .description('say whether a run has settled, since when, and on what evidence')
    .addOption(formats(['table', 'json']))
    .addOption(new Option('--out <file>', 'write to a file; its ending may name the format'))
    .option('--ledger <file>', 'where records are kept (settlemark.ledger in the folder)')
    .option('--no-ledger', 'keep no records, and measure all anew')
    .option('--quiet', 'no progress on standard error')
    .action(async (inputs: string[], options: TrackOptions) => {
      done(await (await import('./track.ts')).track(inputs, options, streams));
    });

  timing(measuring(reading(program.command('watch <folder>'))))
    .description('follow a running simulation: records, live verdict, forecast')
    .option('--rules <file|name>', 'end with code 1 once one can no longer pass', append)
    .option('--until <what>', 'end once it is settled, or decided, or at a time')
    .option('--on-verdict <cmd>', 'run it with the verdict as JSON when that changes')
    .option('--poll <s>', 'seconds between two looks (2)', numberOf('--poll'))
    .option('--still <s>', 'seconds without change before a file is read (1)', numberOf('--still'))
    .addOption(formats(['table', 'ndjson']))
    .option('--ledger <file>', 'where records are kept (settlemark.ledger in the folder)')
    .option('--no-ledger', 'keep no records')
    .option('--quiet', 'no notes on standard error, and no live view')
    .action(async (folder: string, options: WatchOptions) => {
      done(await (await import('./watch.ts')).watch(folder, options, streams));
    });

  following(measuring(reading(program.command('compare <run...>')), false))
    .description('say whether runs are statistically the same as reference runs')
    .option('--with <run...>', 'reference runs: folders, records, or a stored reference')
    .option('--store <file>', 'keep the references (without --with, the runs) in a file')
    .option(
      '--false-alarm <rate>',
      'of correct runs called different (0.05)',
      numberOf('--false-alarm'),
    )
    .option('--windows <n>', 'parts of the common time (4)', wholeOf('--windows', 1))
    .addOption(formats(['table', 'json']))
    .addOption(new Option('--out <file>', 'write to a file; its ending may name the format'))
    .option('--no-ledger', 'keep no records, and measure all anew')
    .option('--quiet', 'no progress on standard error')
    .addHelpText('after', '\nExit code 0: the same, 1: different.')
    .action(async (runs: string[], options: CompareCommandOptions) => {
      done(await (await import('./compare.ts')).compare(runs, options, streams));
    });

  following(measuring(reading(program.command('gate [run...]'))))
    .description('judge snapshots or a run by rules: the exit code tells whether they pass')
    .option(
      '--rules <file|name>',
      'rules in JSON or YAML, or built-in ones; may be repeated',
      append,
    )
    .option('--list [name]', 'list the built-in rules, or print one set as a file to start from')
    .option('--ledger <file>', 'where records are kept (settlemark.ledger in the folder)')
    .option('--no-ledger', 'keep no records, and measure all anew')
    .option('--strict', 'what cannot be told fails, too')
    .option('--junit <file>', 'also write JUnit XML')
    .option('--markdown <file>', 'also write Markdown for a merge request')
    .addOption(formats(['table', 'json']))
    .addOption(new Option('--out <file>', 'write to a file; its ending may name the format'))
    .option('--quiet', 'no progress and no warnings on standard error')
    .addHelpText('after', `\n${GATE_ANSWERS}`)
    .action(async (inputs: string[], options: GateOptions) => {
      done(await (await import('./gate.ts')).gate(inputs, options, streams));
    });

  modelling(making(program.command('make <model>')))
    .description(
      'make a snapshot of an equilibrium model: plummer, hernquist, jaffe, dehnen, king or uniform',
    )
    .action(async (model: string, options: MakeCommandOptions) => {
      done(await (await import('./make.ts')).make(model, options, streams));
    });

  reading(program.command('convert <file> <new-file>'))
    .description('write a snapshot in another format or layout, and check that nothing is lost')
    .addOption(
      new Option('--format <name>', 'format of the new file; its ending may name it').choices([
        'raw',
        'arrow',
      ]),
    )
    .option('--to-layout <file>', 'layout of a raw file to write (one that fits, put beside it)')
    .addOption(
      new Option('--precision <type>', 'type of real numbers (the one they have)').choices([
        'float32',
        'float64',
      ]),
    )
    .option('--drop <name,...>', 'columns and facts that may be lost')
    .option('--round', 'numbers may be rounded to the types of --to-layout')
    .addOption(threads())
    .option('--quiet', 'say nothing about the file written')
    .action(async (from: string, to: string, options: ConvertCommandOptions) => {
      done(await (await import('./convert.ts')).convert(from, to, options, streams));
    });

  program
    .command('demo')
    .description('the solar system, 100,000 stars at rest, and 2,000 that fall together')
    .option('--out <folder>', 'keep the snapshots of the run')
    .option('--quiet', 'no progress on standard error')
    .addOption(threads())
    .action(async (options: DemoOptions) => {
      done(await (await import('./demo.ts')).demo(options, streams));
    });
  return program;
}

function reading(command: Command): Command {
  return command
    .option('--layout <file>', 'layout of a raw binary snapshot (JSON)')
    .option('--columns <name=column,...>', 'which column of the file is meant by which name')
    .option('--run-file <file>', 'defaults of these options (settlemark.json in the folder)')
    .option('--no-run-file', 'do not look for a run file');
}

/** @param extras - whether `--with` names further quantities */
function measuring(command: Command, extras = true): Command {
  if (extras) {
    command.option('--with <name,...>', 'also inertia, shells, profiles, pairs, or all', wordsOf);
  }
  return command
    .option('--only <component>', 'only the bodies of this component')
    .option('--group <n>', 'only the bodies of this group', integerOf('--group'))
    .option('--within <R>', 'only the bodies within this radius', numberOf('--within'))
    .option('--about <x,y,z>', 'centre of that radius (the densest)', vectorOf('--about'))
    .option('--units <name|file>', 'unit system: natural, kpc-kms-msun, ..., or FILE.json; sets G')
    .option('--gravity <G>', 'constant of gravitation', numberOf('--gravity'))
    .option(
      '--softening <length|column>',
      'Plummer-equivalent length, or a column of them',
      softeningOf('--softening'),
    )
    .addOption(kernel())
    .option('--error <E>', 'relative error wanted of U (1e-5)', numberOf('--error'))
    .option('--exact', 'direct sums over all pairs')
    .option('--fractions <f,...>', 'mass fractions of Lagrangian radii', listOf('--fractions'))
    .addOption(
      new Option('--centre <method>', 'what radii are about (density)').choices([
        'density',
        'shrinking',
        'mass',
        'potential',
      ]),
    )
    .addOption(
      new Option('--forces <origin>', 'U and W from own sums, or the columns of the file').choices([
        'own',
        'file',
      ]),
    )
    .option('--shells <n>', 'number of shells for these (16)', wholeOf('--shells', 1))
    .option('--external <file>', 'external fields (JSON): a tide, a host galaxy')
    .option('--coulomb-factor <γ>', 'γ in Λ = γN (0.11)', numberOf('--coulomb-factor'))
    .addOption(
      new Option(
        '--coincident <what>',
        'bodies at one point, unsoftened: leave those pairs out, or refuse',
      ).choices(['leave-out', 'refuse']),
    )
    .addOption(threads());
}

function following(command: Command): Command {
  return timing(command)
    .option('--from <T>', 'only snapshots from this time on', numberOf('--from'))
    .option('--to <T>', 'only snapshots up to this time', numberOf('--to'))
    .option('--every <n>', 'only every n-th of them', wholeOf('--every', 1));
}

function timing(command: Command): Command {
  return command
    .option('--times <file>', 'times of the snapshots: CSV with the columns file,time')
    .option('--no-times', 'not even times.csv beside the snapshots')
    .option('--interval <DT>', 'snapshot k has the time k DT', numberOf('--interval'))
    .option('--start <T>', 'time of the first, with --interval (0)', numberOf('--start'))
    .option('--time-pattern <name>', 'time in the names of files: snap_{time}.bin');
}

function making(command: Command): Command {
  return command
    .option('--count <n>', 'number of bodies (needed)', wholeOf('--count', 1))
    .option('--seed <n>', 'seed; the same gives the same bodies (1)', wholeOf('--seed', 0))
    .option('--virial-ratio <q>', 'scale velocities to 2T/|W| = q', numberOf('--virial-ratio'))
    .addOption(
      new Option('--masses <law>', 'all equal, or drawn from m^-2.35').choices([
        'equal',
        'salpeter',
      ]),
    )
    .option('--cut <R>', 'no bodies beyond this radius', numberOf('--cut'))
    .option('--offset <x,y,z>', 'added to all positions', vectorOf('--offset'))
    .option('--velocity <vx,vy,vz>', 'added to all velocities', vectorOf('--velocity'))
    .option('--scale-radius <a>', 'scale radius of the model (1)', numberOf('--scale-radius'))
    .option('--mass <M>', 'mass of the model before any cut (1)', numberOf('--mass'))
    .option('--units <name|file>', 'unit system: natural, pc-kms-msun, ..., or FILE.json; sets G')
    .option('--gravity <G>', 'constant of gravitation (1)', numberOf('--gravity'))
    .option('--softening <length>', 'Plummer-equivalent, for scaling', numberOf('--softening'))
    .addOption(kernel())
    .addOption(
      new Option('--format <name>', 'format of the file; its ending may name it').choices([
        'raw',
        'arrow',
      ]),
    )
    .option('--out <file>', 'file to write (needed)')
    .addOption(threads())
    .option('--quiet', 'say nothing about the file written');
}

const formats = (names: readonly string[]): Option =>
  new Option('--format <name>', 'form of the output (table)').choices([...names]);
const kernel = (): Option =>
  new Option('--softening-kernel <kernel>', 'kernel of the softening').choices([...KERNELS]);
const threads = (): Option =>
  new Option('--threads <n>', 'worker threads (all)').argParser(wholeOf('--threads', 1));

function packageVersion(): string {
  const text = readFileSync(new URL('../../package.json', import.meta.url), 'utf8');
  return (JSON.parse(text) as { version: string }).version;
}
