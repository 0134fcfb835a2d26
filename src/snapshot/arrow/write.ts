/** Particles → Arrow IPC, uncompressed. */
import type { FileHandle } from 'node:fs/promises';
import { MetadataVersion } from 'apache-arrow/enum';
import { Footer, FileBlock } from 'apache-arrow/ipc/metadata/file';
import {
  BufferRegion,
  DictionaryBatch,
  FieldNode,
  Message,
  RecordBatch,
} from 'apache-arrow/ipc/metadata/message';
import { Field, Schema } from 'apache-arrow/schema';
import { Dictionary, Float32, Float64, Int, Int32, Utf8, type DataType } from 'apache-arrow/type';
import { InputError, InterruptedError, UsageError } from '../../errors.ts';
import { writeAtomically } from '../atomic.ts';
import type { Particles } from '../particles.ts';
import { writeFacts } from './facts.ts';

export interface WriteArrowOptions {
  /** Default: a stream if the name ends in `.arrows`, else a file. */
  readonly format?: 'file' | 'stream';
  /** Default 262144: 2 MiB a column of float64. */
  readonly rowsPerBatch?: number;
  /** Of the columns that are no identifiers; default: the one they have. */
  readonly precision?: 'float32' | 'float64' | undefined;
  /** Looks at the temporary file before it gets its name; what it throws keeps it from that. */
  readonly check?: ((temporary: string) => Promise<void>) | undefined;
  readonly signal?: AbortSignal | undefined;
}

interface WrittenColumn {
  readonly name: string;
  readonly type: DataType;
  readonly values: ArrayBufferView<ArrayBufferLike> & {
    readonly BYTES_PER_ELEMENT: number;
    readonly length: number;
  };
}

const ALIGNMENT = 8;
const MAGIC = new TextEncoder().encode('ARROW1');
const END_OF_STREAM = Uint8Array.of(255, 255, 255, 255, 0, 0, 0, 0);
const ZEROS = new Uint8Array(ALIGNMENT);

/**
 * Writes columns `mass x y z vx vy vz` in the precision they have, the optional columns that there
 * are (`acceleration` as `ax ay az`, components as a dictionary), and time, units, G, softening as
 * metadata of the schema. The columns go to the file as they lie in memory: no copy is made, apart
 * from one batch of component indices and of columns that change their precision.
 *
 * The file appears whole or not at all.
 * @throws InputError `input.cannotWrite`, `input.doesNotFit` (a value beyond the range of float32);
 * UsageError `usage.rowsPerBatch`; InterruptedError
 * Source: Apache Arrow columnar format 1.5, "IPC Streaming Format", "IPC File Format".
 */
export async function writeArrow(
  path: string,
  particles: Particles,
  options: WriteArrowOptions = {},
): Promise<void> {
  const rowsPerBatch = options.rowsPerBatch ?? 2 ** 18;
  if (!Number.isInteger(rowsPerBatch) || rowsPerBatch < 1)
    throw new UsageError(
      'usage.rowsPerBatch',
      `writing ${path}: ${rowsPerBatch} rows in a batch; expected a whole number above 0`,
    );
  const format = options.format ?? (path.toLowerCase().endsWith('.arrows') ? 'stream' : 'file');
  const columns = columnsOf(particles, options.precision);
  const fields = columns.map(({ name, type }) => new Field(name, type, false));
  const schema = new Schema(fields, writeFacts(particles));
  const write = async (handle: FileHandle): Promise<void> => {
    const writer = new MessageWriter(handle, path);
    if (format === 'file') await writer.bytes([MAGIC, ZEROS.subarray(0, 2)]);
    await writer.message(Message.from(schema), []);
    if (particles.columns.component) await writer.dictionary(particles.componentNames);
    for (let begin = 0; begin < particles.count; begin += rowsPerBatch) {
      if (options.signal?.aborted === true) throw new InterruptedError();
      await writer.batch(columns, begin, Math.min(begin + rowsPerBatch, particles.count));
    }
    await writer.bytes([END_OF_STREAM]);
    if (format === 'file') await writer.footer(schema);
  };
  await writeAtomically(path, write, options.check);
}

const IDENTIFIERS = ['id', 'group', 'subgroup'];

function columnsOf(
  particles: Particles,
  precision: WriteArrowOptions['precision'],
): WrittenColumn[] {
  const { mass, x, y, z, vx, vy, vz, columns } = particles;
  const { acceleration, component, ...others } = columns;
  const named: [string, WrittenColumn['values']][] = Object.entries({
    ...{ mass, x, y, z, vx, vy, vz },
    ...others,
    ...(acceleration && { ax: acceleration.x, ay: acceleration.y, az: acceleration.z }),
  });
  const written = named.map(([name, values]) => {
    const keepsType = precision === undefined || IDENTIFIERS.includes(name);
    const wanted = precision === 'float32' ? new Float32() : new Float64();
    return { name, type: keepsType ? typeOf(values) : wanted, values };
  });
  if (component)
    written.push({
      name: 'component',
      type: new Dictionary(new Utf8(), new Int32(), 0),
      values: component,
    });
  return written;
}

