/** Arrow IPC → Particles. */
import { InputError } from '../../errors.ts';
import { reusingMemory } from '../../numerics/reuse.ts';
import type { Crew } from '../../parallel/crew.ts';
import { withInput, type OpenFile } from '../files.ts';
import type {
  FloatColumn,
  OptionalColumns,
  ParticleOrigin,
  Particles,
  Unread,
} from '../particles.ts';
import { seldom } from '../pieces.ts';
import type { FieldName, ReadOptions } from '../reading.ts';
import { BatchPlanner } from './batches.ts';
import type { StoredColumn } from './convert.ts';
import { isFact, readFacts, type SnapshotFacts } from './facts.ts';
import { FileCursor, readFooter, streamMessages } from './framing.ts';
import { type NumberKind, type PlannedColumn } from './kinds.ts';
import { allocateColumns, loadBatches, type ColumnSet } from './load.ts';
import type { Schema } from './messages.ts';
import { planColumns } from './plan.ts';
import { countRows, planFile, sequentialMessages, withArrowFile } from './scan.ts';
import { fromStandardInput, StreamCursor } from './sequential.ts';

export { describeArrow } from './describe.ts';

/**
 * Reads an Arrow IPC file or stream: uncompressed, LZ4 frames or Zstandard; `-` is a stream on
 * standard input.
 *
 * The messages are checked first, then the columns are allocated once, in shared memory, and
 * filled from the file: uncompressed columns without any copy between, others with one column of
 * one batch beside them. Standard input cannot be read twice: its batches are kept and joined at
 * the end, column by column, so that the peak is the snapshot, one column and one batch.
 *
 * Columns: `mass` (or `m`); `x y z` or `position` as FixedSizeList<3>; likewise the velocity and
 * `acceleration` (`ax ay az`); `id` and what `options.optional` names, if the file has it. Float16
 * becomes float32, integers that mean a real become float64, identifiers keep their type.
 * Facts of the snapshot come from the schema's metadata `settlemark.time`, `.gravity`, `.units`,
 * `.softening`.
 * @throws InputError — opening: `input.notFound`, `input.noPermission`, `input.isDirectory`,
 * `input.notAFile`, `input.empty`, `input.unreadable`; format: `input.notArrow`, `input.arrowCut`,
 * `input.arrowDamaged`, `input.arrowVersion`, `input.byteOrder`, `input.codec`; columns:
 * `input.missingColumn`, `input.unknownColumn`, `input.duplicateColumn`, `input.columnType`,
 * `input.nulls`, `input.tooManyComponents`; else `input.metadata`, `input.units`,
 * `input.noParticles`, `input.tooLarge`, `input.changed`; InterruptedError
 */
export async function readArrow(
  path: string,
  options: ReadOptions = {},
  crew?: Crew,
): Promise<Particles> {
  if (path === '-') return readArrowStream(fromStandardInput(), path, options);
  return withInput(path, (file) => readArrowFile(file, options, crew));
}

/** {@link readArrow} for a file that is open. */
export async function readArrowFile(
  file: OpenFile,
  options: ReadOptions,
  crew?: Crew,
): Promise<Particles> {
  const { path } = file;
  return withArrowFile(file, async (isFile) => {
    const planner = particlePlanner(path, options);
    const batches = await planFile(file, isFile, planner, options);
    const count = countRows(batches);
    assertParticles(count, path);
    const columns = allocateColumns(planner.plan, count, path);
    await loadBatches(batches, planner.plan, columns, path, options, crew);
    const format = isFile ? 'arrow-file' : 'arrow-stream';
    return assemble(planner, columns, count, format, options);
  });
}

/**
 * Reads a file batch by batch. Each is given to `visit` before the next is read; errors as
 * {@link readArrow}.
 * @param first - index in the file of the first body of the part
 */
export async function readArrowParts(
  path: string,
  options: ReadOptions,
  visit: (part: Particles, first: number) => void,
): Promise<void> {
  await withInput(path, (file) =>
    withArrowFile(file, async (isFile) => {
      const planner = particlePlanner(path, options);
      const batches = await planFile(file, isFile, planner, options);
      assertParticles(countRows(batches), path);
      let first = 0;
      for (const batch of batches) {
        await reusingMemory(async () => {
          const columns = allocateColumns(planner.plan, batch.rows, path);
          await loadBatches([batch], planner.plan, columns, path, options);
          const format = isFile ? 'arrow-file' : 'arrow-stream';
          visit(assemble(planner, columns, batch.rows, format, options), first);
        });
        first += batch.rows;
      }
    }),
  );
}

/** The facts that the schema of an open file states; no batch is read. Errors as {@link readArrow}. */
export async function readArrowFacts(file: OpenFile, options: ReadOptions): Promise<SnapshotFacts> {
  return withArrowFile(file, async (isFile) => {
    if (isFile) return readFacts((await readFooter(file)).schema.metadata, file.path);
    const planner = particlePlanner(file.path, options);
    const cursor = new FileCursor(file, 0, file.size);
    for await (const message of streamMessages(cursor, file.path, options.signal)) {
      await planner.take(message);
      if (planner.schema) break;
    }
    return readFacts(planner.schema?.metadata ?? new Map<string, string>(), file.path);
  });
}

