/**
 * Settlemark as a library: files of particles → T, U, W with measured errors → records.
 *
 * Importing this module is cheap: the functions load what they need when they are first called.
 *
 * ```ts
 * import { measure } from 'settlemark';
 * const record = await measure('cluster.bin', { softening: 0.01 });
 * console.log(record.whole.clausiusRatio, '±', record.whole.noise);
 * ```
 */
import type { MeasureRecord } from './dynamics/record.ts';
import type { RecordColumn } from './dynamics/recordColumns.ts';
import type { MeasureOptions } from './dynamics/settings.ts';
import { verdictOf as judge, type Verdict } from './settling/verdict.ts';
import type { ExternalField } from './models/external.ts';
import { comparedRun as shortRun, type ComparedRun } from './gate/compareRun.ts';
import {
  compareRuns as compareShortRuns,
  type CompareOptions,
  type Comparison,
} from './gate/compare.ts';
import type { LeapfrogOptions } from './models/leapfrog.ts';
import type { ModelFigures } from './models/figures.ts';
import type { MakeOptions, SphereOptions } from './models/make.ts';
import type { BodyColumns } from './octree/build.ts';
import type { ForceOptions, Forces } from './octree/forces.ts';
import { defaultThreads, startCrew, type Crew } from './parallel/crew.ts';
import type { Particles } from './snapshot/particles.ts';
import type { Units } from './snapshot/ownUnits.ts';
import type { FieldName, ReadOptions, SnapshotDescription } from './snapshot/reading.ts';
import type { AveragedBalance } from './survey/average.ts';
import type { Conversion, ConvertOptions } from './survey/convert.ts';
import type { MakeSnapshotOptions } from './survey/make.ts';
import type { Forecast } from './settling/forecast.ts';
import type { FollowOptions, Sighting } from './survey/follow.ts';
import type { Ledger } from './survey/ledger.ts';
import type { FileOutcome } from './survey/many.ts';
import type { SurveyOptions } from './survey/measure.ts';
import type { PreparedSnapshot } from './survey/prepare.ts';
import type { RunFile } from './survey/runFile.ts';
import { BUILT_IN_RULES } from './gate/builtIn.ts';
import type { GateReportOptions, GateResult, RuleOutcome } from './gate/judge.ts';
import { stateOf, summaryText } from './gate/summary.ts';
import type { RuleSet } from './gate/rules.ts';
import type { SeriesOptions } from './survey/series.ts';

