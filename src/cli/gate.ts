/** `settlemark gate`: rules in, exit code out. */
import {
  builtInRules,
  EXIT,
  exitCodeOf,
  gateState,
  gateSummary,
  gateToJunit,
  gateToMarkdown,
  judgeRules,
  optionsForRules,
  readRules,
  UnanswerableError,
  UsageError,
  type ExitCode,
  type GateResult,
  type RuleSet,
} from '../index.ts';
import { AlreadyReported } from './failure.ts';
import type { LedgerOptions } from './ledger.ts';
import type { MeasureCommandOptions } from './measure.ts';
import { formatOf, refuseOverwriting, withOutput } from './output.ts';
import { measureSeries, sortInputs, type MeasuredSeries } from './series.ts';
import { snapshotsOf, surveyOf } from './snapshots.ts';
import { NO_PAINT, paintFor } from './style.ts';
import { write, type Streams } from './streams.ts';

export interface GateOptions extends Omit<MeasureCommandOptions, 'format'>, LedgerOptions {
  readonly format?: 'table' | 'json';
  /** Files or names of built-in sets, in the order given. */
  readonly rules?: readonly string[];
  readonly strict?: boolean;
  /** A name to print one built-in set; true to list all. */
  readonly list?: string | true;
  readonly junit?: string;
  readonly markdown?: string;
}

/** Measures the snapshots or takes records of them, and judges them by the rules. */
export async function gate(
  args: readonly string[],
  options: GateOptions,
  streams: Streams,
): Promise<ExitCode> {
  const { out, junit, markdown } = options;
  if (options.list !== undefined) return list(options.list, out, streams);
  const format = formatOf(options.format, out, ['table', 'json']);
  const sets = await rulesOf(args, options);
  const { recordFiles, paths } = await sortInputs(args);
  refuseTwice([out, junit, markdown]);
  const { survey, range } = await surveyFor(sets, options, streams);
  const { snapshots, code: notFound } =
    paths.length > 0
      ? await snapshotsOf(paths, { survey, range }, streams)
      : { snapshots: [], code: EXIT.done };
  if (notFound !== EXIT.done) throw new AlreadyReported(notFound);
  const files = snapshots.flatMap(({ file, parts }) => parts ?? [file]);
  const given = [...args, ...files, ...(options.rules ?? [])];
  await refuseOverwriting(out, given);
  await refuseOverwriting(junit, given, '--junit');
  await refuseOverwriting(markdown, given, '--markdown');
  const { threads, quiet = false } = options;
  const ledger = ledgerOption(options, snapshots.length);
  const work = { recordFiles, snapshots, survey, threads, quiet, ledger };
  let code: ExitCode = EXIT.done;
  // Files that cannot be written are told of before anything is measured.
  await withOutput(out, streams, (sink) =>
    withFile(junit, streams, (sinkJunit) =>
      withFile(markdown, streams, async (sinkMarkdown) => {
        const series = await measureSeries(work, streams);
        if (series.records.length === 0 && series.skipped.length > 0) throw nothingMeasured(series);
        const judged = await judgeRules(sets, series.records);
        const result = { ...judged, remarks: [...judged.remarks, ...series.remarks] };
        const { strict = false } = options;
        const unreadable = unreadableOf(series.skipped);
        await sinkJunit(() => gateToJunit(result, { strict, unreadable }));
        await sinkMarkdown(() => gateToMarkdown(result, { strict, unreadable }));
        if (format === 'json') {
          await sink(`${JSON.stringify({ ...result, strict, unreadable }, null, 2)}\n`);
        } else {
          const paint = out === undefined ? paintFor(streams.stdout, streams.env) : NO_PAINT;
          const { gatePage } = await import('./gatePage.ts');
          await sink(gatePage(result, { strict, unreadable }, paint));
        }
        code = await tell(result, series, options, streams);
      }),
    ),
  );
  return code;
}

/** One snapshot is no run: it gets no ledger beside it unless one is named. */
const ledgerOption = ({ ledger }: GateOptions, snapshots: number): LedgerOptions['ledger'] =>
  snapshots === 1 && typeof ledger !== 'string' ? false : ledger;

