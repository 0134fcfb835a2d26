/** `settlemark watch`: follows the folder of a running simulation and judges what is there so far. */
import {
  EXIT,
  followFolder,
  forecast,
  gateSummary,
  hopelessRules,
  InputError,
  InterruptedError,
  judgeRules,
  measureFiles,
  optionsForRules,
  readRules,
  UnanswerableError,
  UsageError,
  verdictOf,
  type Crew,
  type ExitCode,
  type Forecast,
  type Ledger,
  type MeasureRecord,
  type PreparedSnapshot,
  type RuleOutcome,
  type RuleSet,
  type SurveyOptions,
  type Verdict,
} from '../index.ts';
import { withCrew } from './crew.ts';
import { ledgerFor, type LedgerOptions } from './ledger.ts';
import type { MeasureCommandOptions } from './measure.ts';
import { runOnVerdict } from './onVerdict.ts';
import { surveyOptionsOf } from './readOptions.ts';
import { wrap } from './layout.ts';
import { asSentence } from './remarks.ts';
import { paintFor } from './style.ts';
import { write, type Streams } from './streams.ts';
import { watchLine } from './watchLine.ts';
import { LiveView } from './watchView.ts';

export interface WatchOptions extends Omit<MeasureCommandOptions, 'format' | 'out'>, LedgerOptions {
  readonly format?: 'table' | 'ndjson';
  /** `settled`, `decided`, or a time of the simulation. */
  readonly until?: string;
  /** Command of the shell that gets the verdict as JSON whenever it changes. */
  readonly onVerdict?: string;
  /** Files or names of built-in rules: the watch ends once one of them can no longer pass. */
  readonly rules?: readonly string[];
  /** Seconds. */
  readonly poll?: number;
  readonly still?: number;
}

const POLL_SECONDS = 2;
const STILL_SECONDS = 1;
const PATIENCE_SECONDS = 30;
/** A verdict takes some milliseconds. */
const JUDGE_EVERY_MS = 200;

/** What is known of a run at a moment. */
export interface RunSoFar {
  readonly folder: string;
  readonly records: readonly MeasureRecord[];
  /** Null as long as there are too few snapshots to say anything. */
  readonly verdict: Verdict | null;
  readonly forecast: Forecast | null;
  /** Findings about files and the folder, the last ones last. */
  readonly notes: readonly string[];
}

/** @returns 0 once `--until` is reached; an interruption ends a watch that has no such end */
export async function watch(
  folder: string,
  options: WatchOptions,
  streams: Streams,
): Promise<ExitCode> {
  const until = untilOf(options.until);
  const rules = await Promise.all((options.rules ?? []).map(readRules));
  const own = await surveyOptionsOf(options, streams.interrupt);
  const survey = rules.length > 0 ? await optionsForRules(rules, own) : own;
  const { ledger, remarks } = await ledgerFor([`${folder}/x`], options);
  const teller = tellerFor(options, streams);
  for (const { text } of remarks) await teller.note(text);
  try {
    return await withCrew(options.threads, streams.interrupt, (crew) =>
      watchWith({ folder, options, survey, streams, crew, ledger, teller, until, rules }),
    );
  } finally {
    teller.close();
    await ledger?.close();
  }
}

interface Job {
  readonly folder: string;
  readonly options: WatchOptions;
  readonly survey: SurveyOptions;
  readonly streams: Streams;
  readonly crew: Crew;
  readonly ledger: Ledger | null;
  readonly teller: Teller;
  readonly until: Until;
  readonly rules: readonly RuleSet[];
}

async function watchWith(job: Job): Promise<ExitCode> {
  const { folder, options, survey, streams, teller, until } = job;
  const byFile = new Map<string, MeasureRecord>();
  let told: string | null = null;
  const sightings = await followFolder(folder, survey, {
    pollSeconds: options.poll ?? POLL_SECONDS,
    stillSeconds: options.still ?? STILL_SECONDS,
    patienceSeconds: PATIENCE_SECONDS,
    signal: streams.interrupt,
  });
  let ledgerRemarks = 0;
  let judgedAt = -Infinity;
  for await (const sighting of sightings) {
    switch (sighting.kind) {
      case 'gone':
        await teller.note(`${folder} is gone; waiting for it to come back`);
        break;
      case 'back':
        await teller.note(`${folder} is back`);
        break;
      case 'incomplete':
        await teller.note(`left out until it is whole: ${sighting.error.message}`);
        break;
      case 'idle':
        await teller.show(await soFar(folder, byFile, teller), null);
        break;
      case 'ready':
        for await (const { file, isLast } of measured(sighting.snapshots, job, byFile)) {
          // Of a run that is being caught up with, not every state is judged.
          const isDue = isLast || performance.now() - judgedAt > JUDGE_EVERY_MS;
          const run = isDue
            ? await soFar(folder, byFile, teller)
            : unjudged(folder, byFile, teller);
          if (isDue) judgedAt = performance.now();
          const name = run.verdict?.verdict ?? null;
          await teller.show(run, byFile.get(file) ?? null);
          if (run.verdict && name !== told) {
            told = name;
            await tellCommand(options.onVerdict, run.verdict, streams, teller);
          }
          const gate = isDue ? await hopelessCode(job, run) : null;
          if (gate !== null) return gate;
          if (isReached(until, run)) return await finalCode(job, run);
        }
    }
    for (const { text } of job.ledger?.remarks.slice(ledgerRemarks) ?? []) await teller.note(text);
    ledgerRemarks = job.ledger?.remarks.length ?? 0;
  }
  throw new InterruptedError();
}

