/** A snapshot in another format or layout, with the proof that nothing was lost on the way. */
import { stat } from 'node:fs/promises';
import { basename, dirname, extname, join } from 'node:path';
import { InputError, UsageError } from '../errors.ts';
import { nearestName } from '../numerics/nearest.ts';
import type { Crew } from '../parallel/crew.ts';
import { Comparison, type Compared, type Difference } from '../snapshot/comparison.ts';
import { formatByEnding } from '../snapshot/endings.ts';
import { numberColumns, OPTIONAL_FIELDS } from '../snapshot/particleColumns.ts';
import type { Particles, Remark } from '../snapshot/particles.ts';
import { readSnapshot } from '../snapshot/read.ts';
import type { ReadOptions } from '../snapshot/reading.ts';
import type { Layout } from '../snapshot/raw/layout.ts';
import { requireMemoryToConvert } from './memory.ts';

export interface ConvertOptions {
  /** How the snapshot is read; all optional columns are. */
  readonly read?: ReadOptions;
  /** Default: what the ending of the name says. */
  readonly format?: 'raw' | 'arrow' | undefined;
  /** File with the layout of a raw snapshot to write; without it one is made that fits, and written beside. */
  readonly toLayout?: string | undefined;
  /** Of reals in a file whose layout is not given; default: the one they have. Allows rounding. */
  readonly precision?: 'float32' | 'float64' | undefined;
  /** Names of columns and facts that may be lost. */
  readonly drop?: readonly string[] | undefined;
  /** Whether reals may be rounded to what the types of the layout hold. */
  readonly round?: boolean | undefined;
}

export interface Conversion {
  readonly from: string;
  readonly to: string;
  readonly format: 'raw' | 'arrow';
  readonly count: number;
  /** Layout file written beside a raw snapshot, or null. */
  readonly layout: string | null;
  /** What was left out because `drop` allowed it. */
  readonly dropped: readonly string[];
  /** Columns whose values were rounded because that was allowed. */
  readonly rounded: readonly Difference[];
  /** Findings of the reader. */
  readonly remarks: readonly Remark[];
}

/** Bodies that are looked at together when the written file is checked. */
const BODIES_A_PART = 262144;

/**
 * Converts a snapshot. What was written is read again, before it gets its name, and compared with
 * what was read first: bits of all values, names of components, time, units, G, softening, frame.
 * The file appears whole and checked, or not at all, and then the old one stays.
 * @throws InputError of the reader and the writer, `input.wouldBeLost` (something that the new file
 *   cannot hold and `drop` does not name), `input.wouldBeRounded`; UsageError `usage.format`,
 *   `usage.convertTarget`, `usage.convertOption`, `usage.layoutExists`, `usage.unknownField` (`drop` names
 *   what is not there); InterruptedError
 */
export async function convertSnapshot(
  from: string,
  to: string,
  options: ConvertOptions = {},
  crew?: Crew,
): Promise<Conversion> {
  const format = formatOf(to, options);
  await checkTarget(from, to, options);
  const read: ReadOptions = { ...options.read, optional: [...OPTIONAL_FIELDS] };
  const given =
    options.toLayout === undefined
      ? null
      : await (await import('../snapshot/raw/find-layout.ts')).loadLayout(options.toLayout);
  await refusePart(from, to, read);
  await requireMemoryToConvert(from, read);
  const particles = await readSnapshot(from, read, crew);
  const drop = new Set(options.drop);
  checkNames(particles, drop);
  const lost = particles.origin.unread ?? [];
  const told = lost.map(({ name, what }) => ({ name, text: `the ${what} "${name}"` }));
  const job = { particles, from, to, drop, options, told };
  const done = format === 'arrow' ? await toArrow(job) : await toRaw(job, given);
  return {
    ...{ from, to, format, count: particles.count },
    remarks: particles.origin.remarks,
    ...done,
  };
}

interface Loss {
  readonly name: string;
  readonly text: string;
}

interface Job {
  readonly particles: Particles;
  readonly from: string;
  readonly to: string;
  readonly drop: ReadonlySet<string>;
  readonly options: ConvertOptions;
  /** Losses that are known before anything is written. */
  readonly told: readonly Loss[];
}

