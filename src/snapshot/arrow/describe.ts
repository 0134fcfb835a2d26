/** What is in an Arrow file, from its metadata and a few thousand rows at both ends. */
import { unknownColumn } from '../columns.ts';
import { withInput, type OpenFile } from '../files.ts';
import type { Remark } from '../particles.ts';
import type { DescribedColumn, FieldName, ReadOptions, SnapshotDescription } from '../reading.ts';
import { BatchPlanner, type PlannedBatch } from './batches.ts';
import type { StoredColumn } from './convert.ts';
import { readFacts } from './facts.ts';
import { BYTES_OF, type PlannedColumn } from './kinds.ts';
import { allocateColumns, loadBatches } from './load.ts';
import { typeName, type Schema } from './messages.ts';
import { nameColumns, planField } from './plan.ts';
import { countRows, planFile, sequentialMessages, withArrowFile } from './scan.ts';
import { fromStandardInput, StreamCursor } from './sequential.ts';

/** Rows looked at in the first batch and in the last one. */
const SAMPLE_ROWS = 4096;

/**
 * Describes an Arrow file or stream: schema, rows and metadata of all batches, and the range of the
 * values in the first and the last 4096 rows (of a compressed file: in the first and last batch).
 * `-` is read to its end, since only then its rows are known.
 * @param values - without them no column is read
 * @throws InputError as `readArrow`, except that columns that are missing, of another type or with
 * missing values are described, not refused
 */
export async function describeArrow(
  path: string,
  options: ReadOptions = {},
  values: 'values' | 'no values' = 'values',
): Promise<SnapshotDescription> {
  if (path === '-') return describeArrowStream(fromStandardInput(), path, options);
  return withInput(path, (file) =>
    withArrowFile(file, (isFile) => describeFile(file, isFile, options, values)),
  );
}

async function describeFile(
  file: OpenFile,
  isFile: boolean,
  options: ReadOptions,
  values: 'values' | 'no values',
): Promise<SnapshotDescription> {
  const planner = describingPlanner(file.path, options);
  const batches = await planFile(file, isFile, planner, options);
  const filled = batches.filter(({ rows }) => rows > 0);
  const ranges = new Ranges(planner);
  const [first] = filled;
  const last = filled.at(-1);
  if (values === 'values') {
    if (first) await ranges.look(first, 'begin', options);
    // All of a compressed batch has been looked at.
    if (last && (last !== first || !last.codec)) await ranges.look(last, 'end', options);
  }
  const format = isFile ? 'arrow-file' : 'arrow-stream';
  return describe(planner, batches, ranges, format, file.size);
}

/** Describes a stream of bytes that can be taken only once. */
export async function describeArrowStream(
  source: AsyncIterable<Uint8Array>,
  name: string,
  options: ReadOptions = {},
): Promise<SnapshotDescription> {
  const planner = describingPlanner(name, options);
  const ranges = new Ranges(planner);
  const counted: Pick<PlannedBatch, 'rows' | 'nulls'>[] = [];
  let last: PlannedBatch | null = null;
  const cursor = new StreamCursor(source, name, options.signal);
  for await (const message of sequentialMessages(cursor, name, options)) {
    const batch = await planner.take(message);
    if (!batch) continue;
    counted.push({ rows: batch.rows, nulls: batch.nulls });
    if (batch.rows === 0) continue;
    if (!last) await ranges.look(batch, 'begin', options);
    last = batch;
  }
  if (last) await ranges.look(last, 'end', options);
  return describe(planner, counted, ranges, 'arrow-stream', null);
}

function describingPlanner(file: string, options: ReadOptions): BatchPlanner {
  const plan = (schema: Schema) => {
    const names = schema.fields.map(({ name }) => name);
    for (const [field, name] of Object.entries(options.columns ?? {})) {
      if (!names.includes(name)) throw unknownColumn(file, field as FieldName, name, names);
    }
    const ours = nameColumns(schema, options);
    const planned = ours.map((field, i) => (field ? planField(schema, i, field) : null));
    return planned.filter((column) => column !== null);
  };
  return new BatchPlanner(file, plan, false);
}

interface Range {
  smallest: number | null;
  largest: number | null;
  notFinite: number;
}

/** Smallest and largest values of each planned column in the batches looked at. */
class Ranges {
  readonly byField = new Map<number, Range>();
  private readonly planner: BatchPlanner;

  constructor(planner: BatchPlanner) {
    this.planner = planner;
  }