export {
  EXIT,
  exitCodeOf,
  InputError,
  InterruptedError,
  SettlemarkError,
  UnanswerableError,
  UsageError,
  type ExitCode,
} from './errors.ts';
export { defaultThreads, startCrew, type Crew } from './parallel/crew.ts';
export { UNIT_SYSTEMS, type Dimension, type UnitName, type UnitSystem } from './snapshot/units.ts';
export type { Units, UnitsDefinition } from './snapshot/ownUnits.ts';
export { unitText, yearsPerTimeUnit } from './snapshot/unitText.ts';
export { findQuantity, QUANTITIES, type Quantity } from './dynamics/registry.ts';
export { recordUnits } from './dynamics/recordUnits.ts';
export type { Cell, CellType, RecordColumn } from './dynamics/recordColumns.ts';
export { EXTRAS, extrasNamed, type ExtraName } from './dynamics/extras.ts';
export type { HardestPairs } from './dynamics/pairs.ts';
export type { Profiles } from './dynamics/profiles.ts';
export type { Shells } from './dynamics/shells.ts';
export type {
  Balance,
  CentreMethod,
  EngineReport,
  ForcesOrigin,
  ExtraFigures,
  LagrangianRadii,
  MeasureRecord,
  RecordSettings,
  Setting,
  SettingOrigin,
  SofteningSetting,
  TimeSetting,
  TimeSource,
  UnitsSetting,
  Vector,
} from './dynamics/record.ts';
export type { MeasureOptions } from './dynamics/settings.ts';
export type { BodyColumns } from './octree/build.ts';
export type { ForceOptions, Forces } from './octree/forces.ts';
export type { Softening, SofteningKernel } from './octree/softening.ts';
export type { Verdict, VerdictName } from './settling/verdict.ts';
export type { Audit } from './settling/audit.ts';
export type { GateReportOptions, GateResult, Outcome, RuleOutcome } from './gate/judge.ts';
export type { Rule, RuleSet, Severity, Statistic, StatisticName, Window } from './gate/rules.ts';
export type { Finding } from './settling/rule.ts';
export type { ExternalField } from './models/external.ts';
export type { ExternalFigures } from './dynamics/external.ts';
export type { CompareOptions, Comparison, QuantityComparison } from './gate/compare.ts';
export type { ComparedRun, RunSetup } from './gate/compareRun.ts';
export { looksLikeReference, parseReference, referenceText } from './gate/compareReference.ts';
export type { LeapfrogOptions } from './models/leapfrog.ts';
export type { ModelFigures } from './models/figures.ts';
export type {
  BinaryOptions,
  ComponentOptions,
  EncounterOptions,
  EscaperOptions,
  MakeOptions,
  ModelName,
  SphereOptions,
} from './models/make.ts';
export type {
  FloatColumn,
  Frame,
  IdColumn,
  OptionalColumns,
  ParticleOrigin,
  Particles,
  Remark,
  Selection,
  Unread,
  VelocityForm,
} from './snapshot/particles.ts';
export type {
  DescribedColumn,
  FieldName,
  ReadOptions,
  SnapshotDescription,
} from './snapshot/reading.ts';
export type { AveragedBalance } from './survey/average.ts';
export type { Conversion, ConvertOptions } from './survey/convert.ts';
export type { Difference } from './snapshot/comparison.ts';
export type { MakeSnapshotOptions } from './survey/make.ts';
export { LEDGER_NAME } from './survey/ledgerName.ts';
export type { ScalarMean } from './settling/scalars.ts';
export type { Forecast } from './settling/forecast.ts';
export type { FollowOptions, Sighting } from './survey/follow.ts';
export type { Ledger } from './survey/ledger.ts';
export type { FileOutcome } from './survey/many.ts';
export type { Stage, SurveyOptions } from './survey/measure.ts';
export type { PreparedOptions, PreparedSnapshot } from './survey/prepare.ts';
export type { SeriesRange } from './survey/range.ts';
export type { RunFile, RunSettings } from './survey/runFile.ts';
export type { SeriesOptions } from './survey/series.ts';
export type { StatedTime, TimeSettings } from './survey/times.ts';

/** Options of {@link measure}: those of the measurement, of the reader, and the number of threads. */
export interface MeasureCall extends SurveyOptions {
  /** Worker threads; if not given, as many as the run file says or the machine offers. */
  readonly threads?: number;
}

/**
 * Reads and measures one snapshot with a crew of its own, which ends with the call. For many
 * snapshots start one crew and use {@link measureFile}.
 * @param path - a file, or `-` for an Arrow stream on standard input
 * @returns the record, in the units of the snapshot
 * @throws UsageError, InputError; InterruptedError if `options.read.signal` is aborted
 */
export async function measure(path: string, options: MeasureCall = {}): Promise<MeasureRecord> {
  const { threads, ...survey } = options;
  const [prepared] = await prepareSnapshots([path], survey);
  const crew = startCrew(threads ?? prepared.threads ?? defaultThreads());
  const signal = options.read?.signal;
  const stop = (): void => void crew.close();
  signal?.addEventListener('abort', stop, { once: true });
  try {
    return await measureFile(prepared, survey, crew);
  } finally {
    signal?.removeEventListener('abort', stop);
    await crew.close();
  }
}