function typeOf(values: WrittenColumn['values']): DataType {
  if (values instanceof Float64Array) return new Float64();
  if (values instanceof Float32Array) return new Float32();
  const signed =
    values instanceof BigInt64Array ||
    values instanceof Int32Array ||
    values instanceof Int16Array ||
    values instanceof Int8Array;
  return new Int(signed, (values.BYTES_PER_ELEMENT * 8) as 8 | 16 | 32 | 64);
}

/** Writes encapsulated messages one after the other and remembers where they lie. */
class MessageWriter {
  private readonly handle: FileHandle;
  private readonly path: string;
  private position = 0;
  private readonly batches: FileBlock[] = [];
  private readonly dictionaries: FileBlock[] = [];

  constructor(handle: FileHandle, path: string) {
    this.handle = handle;
    this.path = path;
  }

  async bytes(parts: readonly Uint8Array[]): Promise<void> {
    for (const part of parts) {
      let done = 0;
      while (done < part.length) {
        const { bytesWritten } = await this.handle.write(part, done, part.length - done);
        done += bytesWritten;
      }
      this.position += part.length;
    }
  }

  /** Prefix, metadata and body; every part begins at a multiple of 8 bytes. */
  async message(message: Message, body: readonly Uint8Array[]): Promise<FileBlock> {
    const offset = this.position;
    const metadata = Message.encode(message);
    const padded = roundUp(metadata.length);
    const prefix = new Uint8Array(8);
    new DataView(prefix.buffer).setUint32(0, 0xffffffff, true);
    new DataView(prefix.buffer).setInt32(4, padded, true);
    await this.bytes([prefix, metadata, ZEROS.subarray(0, padded - metadata.length)]);
    for (const part of body) {
      await this.bytes([part, ZEROS.subarray(0, roundUp(part.length) - part.length)]);
    }
    return new FileBlock(prefix.length + padded, message.bodyLength, offset);
  }

  async batch(columns: readonly WrittenColumn[], begin: number, end: number): Promise<void> {
    const rows = end - begin;
    const body = columns.map((column) => bytesOf(rowsOf(column, begin, end, this.path), 0, rows));
    const header = recordBatch(
      rows,
      columns.length,
      body.map((part) => [part]),
    );
    this.batches.push(await this.message(Message.from(header.batch, header.bodyLength), body));
  }

  async dictionary(names: readonly string[]): Promise<void> {
    const texts = names.map((name) => new TextEncoder().encode(name));
    const offsets = new Int32Array(names.length + 1);
    texts.forEach((text, i) => (offsets[i + 1] = offsets[i] + text.length));
    const data = new Uint8Array(offsets[names.length]);
    texts.forEach((text, i) => {
      data.set(text, offsets[i]);
    });
    const body = [bytesOf(offsets, 0, offsets.length), data];
    const { batch, bodyLength } = recordBatch(names.length, 1, [body]);
    const message = Message.from(new DictionaryBatch(batch, 0), bodyLength);
    this.dictionaries.push(await this.message(message, body));
  }

  async footer(schema: Schema): Promise<void> {
    const footer = Footer.encode(
      new Footer(schema, MetadataVersion.V5, this.batches, this.dictionaries),
    );
    const length = new Uint8Array(4);
    new DataView(length.buffer).setInt32(0, footer.length, true);
    await this.bytes([footer, length, MAGIC]);
  }
}

/** Metadata of a batch without missing values: each column an empty validity buffer and its data. */
function recordBatch(
  rows: number,
  columnCount: number,
  buffers: readonly (readonly Uint8Array[])[],
): { readonly batch: RecordBatch; readonly bodyLength: number } {
  const regions: BufferRegion[] = [];
  let offset = 0;
  for (const parts of buffers) {
    regions.push(new BufferRegion(offset, 0));
    for (const { length } of parts) {
      regions.push(new BufferRegion(offset, length));
      offset += roundUp(length);
    }
  }
  const nodes = Array.from({ length: columnCount }, () => new FieldNode(rows, 0));
  return { batch: new RecordBatch(rows, nodes, regions, null), bodyLength: offset };
}

/** Some rows of a column in the type that is written. */
function rowsOf(
  { name, type, values }: WrittenColumn,
  begin: number,
  end: number,
  path: string,
): WrittenColumn['values'] {
  if (values instanceof Uint16Array && name === 'component')
    return Int32Array.from(values.subarray(begin, end));
  if (values instanceof Float32Array && type instanceof Float64)
    return Float64Array.from(values.subarray(begin, end));
  if (!(values instanceof Float64Array && type instanceof Float32))
    return (values as Float64Array).subarray(begin, end);
  const narrow = Float32Array.from(values.subarray(begin, end));
  const bad = narrow.findIndex(
    (value, i) => !Number.isFinite(value) && Number.isFinite(values[begin + i]),
  );
  if (bad < 0) return narrow;
  throw new InputError(
    'input.doesNotFit',
    `${path}: ${name} of body ${begin + bad} is ${values[begin + bad]}, which float32 cannot hold`,
    'Write float64.',
  );
}

function bytesOf(values: WrittenColumn['values'], begin: number, end: number): Uint8Array {
  const width = values.BYTES_PER_ELEMENT;
  return new Uint8Array(values.buffer, values.byteOffset + begin * width, (end - begin) * width);
}

function roundUp(length: number): number {
  return Math.ceil(length / ALIGNMENT) * ALIGNMENT;
}