  async look(batch: PlannedBatch, side: 'begin' | 'end', options: ReadOptions): Promise<void> {
    const { plan, file } = this.planner;
    // Columns with missing values hold anything in their place.
    const sound = plan.map((_, i) => i).filter((i) => batch.nulls[i] === 0 && !plan[i].isText);
    const chosen = sound.map((i) => plan[i]);
    const regions = sound.map((i) => batch.regions[i]);
    const part = batch.codec ? { ...batch, regions } : samplePart(batch, chosen, regions, side);
    const { signal } = options;
    for (let i = 0; i < chosen.length; i++) {
      const own = { ...part, regions: [part.regions[i]] };
      const columns = allocateColumns([chosen[i]], part.rows, file);
      await loadBatches([own], [chosen[i]], columns, file, { signal });
      if (chosen[i].dictionaryId !== null) continue;
      for (const values of columns.values()) this.add(chosen[i].fieldIndex, values);
    }
  }

  private add(fieldIndex: number, values: StoredColumn): void {
    const range = this.byField.get(fieldIndex) ?? { smallest: null, largest: null, notFinite: 0 };
    for (let i = 0; i < values.length; i++) {
      const value = Number(values[i]);
      if (!Number.isFinite(value)) {
        range.notFinite++;
        continue;
      }
      if (range.smallest === null || value < range.smallest) range.smallest = value;
      if (range.largest === null || value > range.largest) range.largest = value;
    }
    this.byField.set(fieldIndex, range);
  }
}

/** The first or last rows of an uncompressed batch, as a batch of their own. */
function samplePart(
  batch: PlannedBatch,
  plan: readonly PlannedColumn[],
  regions: PlannedBatch['regions'],
  side: 'begin' | 'end',
): PlannedBatch {
  const rows = Math.min(batch.rows, SAMPLE_ROWS);
  const skipped = side === 'begin' ? 0 : batch.rows - rows;
  const shifted = regions.map(({ offset, length }, i) => {
    const skip = skipped * plan[i].targets.length * BYTES_OF[plan[i].kind];
    return { offset: offset + skip, length: length - skip };
  });
  return { ...batch, rows, regions: shifted };
}

function describe(
  planner: BatchPlanner,
  batches: readonly Pick<PlannedBatch, 'rows' | 'nulls'>[],
  ranges: Ranges,
  format: SnapshotDescription['format'],
  bytes: number | null,
): SnapshotDescription {
  const { file, plan } = planner;
  const schema = planner.schema!;
  const { time, units, gravity, softening, frame } = readFacts(schema.metadata, file);
  const columns = schema.fields.map(({ name, type }, fieldIndex): DescribedColumn => {
    const planned = plan.find((column) => column.fieldIndex === fieldIndex);
    const range = ranges.byField.get(fieldIndex);
    return {
      name,
      field: planned?.field ?? null,
      type: typeName(type),
      width: planned?.targets.length ?? 1,
      offset: null,
      stride: null,
      smallest: range?.smallest ?? null,
      largest: range?.largest ?? null,
    };
  });
  const compression = [...planner.codecs].join(' and ') || 'uncompressed';
  const kind = format === 'arrow-file' ? 'file' : 'stream';
  const batchText = `${batches.length} ${batches.length === 1 ? 'batch' : 'batches'}`;
  return {
    file,
    format,
    bytes,
    count: countRows(batches),
    time,
    units: units?.name ?? null,
    gravity,
    softening,
    frame,
    byteOrder: 'little',
    structure: `Arrow IPC ${kind}, ${batchText}, ${compression}`,
    columns,
    components: planner.components.names.map((name) => ({ name, count: null, mass: null })),
    remarks: findings(plan, batches, ranges),
  };
}

function findings(
  plan: readonly PlannedColumn[],
  batches: readonly Pick<PlannedBatch, 'rows' | 'nulls'>[],
  ranges: Ranges,
): Remark[] {
  const remarks: Remark[] = [];
  plan.forEach(({ fileName, fieldIndex }, i) => {
    const nulls = batches.reduce((sum, batch) => sum + batch.nulls[i], 0);
    if (nulls > 0)
      remarks.push({
        code: 'nulls',
        text: `Column "${fileName}" has ${nulls} missing values.`,
        remedy: 'Fill them, or drop those bodies, before measuring.',
      });
    const notFinite = ranges.byField.get(fieldIndex)?.notFinite ?? 0;
    if (notFinite > 0)
      remarks.push({
        code: 'notFinite',
        text: `Column "${fileName}" has ${notFinite} values that are NaN or infinite among those looked at.`,
        remedy: 'Look at the bodies concerned in the simulation.',
      });
  });
  const found = new Set(plan.flatMap(({ targets }) => targets));
  const needed: FieldName[] = ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'];
  const missing = needed.filter((field) => !found.has(field));
  if (missing.length > 0)
    remarks.push({
      code: 'missingColumns',
      text: `No column for ${missing.join(', ')}.`,
      remedy: 'Say which they are with --columns name=column,….',
    });
  return remarks;
}