/**
 * Reads and measures one snapshot with a crew that the caller has started; errors as {@link measure}.
 * @param snapshot - a file, or one of {@link prepareSnapshots}, whose own options count then
 */
export async function measureFile(
  snapshot: string | PreparedSnapshot,
  options: SurveyOptions,
  crew: Crew,
): Promise<MeasureRecord> {
  return (await import('./survey/measure.ts')).measureFile(snapshot, options, crew);
}

/**
 * Settles the options of snapshots before any is read: the caller's go before those of the run file
 * `settlemark.json` in the folder of a snapshot (or of `options.runFile`).
 * @throws UsageError for a wrong run file; InputError if it, or a file that it names, cannot be read
 */
export async function prepareSnapshots(
  files: readonly string[],
  options: SurveyOptions = {},
): Promise<PreparedSnapshot[]> {
  return (await import('./survey/prepare.ts')).prepareSnapshots(files, options);
}

/**
 * The snapshots of one run, as a series: in the order of time, of several at one time the last, cut
 * to `from`, `to` and `every`; errors as {@link prepareSnapshots} and {@link findSnapshots}, and
 * UnanswerableError if nothing is left. What it returns can be measured by {@link measureFiles}.
 * @param paths - files and folders, all of one run
 */
export async function findSeries(
  paths: readonly string[],
  options: SeriesOptions = {},
): Promise<PreparedSnapshot[]> {
  return (await import('./survey/series.ts')).findSeries(paths, options);
}

/** Reads and checks a run file; errors as {@link prepareSnapshots}. */
export async function readRunFile(path: string): Promise<RunFile> {
  return (await import('./survey/runFile.ts')).readRunFile(path);
}

/**
 * Reads and measures many snapshots: small ones spread whole over the crew's workers, large ones
 * worked on by all together. Records and errors come in the order given.
 * @param snapshots - files, or snapshots of {@link prepareSnapshots}, whose own options count then
 * @param ledger - of {@link openLedger}: what it knows is not measured again, what is new it keeps
 * @returns an async iterator of outcomes, each with a record or the error that kept it from one
 */
export async function measureFiles(
  snapshots: readonly (string | PreparedSnapshot)[],
  options: SurveyOptions,
  crew: Crew,
  ledger?: Ledger,
): Promise<AsyncGenerator<FileOutcome>> {
  if (ledger !== undefined) {
    const paths = snapshots.filter((snapshot) => typeof snapshot === 'string');
    const { eachOnce, prepareEach } = await import('./survey/prepare.ts');
    const ready = (await prepareEach(paths, options)).values();
    const prepared = eachOnce(
      snapshots.map((snapshot) =>
        typeof snapshot === 'string' ? (ready.next().value as PreparedSnapshot) : snapshot,
      ),
    );
    return (await import('./survey/measureNew.ts')).measureNew(prepared, options, crew, ledger);
  }
  return (await import('./survey/many.ts')).measureMany(snapshots, options, crew);
}

/**
 * Follows a folder into which a simulation writes, until the signal comes: snapshots as they become
 * whole, and what else there is to know. Small steps that the caller may leave at any time.
 * @throws InputError `input.notFound`, `input.noPermission` if the folder is not there at the start
 */
export async function followFolder(
  folder: string,
  options: SurveyOptions,
  how: FollowOptions,
): Promise<AsyncGenerator<Sighting>> {
  return (await import('./survey/follow.ts')).follow(folder, options, how);
}

/**
 * When a run that has not settled is expected to, by the records so far; null if nothing can be said.
 * Times are in the unit of the records.
 */
export async function forecast(records: readonly MeasureRecord[]): Promise<Forecast | null> {
  return (await import('./settling/forecast.ts')).forecastRun(records);
}

/**
 * Opens the ledger of a run, in which records are kept by the bytes of their snapshots and the options
 * that change a figure. One that is not there yet is empty; `close()` makes sure that all is on disk.
 * @throws InputError `input.notALedger`, `input.unreadable`
 */