type Done = Pick<Conversion, 'layout' | 'dropped' | 'rounded'>;

async function toArrow(job: Job): Promise<Done> {
  const { to, drop, options } = job;
  const { writeArrow } = await import('../snapshot/arrow/write.ts');
  const { readArrowParts } = await import('../snapshot/arrow/read.ts');
  const particles = without(job.particles, drop);
  refuseLosses(job, job.told);
  let outcome: Outcome | null = null;
  await writeArrow(to, particles, {
    ...(/\.arrows$/i.test(to) && { format: 'stream' }),
    precision: options.precision,
    signal: options.read?.signal,
    check: async (temporary) => {
      const comparison = new Comparison(job.particles);
      const optional = [...OPTIONAL_FIELDS];
      await readArrowParts(temporary, { optional }, (part, first) => comparison.add(part, first));
      outcome = judge(job, comparison.result());
    },
  });
  return { layout: null, ...checked(outcome) };
}

async function toRaw(job: Job, given: Layout | null): Promise<Done> {
  const { particles, to, drop, options } = job;
  const { writeRaw } = await import('../snapshot/raw/write.ts');
  const { readRawParts } = await import('../snapshot/raw/read.ts');
  const { completeLayout, fittingLayout } = await import('../snapshot/raw/fitting.ts');
  const fitting = given === null ? fittingLayout(particles, drop, options.precision) : null;
  const layout = given ?? completeLayout(fitting ?? { settlemark: 'layout/1', fields: [] });
  const beside = given === null ? layoutBeside(to) : null;
  if (beside !== null) await refuseOtherLayout(beside, layout);
  refuseLosses(job, [...job.told, ...(await notHeld(particles, layout, to))]);
  let outcome: Outcome | null = null;
  await writeRaw(to, particles, layout, {
    signal: options.read?.signal,
    check: async (temporary) => {
      const comparison = new Comparison(particles);
      const optional = [...OPTIONAL_FIELDS];
      await readRawParts(temporary, layout, BODIES_A_PART, { optional }, (part, first) =>
        comparison.add(part, first),
      );
      outcome = judge(job, comparison.result());
      // Before the snapshot gets its name: a snapshot without its layout could not be read.
      if (beside !== null) await writeLayout(beside, fitting);
    },
  });
  return { layout: beside, ...checked(outcome) };
}

interface Outcome {
  readonly dropped: readonly string[];
  readonly rounded: readonly Difference[];
}

function checked(outcome: Outcome | null): Outcome {
  if (outcome === null) throw new Error('the file was not checked');
  return outcome;
}

/** What may not be lost or rounded and is. */
function judge(job: Job, { missing, different }: Compared): Outcome {
  const { options, drop, from, to } = job;
  const names = [...new Set(missing.map(wholeName))];
  refuseLosses(job, [...job.told, ...names.map((name) => ({ name, text: nameText(job, name) }))]);
  const counted = different.filter(({ column }) => !isDropped(drop, column));
  const isAllowed = options.round === true || options.precision !== undefined;
  const refused = counted.find(({ largest }) => !isAllowed || largest === null);
  if (refused !== undefined) {
    const { column, bodies, first, largest } = refused;
    throw new InputError(
      'input.wouldBeRounded',
      `${from}: ${column} would not be the same in ${to} for ${bodies} ${bodies === 1 ? 'body' : 'bodies'}: body ${first.body} has ${first.from} and would have ${first.to}`,
      largest === null
        ? 'Choose a type in the layout to write that holds it.'
        : 'Choose a wider type in the layout to write, or allow it with --round.',
    );
  }
  const dropped = [...new Set([...job.told.map(({ name }) => name), ...names])];
  return { dropped, rounded: counted };
}