/** Reads a stream of bytes that can be taken only once; errors and columns as {@link readArrow}. */
export async function readArrowStream(
  source: AsyncIterable<Uint8Array>,
  name: string,
  options: ReadOptions = {},
): Promise<Particles> {
  const planner = particlePlanner(name, options);
  const cursor = new StreamCursor(source, name, options.signal);
  const { signal } = options;
  const tell = seldom(options.onProgress);
  let bytes = 0;
  const parts: { rows: number; columns: ColumnSet }[] = [];
  for await (const message of sequentialMessages(cursor, name, options)) {
    const batch = await planner.take(message);
    if (!batch || batch.rows === 0) continue;
    const columns = allocateColumns(planner.plan, batch.rows, name);
    await loadBatches([batch], planner.plan, columns, name, { signal });
    bytes += batch.bodyLength;
    tell(bytes, 0);
    parts.push({ rows: batch.rows, columns });
  }
  const count = parts.reduce((sum, { rows }) => sum + rows, 0);
  assertParticles(count, name);
  const columns = joinParts(planner.plan, parts, count, name);
  return assemble(planner, columns, count, 'arrow-stream', options);
}

function particlePlanner(file: string, options: ReadOptions): BatchPlanner {
  const plan = (schema: Schema) => {
    readFacts(schema.metadata, file); // so that wrong ones are told before anything is loaded
    return planColumns(schema, file, options);
  };
  return new BatchPlanner(file, plan, true);
}

function assertParticles(count: number, file: string): void {
  if (count > 0) return;
  throw new InputError(
    'input.noParticles',
    `${file} holds no bodies: its batches have 0 rows; expected at least one`,
    'Look whether the program that wrote it selected any.',
  );
}

/** Joins the columns of batches; frees those of a column as soon as it is joined. */
function joinParts(
  plan: readonly PlannedColumn[],
  parts: readonly { rows: number; columns: ColumnSet }[],
  count: number,
  name: string,
): ColumnSet {
  if (parts.length === 1) return parts[0].columns;
  const joined = new Map<FieldName, StoredColumn>();
  for (const column of plan) {
    for (const [target, values] of allocateColumns([column], count, name)) {
      let row = 0;
      for (const { rows, columns } of parts) {
        (values as Float64Array).set(columns.get(target) as Float64Array, row);
        (columns as Map<FieldName, StoredColumn>).delete(target);
        row += rows;
      }
      joined.set(target, values);
    }
  }
  return joined;
}

const MANTISSA_BITS: Readonly<Partial<Record<NumberKind, number>>> = { float16: 11, float32: 24 };
const PHASE_SPACE: readonly FieldName[] = ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'];

function assemble(
  planner: BatchPlanner,
  columns: ColumnSet,
  count: number,
  format: ParticleOrigin['format'],
  options: ReadOptions,
): Particles {
  const [mass, x, y, z, vx, vy, vz] = PHASE_SPACE.map((name) => columns.get(name) as FloatColumn);
  const facts = readFacts(planner.schema?.metadata ?? new Map<string, string>(), planner.file);
  const mantissaBits = Math.min(
    ...planner.plan
      .filter(({ targets }) => targets.some((target) => PHASE_SPACE.includes(target)))
      .map(({ kind }) => MANTISSA_BITS[kind] ?? 53),
  );
  const name = options.columns?.softening ?? 'softening';
  const hasMoreSoftening =
    !columns.has('softening') && planner.schema?.fields.some((field) => field.name === name);
  const origin: ParticleOrigin = {
    ...{ file: planner.file, format, mantissaBits, remarks: [], unread: unreadOf(planner) },
    ...(hasMoreSoftening === true && { hasMoreSoftening }),
  };
  const componentNames = planner.components.names;
  const optional = optionalColumns(columns);
  return { count, mass, x, y, z, vx, vy, vz, columns: optional, componentNames, ...facts, origin };
}

/** Columns and metadata that say something which the particles do not. */
function unreadOf({ schema, plan }: BatchPlanner): Unread[] {
  const planned = new Set(plan.map(({ fieldIndex }) => fieldIndex));
  const columns = (schema?.fields ?? []).filter((_, index) => !planned.has(index));
  const keys = [...(schema?.metadata.keys() ?? [])].filter((key) => !isFact(key));
  return [
    ...columns.map(({ name }) => ({ name, what: 'column' as const })),
    ...keys.map((name) => ({ name, what: 'key of the metadata' as const })),
  ];
}

function optionalColumns(columns: ColumnSet): OptionalColumns {
  const result: { -readonly [K in keyof OptionalColumns]: OptionalColumns[K] } = {};
  for (const name of ['softening', 'potential', 'specificEnergy', 'density'] as const) {
    const column = columns.get(name);
    if (column) result[name] = column as FloatColumn;
  }
  for (const name of ['id', 'group', 'subgroup'] as const) {
    const column = columns.get(name);
    if (column) result[name] = column;
  }
  const component = columns.get('component');
  if (component) result.component = component as Uint16Array;
  const [x, y, z] = (['ax', 'ay', 'az'] as const).map((name) => columns.get(name));
  if (x && y && z)
    result.acceleration = { x: x as FloatColumn, y: y as FloatColumn, z: z as FloatColumn };
  return result;
}