export async function openLedger(path: string): Promise<Ledger> {
  return (await import('./survey/ledger.ts')).Ledger.open(path);
}

/**
 * Measures particles that are already in memory.
 * @throws UsageError for options out of their domain; InputError for particles that cannot be measured
 */
export async function measureSnapshot(
  particles: Particles,
  options: MeasureOptions & Pick<SurveyOptions, 'onStage'>,
  crew: Crew,
): Promise<MeasureRecord> {
  const { onStage, ...measurement } = options;
  const { measureParticles } = await import('./dynamics/measure.ts');
  const { units, external } = measurement;
  const settled = {
    ...measurement,
    ...(units !== undefined && { units: await loadUnits(units) }),
    ...(typeof external === 'string' && { external: await readExternal(external) }),
  };
  return measureParticles(particles, settled, crew, { onStage });
}

/**
 * Potential, Clausius share and, if asked, acceleration of every body, with measured errors.
 * @param columns - positions and masses in input order, finite, masses 0 or more, as
 *   {@link readSnapshot} sees to; particles will do
 */
export async function sumForces(
  columns: BodyColumns,
  options: ForceOptions,
  crew: Crew,
): Promise<Forces> {
  return (await import('./octree/forces.ts')).sumForces(columns, options, crew);
}

/**
 * Time averages of T, U and W over records of one system, and 2⟨T⟩/|⟨W⟩|.
 * @throws UnanswerableError with fewer than two times
 */
export async function averageBalance(records: readonly MeasureRecord[]): Promise<AveragedBalance> {
  return (await import('./survey/average.ts')).averageBalance(records);
}

/**
 * Records as columns of a table, one row a record: names, types, units and values, for other formats
 * than {@link recordsToCsv} and {@link recordsToArrow} write.
 */
export async function recordColumns(records: readonly MeasureRecord[]): Promise<RecordColumn[]> {
  return (await import('./dynamics/recordColumns.ts')).recordColumns(records);
}

/** Records as comma-separated values: a head and one line a record; a null is an empty field. */
export async function recordsToCsv(records: readonly MeasureRecord[]): Promise<string> {
  return (await import('./dynamics/recordCsv.ts')).recordsToCsv(records);
}

/**
 * Records as an Arrow table, one row a record, with the unit of each column in its metadata.
 * @param format - a file, or a stream for a pipe
 */
export async function recordsToArrow(
  records: readonly MeasureRecord[],
  format: 'file' | 'stream' = 'file',
): Promise<Uint8Array> {
  return (await import('./dynamics/recordArrow.ts')).recordsToArrow(records, format);
}

/**
 * Reads a snapshot, raw or Arrow, into shared memory and screens its values.
 * @param path - a file, or `-` for an Arrow stream on standard input
 * @param crew - workers that load a large file together; without it the calling thread does
 * @throws InputError, UsageError, InterruptedError
 */
export async function readSnapshot(
  path: string,
  options: ReadOptions = {},
  crew?: Crew,
): Promise<Particles> {
  return (await import('./snapshot/read.ts')).readSnapshot(path, options, crew);
}

/**
 * Comoving particles in physical coordinates, unwrapped if their box is periodic; physical ones as
 * they are. {@link measure} and its kind do this by themselves.
 * @throws UnanswerableError `unanswerable.periodicBox` if they are no single object in their box
 */
export async function toPhysical(particles: Particles): Promise<Particles> {
  return (await import('./snapshot/frame.ts')).toPhysical(particles);
}

/** Says what is in a snapshot and reads no more of it than that takes; errors as {@link readSnapshot}. */
export async function describeSnapshot(
  path: string,
  options: ReadOptions = {},
): Promise<SnapshotDescription> {
  return (await import('./snapshot/read.ts')).describeSnapshot(path, options);
}