function refuseLosses({ from, to, drop }: Job, losses: readonly Loss[]): void {
  const refused = losses.filter(({ name }) => !isDropped(drop, name));
  if (refused.length === 0) return;
  const names = [...new Set(refused.map(({ name }) => name))];
  const texts = [...new Set(refused.map(({ text }) => text))];
  throw new InputError(
    'input.wouldBeLost',
    `${from}: ${to} would not hold ${texts.slice(0, 8).join(', ')}${texts.length > 8 ? ` and ${texts.length - 8} more` : ''}`,
    `Name a layout that holds them with --to-layout, or allow the loss with --drop ${names.join(',')}`,
  );
}

/** What the particles hold and a layout does not, as far as the layout alone tells. */
async function notHeld(particles: Particles, layout: Layout, to: string): Promise<Loss[]> {
  const { planColumns } = await import('../snapshot/raw/plan.ts');
  const plan = planColumns(to, layout, { optional: [...OPTIONAL_FIELDS] });
  const columns = [...numberColumns(particles).keys()].filter((name) => !plan.has(name as never));
  const hasComponents = plan.has('component') || layout.components !== undefined;
  if (particles.columns.component !== undefined && !hasComponents) columns.push('component');
  const stated = new Set([...layout.header.map(({ name }) => name), ...keysOf(layout.constants)]);
  const facts = (['time', 'gravity', 'softening'] as const).filter(
    (name) => particles[name] !== null && !stated.has(name) && !plan.has(name as never),
  );
  const losses = [
    ...columns.map((name) => ({ name: wholeName(name), text: `the column ${wholeName(name)}` })),
    ...facts.map((name) => ({ name, text: factText(particles, name) })),
  ];
  const { units } = particles;
  return units === null || layout.units === units.name
    ? losses
    : [...losses, { name: 'units', text: factText(particles, 'units') }];
}

const keysOf = (value: object | undefined): string[] => Object.keys(value ?? {});

function nameText({ particles }: Job, name: string): string {
  if (name === 'frame') return 'the frame of the coordinates as it is';
  return name === 'units' || (name in FACT_NAMES && particles[name as 'time'] !== null)
    ? factText(particles, name as keyof typeof FACT_NAMES | 'units')
    : `the column ${name}`;
}

const FACT_NAMES = { time: 'the time', gravity: 'G', softening: 'the softening' } as const;

function factText(particles: Particles, name: keyof typeof FACT_NAMES | 'units'): string {
  if (name !== 'units') return `${FACT_NAMES[name]} ${particles[name]}`;
  const { name: system } = particles.units ?? { name: '' };
  return system === 'own' ? 'units of its own' : `the units ${system}`;
}

const PARTS: Readonly<Record<string, string>> = {
  ax: 'acceleration',
  ay: 'acceleration',
  az: 'acceleration',
};

/** `acceleration` for a part of it. */
const wholeName = (name: string): string => PARTS[name] ?? name;

function isDropped(drop: ReadonlySet<string>, name: string): boolean {
  return drop.has(name) || drop.has(wholeName(name));
}

/** The particles without optional columns and facts that are to be dropped. */
function without(particles: Particles, drop: ReadonlySet<string>): Particles {
  const columns = Object.fromEntries(
    Object.entries(particles.columns).filter(([name]) => !drop.has(name)),
  );
  const keep = <T>(name: string, value: T): T | null => (drop.has(name) ? null : value);
  return {
    ...particles,
    columns,
    time: keep('time', particles.time),
    gravity: keep('gravity', particles.gravity),
    units: keep('units', particles.units),
    softening: keep('softening', particles.softening),
  };
}

const NEEDED = ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz', 'position', 'velocity', 'm'];

/** @throws UsageError `usage.unknownField` for a name that the snapshot has not */
function checkNames(particles: Particles, drop: ReadonlySet<string>): void {
  const { columns, origin } = particles;
  const facts = ['time', 'gravity', 'units', 'softening'] as const;
  const known = [
    ...Object.keys(columns),
    ...facts.filter((name) => particles[name] !== null),
    ...(origin.unread ?? []).map(({ name }) => name),
  ];
  for (const name of drop) {
    if (known.includes(name)) continue;
    const nearest = nearestName(name, known);
    const isNeeded = NEEDED.includes(name);
    throw new UsageError(
      'usage.unknownField',
      isNeeded
        ? `--drop ${name}: every snapshot needs it`
        : `--drop ${name}: ${origin.file} has no such thing${known.length === 0 ? '' : `; it has ${[...new Set(known)].join(', ')}`}`,
      nearest === null || isNeeded ? 'Leave it out of --drop.' : `Did you mean "${nearest}"?`,
    );
  }
}