/** The gate's code once a rule can no longer pass, with the reason on standard error; null before. */
async function hopelessCode(
  { rules, options, streams, teller }: Job,
  { records, verdict }: RunSoFar,
): Promise<ExitCode | null> {
  if (rules.length === 0 || records.length === 0) return null;
  const hopeless = await hopelessRules(await judgeRules(rules, records), records);
  if (hopeless.length === 0) return null;
  const [{ subject, bound, reason, message }] = hopeless;
  await write(
    streams.stderr,
    `settlemark: gate failed: ${subject} ${bound} can no longer pass: ${message ?? reason}\n`,
  );
  await tellCommand(options.onVerdict, { ...verdict, hopeless }, streams, teller);
  return EXIT.gateFailed;
}

/** The code of a watch that has reached its end: that of the gate, if there are rules. */
async function finalCode({ rules, streams }: Job, { records }: RunSoFar): Promise<ExitCode> {
  if (rules.length === 0) return EXIT.done;
  const result = await judgeRules(rules, records);
  if (result.gate === 'passed') return EXIT.done;
  await write(streams.stderr, `settlemark: gate ${gateSummary(result, {})}\n`);
  return EXIT.gateFailed;
}

/** Measures snapshots and gives the name of each whose record is new, and whether nothing follows. */
async function* measured(
  snapshots: readonly PreparedSnapshot[],
  { survey, crew, ledger, streams, teller }: Job,
  byFile: Map<string, MeasureRecord>,
): AsyncGenerator<{ readonly file: string; readonly isLast: boolean }> {
  let left = snapshots.length;
  for await (const { file, record, error } of await measureFiles(
    snapshots,
    survey,
    crew,
    ledger ?? undefined,
  )) {
    if (streams.interrupt.aborted) throw new InterruptedError();
    left--;
    if (record !== null) {
      byFile.set(file, record);
      yield { file, isLast: left === 0 };
    } else if (error instanceof InputError || error instanceof UnanswerableError) {
      await teller.note(`left out: ${error.message}`);
    } else throw error;
  }
}

function unjudged(
  folder: string,
  byFile: ReadonlyMap<string, MeasureRecord>,
  { notes }: Teller,
): RunSoFar {
  return { folder, records: [...byFile.values()], verdict: null, forecast: null, notes };
}

async function soFar(
  folder: string,
  byFile: ReadonlyMap<string, MeasureRecord>,
  { notes }: Teller,
): Promise<RunSoFar> {
  const records = [...byFile.values()];
  try {
    const verdict = verdictOf(records);
    return { folder, records, verdict, forecast: await forecast(records), notes };
  } catch (error) {
    if (!(error instanceof UnanswerableError)) throw error;
    return { folder, records, verdict: null, forecast: null, notes };
  }
}

async function tellCommand(
  command: string | undefined,
  verdict: Partial<Verdict> & { readonly hopeless?: readonly RuleOutcome[] },
  streams: Streams,
  teller: Teller,
): Promise<void> {
  if (command === undefined) return;
  const failure = await runOnVerdict(command, verdict, streams.interrupt);
  if (failure !== null) await teller.note(failure);
}

type Until = { readonly kind: 'never' | 'settled' | 'decided' } | { readonly time: number };

function untilOf(text: string | undefined): Until {
  if (text === undefined) return { kind: 'never' };
  if (text === 'settled' || text === 'decided') return { kind: text };
  const time = Number(text);
  if (text.trim() !== '' && Number.isFinite(time)) return { time };
  throw new UsageError(
    'usage.until',
    `--until ${text}: expected settled, decided, or a time of the simulation`,
    'Leave it out to watch until Ctrl-C.',
  );
}

function isReached(until: Until, { records, verdict }: RunSoFar): boolean {
  if ('time' in until) return records.some(({ time }) => time !== null && time >= until.time);
  const name = verdict?.verdict ?? 'undecided';
  if (until.kind === 'settled') return name === 'settled' || name === 'relaxing';
  return until.kind === 'decided' && name !== 'undecided';
}

/** Where news go: a live view on a terminal, lines or JSON elsewhere. */
export interface Teller {
  readonly notes: readonly string[];
  /** @param record - the one that is new; null if only time has passed */
  show(run: RunSoFar, record: MeasureRecord | null): Promise<void>;
  note(text: string): Promise<void>;
  close(): void;
}

function tellerFor({ format, quiet = false }: WatchOptions, streams: Streams): Teller {
  const { stdout, stderr, env } = streams;
  const isLive = stdout.isTTY === true && env['TERM'] !== 'dumb' && format === undefined && !quiet;
  if (isLive) return new LiveView(stdout, paintFor(stdout, env));
  const notes: string[] = [];
  return {
    notes,
    async show(run, record) {
      if (record === null) return;
      const { verdict, forecast: ahead } = run;
      const text =
        format === 'ndjson'
          ? JSON.stringify({ file: record.file, time: record.time, verdict, forecast: ahead })
          : watchLine(record, run);
      await write(stdout, `${text}\n`);
    },
    async note(text) {
      notes.push(text);
      if (!quiet) await write(stderr, `${wrap(asSentence(text), '  ', '! ')}\n`);
    },
    close: () => undefined,
  };
}