/**
 * The snapshots that files and folders mean, in the natural order of names.
 * @throws InputError `input.notFound`; UnanswerableError for a folder without snapshots
 */
export async function findSnapshots(paths: readonly string[]): Promise<string[]> {
  return (await import('./snapshot/series.ts')).expandPaths(paths);
}

/**
 * Reads a file of units if `units` names one (it ends in `.json`); names and sizes pass as they are.
 * @throws InputError `input.units`, and those of opening a file
 */
export async function loadUnits(units: Units): Promise<Units> {
  return (await import('./snapshot/ownUnits.ts')).loadUnits(units);
}

/**
 * Reads a file of external fields.
 * @throws UsageError `usage.external`; InputError if it cannot be read
 */
export async function readExternal(path: string): Promise<ExternalField[]> {
  return (await import('./survey/externalFile.ts')).readExternal(path);
}

/** Parses `name=column,…` for {@link ReadOptions.columns}. @throws UsageError */
export async function parseColumns(text: string): Promise<Partial<Record<FieldName, string>>> {
  return (await import('./snapshot/columns.ts')).parseColumns(text);
}

/** Draws bodies from an equilibrium model, as they come. @throws UsageError */
export async function makeModel(options: MakeOptions): Promise<Particles> {
  return (await import('./models/make.ts')).makeModel(options);
}

/**
 * What a model has by its formulas: mass, U, T, 2T/|U|, half-mass and virial radius.
 * @param gravity - G in the units of the options
 * @throws UsageError
 */
export async function modelFigures(options: SphereOptions, gravity = 1): Promise<ModelFigures> {
  return (await import('./models/figures.ts')).modelFigures(options, gravity);
}

/**
 * Makes a model snapshot: drawn, scaled to a virial ratio if wanted, moved.
 * @throws UsageError; UnanswerableError if there is nothing to scale
 */
export async function makeSnapshot(options: MakeSnapshotOptions, crew: Crew): Promise<Particles> {
  return (await import('./survey/make.ts')).makeSnapshot(options, crew);
}

/**
 * Reads records that were made earlier, one JSON object a line.
 * @throws InputError `input.notARecord`, `input.recordVersion`, `input.notFound`
 */
export async function readRecords(path: string): Promise<MeasureRecord[]> {
  return (await import('./survey/records.ts')).readRecords(path);
}

/** Whether a path is one of records, by its name or, for Arrow, its metadata: see {@link readRecords}. */
export async function isRecords(path: string): Promise<boolean> {
  return (await import('./survey/records.ts')).isRecords(path);
}

/**
 * Judges a run by its records: whether, when and how well it settled, and why one can say so.
 * @throws UnanswerableError `unanswerable.series` with fewer than two times
 */
export function verdictOf(records: readonly MeasureRecord[]): Verdict {
  return judge(records);
}

/**
 * The short form of a run in which it is compared and stored.
 * @throws UnanswerableError `unanswerable.emptyRun`
 */
export function comparedRun(records: readonly MeasureRecord[], name: string): ComparedRun {
  return shortRun(records, name);
}

/**
 * Compares candidate runs with reference runs: the same, or different in what, when and by how much.
 * @throws UsageError `usage.range`; InputError `input.otherSetup`; UnanswerableError
 *   `unanswerable.noOverlap`, `unanswerable.noRuns`
 */
export function compareRuns(
  candidates: readonly ComparedRun[],
  references: readonly ComparedRun[],
  options: CompareOptions = {},
): Comparison {
  return compareShortRuns(candidates, references, options);
}

/**
 * The rules of a file in JSON or YAML, or built-in ones by name.
 * @throws UsageError for rules that are none, with file, line, column and key; InputError if the file
 *   cannot be read
 */
export async function readRules(nameOrPath: string): Promise<RuleSet> {
  return (await import('./gate/readRules.ts')).readRules(nameOrPath);
}