function formatOf(to: string, { format, toLayout, precision }: ConvertOptions): 'raw' | 'arrow' {
  const found = format ?? (toLayout === undefined ? formatByEnding(to) : 'raw');
  if (found === null) {
    throw new UsageError(
      'usage.format',
      `the ending of ${to} does not say which format is wanted`,
      'Add --format raw or --format arrow.',
    );
  }
  if (toLayout !== undefined && (found === 'arrow' || precision !== undefined)) {
    throw new UsageError(
      'usage.convertOption',
      found === 'arrow'
        ? `--to-layout ${toLayout} with an Arrow file; layouts are for raw files`
        : `--precision ${precision} with --to-layout ${toLayout}, which has types of its own`,
      'Leave one of the two out.',
    );
  }
  return found;
}

/** @throws UsageError `usage.convertTarget` if the target is an input, or something that cannot be replaced */
async function checkTarget(from: string, to: string, options: ConvertOptions): Promise<void> {
  const refuse = (text: string, remedy: string) => {
    throw new UsageError('usage.convertTarget', text, remedy);
  };
  if (to === '-') refuse('convert cannot write to "-": the file is checked first', 'Name a file.');
  const target = await identity(to);
  if (target === null) return;
  if (!target.isFile) refuse(`${to} is not a regular file`, 'Give the name of a new file.');
  for (const input of [from, options.toLayout, options.read?.layout]) {
    if (input === undefined || input === '-') continue;
    if ((await identity(input))?.id === target.id) {
      refuse(`${to} is ${input} itself, which would be overwritten`, 'Give another name.');
    }
  }
}

/** Refuses to overwrite a part of the snapshot. */
async function refusePart(from: string, to: string, { layout }: ReadOptions): Promise<void> {
  const target = await identity(to);
  if (target === null || from === '-') return;
  const { findLayout } = await import('../snapshot/raw/find-layout.ts');
  // A layout that cannot be read is told when it is needed: an Arrow file needs none.
  const found = await findLayout(from, layout).catch(() => null);
  if (found?.layout.parts === undefined) return;
  const { partPaths } = await import('../snapshot/raw/part-names.ts');
  const paths = await partPaths(from, found.layout.parts).catch(() => []);
  for (const path of paths) {
    if ((await identity(path))?.id !== target.id) continue;
    throw new UsageError(
      'usage.convertTarget',
      `${to} is a part of the snapshot ${from}, which would be overwritten`,
      'Give another name.',
    );
  }
}

async function identity(path: string): Promise<{ id: string; isFile: boolean } | null> {
  const found = await stat(path, { bigint: true }).catch(() => null);
  return found && { id: `${found.dev}:${found.ino}`, isFile: found.isFile() };
}

/** The name under which a layout is found by itself. */
function layoutBeside(to: string): string {
  return join(dirname(to), `${basename(to, extname(to))}.layout.json`);
}

async function refuseOtherLayout(path: string, layout: Layout): Promise<void> {
  if ((await identity(path)) === null) return;
  const { loadLayout } = await import('../snapshot/raw/find-layout.ts');
  const own = await loadLayout(path).catch(() => null);
  if (JSON.stringify(own) === JSON.stringify(layout)) return;
  throw new UsageError(
    'usage.layoutExists',
    `${path} is there already, and is not the layout that would be written beside the new file`,
    'Name it with --to-layout if it is meant, or give the new file another name.',
  );
}

async function writeLayout(path: string, layout: unknown): Promise<void> {
  const { writeAtomically } = await import('../snapshot/atomic.ts');
  const text = `${JSON.stringify(layout, null, 2)}\n`;
  await writeAtomically(path, (handle) => handle.writeFile(text));
}