/** The exit code, with its reason on standard error. */
async function tell(
  result: GateResult,
  { skipped }: MeasuredSeries,
  { strict = false, quiet = false }: GateOptions,
  streams: Streams,
): Promise<ExitCode> {
  const options = { strict, unreadable: unreadableOf(skipped) };
  const state = gateState(result, options);
  const isQuiet = result.warns + result.cannotTell === 0;
  if (state !== 'passed' || !(quiet || isQuiet)) {
    const warning = state === 'passed' ? 'warning: ' : '';
    await write(
      streams.stderr,
      `settlemark: ${warning}gate ${gateSummary(result, options)}${lackText(result)}\n`,
    );
  }
  if (state === 'failed') return EXIT.gateFailed;
  if (state === 'passed') return EXIT.done;
  return skipped.length > 0 ? exitCodeOf(skipped[0].error) : EXIT.unanswerable;
}

const lackText = ({ lacksVerdict }: GateResult): string =>
  lacksVerdict ? '; a verdict needs at least two snapshots with times' : '';

const unreadableOf = (skipped: MeasuredSeries['skipped']) =>
  skipped.map(({ file, error }) => ({ file, reason: error.message }));

function nothingMeasured({ skipped }: MeasuredSeries): Error {
  const [{ error }] = skipped;
  if (!(error instanceof UnanswerableError)) return error;
  return new UnanswerableError(
    'unanswerable.emptySeries',
    'no snapshot of the series could be measured; an empty series never passes',
    'see what was said of each of them above',
  );
}

async function rulesOf(
  args: readonly string[],
  { rules = [] }: GateOptions,
): Promise<readonly RuleSet[]> {
  const lacks = (code: `usage.${string}`, what: string, remedy: string) =>
    new UsageError(code, `${what} is missing`, remedy);
  if (args.length === 0) {
    throw lacks(
      'usage.missingArgument',
      'what is to be judged',
      'Name snapshots, a folder of them, or records.',
    );
  }
  if (rules.length === 0) {
    throw lacks(
      'usage.missingOption',
      '--rules',
      `Name a file of rules, or built-in ones: ${Object.keys(builtInRules()).join(', ')}.`,
    );
  }
  return Promise.all(rules.map(readRules));
}

/** The options of the measurement, with what the rules need besides. */
async function surveyFor(
  sets: readonly RuleSet[],
  options: GateOptions,
  streams: Streams,
): ReturnType<typeof surveyOf> {
  const { survey, range } = await surveyOf(options, streams);
  return { survey: await optionsForRules(sets, survey), range };
}

/** Hands over a function that writes to the file; without a file it makes nothing. */
function withFile<T>(
  path: string | undefined,
  streams: Streams,
  produce: (sink: (make: () => Promise<string>) => Promise<void>) => Promise<T>,
): Promise<T> {
  if (path === undefined) return produce(() => Promise.resolve());
  return withOutput(path, streams, (sink) => produce(async (make) => sink(await make())));
}

function refuseTwice(paths: readonly (string | undefined)[]): void {
  const given = paths.filter((path) => path !== undefined);
  const twice = given.find((path, k) => given.indexOf(path) !== k);
  if (twice === undefined || twice === '/dev/null') return;
  throw new UsageError(
    'usage.outTwice',
    `${twice} is named for two outputs, of which one would overwrite the other`,
    'Give each its own name.',
  );
}

async function list(
  name: string | true,
  out: string | undefined,
  streams: Streams,
): Promise<ExitCode> {
  const texts = builtInRules();
  if (name !== true) {
    if (!Object.hasOwn(texts, name)) {
      throw new UsageError(
        'usage.rulesNotFound',
        `there are no built-in rules ${name}; there are ${Object.keys(texts).join(', ')}`,
        'Name one of these.',
      );
    }
    await withOutput(out, streams, (sink) => sink(texts[name]));
    return EXIT.done;
  }
  const { wrap } = await import('./layout.ts');
  const width = Math.max(...Object.keys(texts).map((each) => each.length));
  const lines: string[] = [];
  for (const each of Object.keys(texts)) {
    const { description = '' } = await readRules(each);
    lines.push(wrap(description, ' '.repeat(width + 2), `${each.padEnd(width)}  `));
  }
  await withOutput(out, streams, (sink) => sink(`${lines.join('\n')}\n`));
  return EXIT.done;
}