/** Texts of the built-in rules (YAML) by name: files to start from. */
export function builtInRules(): Readonly<Record<string, string>> {
  return BUILT_IN_RULES;
}

/** The options of a measurement with the extras and mass fractions added that the rules ask for. */
export async function optionsForRules<O extends Pick<MeasureOptions, 'with' | 'fractions'>>(
  rules: readonly RuleSet[],
  options: O,
): Promise<O> {
  return (await import('./gate/needs.ts')).optionsForRules(rules, options);
}

/**
 * The rules that fail and that the run can no longer pass, whatever is still to come: a greatest value
 * that is too great, a window that is over, energy that is lost.
 * @param result - of {@link judgeRules} for the same records
 */
export async function hopelessRules(
  result: GateResult,
  records: readonly MeasureRecord[],
): Promise<readonly RuleOutcome[]> {
  return (await import('./gate/hopeless.ts')).hopelessRules(result, records);
}

/**
 * Judges the records of a run by rules: each passes, fails, or cannot be told.
 * @param records - in any order
 * @throws UnanswerableError `unanswerable.emptySeries` without records; UsageError for rules that are none
 */
export async function judgeRules(
  rules: RuleSet | readonly RuleSet[],
  records: readonly MeasureRecord[],
): Promise<GateResult> {
  return (await import('./gate/judge.ts')).judgeRules(rules, records);
}

/** A result in one sentence. */
export function gateSummary(result: GateResult, options: GateReportOptions = {}): string {
  return summaryText(result, options);
}

/** Whether a result lets a run pass: the exit code of `settlemark gate` follows from it. */
export function gateState(
  result: GateResult,
  options: GateReportOptions = {},
): 'passed' | 'failed' | 'not answered' {
  return stateOf(result, options);
}

/** A result as JUnit XML, for servers of continuous integration. */
export async function gateToJunit(
  result: GateResult,
  options: GateReportOptions = {},
): Promise<string> {
  return (await import('./gate/junit.ts')).gateToJunit(result, options);
}

/** A result as Markdown, for a merge request. */
export async function gateToMarkdown(
  result: GateResult,
  options: GateReportOptions = {},
): Promise<string> {
  return (await import('./gate/markdown.ts')).gateToMarkdown(result, options);
}

/**
 * Runs bodies by leapfrog with a constant time step, for demonstrations and tests: no individual steps
 * and no regularisation. Gives `snapshots` snapshots, the first at once.
 * @throws UsageError `usage.timeStep`
 */
export async function* leapfrog(
  start: Particles,
  options: LeapfrogOptions,
  crew: Crew,
): AsyncGenerator<Particles> {
  yield* (await import('./models/leapfrog.ts')).leapfrog(start, options, crew);
}

/**
 * Converts a snapshot to another format or layout. What was written is read again and compared bit for
 * bit before it gets its name.
 * @param from - a file, or `-` for an Arrow stream on standard input
 * @throws InputError `input.wouldBeLost`, `input.wouldBeRounded`, and those of reader and writer;
 * UsageError; InterruptedError
 */
export async function convertSnapshot(
  from: string,
  to: string,
  options: ConvertOptions = {},
  crew?: Crew,
): Promise<Conversion> {
  return (await import('./survey/convert.ts')).convertSnapshot(from, to, options, crew);
}

/**
 * Writes particles; the file appears whole or not at all.
 * @param format - `arrow` (a stream if the name ends in `.arrows`), or `raw`: little-endian float64
 *   mass x y z vx vy vz, body after body
 * @throws InputError `input.cannotWrite`
 */
export async function writeSnapshot(
  path: string,
  particles: Particles,
  format: 'raw' | 'arrow',
): Promise<void> {
  if (format === 'arrow')
    await (await import('./snapshot/arrow/write.ts')).writeArrow(path, particles);
  else await (await import('./snapshot/raw/write.ts')).writeRaw(path, particles);
}
