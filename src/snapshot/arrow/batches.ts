/** From messages to the list of what is to be read: which bytes of which body fill which rows. */
import type { DataType } from 'apache-arrow/type';
import { InputError } from '../../errors.ts';
import { readBody, type Body } from './body.ts';
import {
  codecOf,
  decompress,
  LENGTH_PREFIX,
  paddedLimit,
  promisedLength,
  type Codec,
  type CodecName,
} from './codecs.ts';
import { damaged } from './damage.ts';
import {
  assertComponentCount,
  ComponentNames,
  decodeTexts,
  offsetBytes,
  textIndices,
} from './dictionary.ts';
import type { FramedMessage } from './framing.ts';
import { BYTES_OF, type PlannedColumn } from './kinds.ts';
import { layoutBatch, type ColumnLayout, type Region } from './layout.ts';
import type { ArrowMessage, RecordBatch, Schema } from './messages.ts';

/** One record batch, checked: all that is needed to load its planned columns. */
export interface PlannedBatch {
  readonly place: string;
  readonly body: Body;
  readonly bodyLength: number;
  readonly rows: number;
  readonly codec: CodecName | null;
  /** Of the values of each planned column, in the order of the plan. */
  readonly regions: readonly Region[];
  /** Missing values of each planned column. */
  readonly nulls: readonly number[];
  /** From index in the batch's dictionary to our component; null if components are not loaded. */
  readonly componentOf: Uint16Array | null;
  /** Our component of each row, where the column holds plain texts. */
  readonly componentIndices: Uint16Array | null;
}

/** Takes the messages of one snapshot in order and plans its batches. */
export class BatchPlanner {
  readonly file: string;
  readonly components = new ComponentNames();
  /** Names of the codecs met. */
  readonly codecs = new Set<string>();
  schema: Schema | null = null;
  plan: readonly PlannedColumn[] = [];
  private readonly planSchema: (schema: Schema) => readonly PlannedColumn[];
  private readonly isForReading: boolean;

  /** @param isForReading - else for describing: missing values are counted, not refused, and texts left */
  constructor(
    file: string,
    planSchema: (schema: Schema) => readonly PlannedColumn[],
    isForReading: boolean,
  ) {
    this.file = file;
    this.planSchema = planSchema;
    this.isForReading = isForReading;
  }

  takeSchema(schema: Schema): void {
    this.schema = schema;
    this.plan = this.planSchema(schema);
  }

  /**
   * Takes one message; gives a batch if it was one.
   * @throws InputError `input.arrowDamaged`, `input.nulls`, `input.codec`, `input.tooManyComponents`
   */
  async take({ message, body, place }: FramedMessage): Promise<PlannedBatch | null> {
    if ((message.kind === 'schema') !== (this.schema === null))
      throw damaged(this.file, place, 'a schema must be the first message and the only schema');
    switch (message.kind) {
      case 'schema':
        this.takeSchema(message.schema);
        return null;
      case 'dictionary':
        await this.takeDictionary(message, body, place);
        return null;
      case 'batch':
        return this.planBatch(message, body, place);
    }
  }

  private async planBatch(
    message: ArrowMessage & { kind: 'batch' },
    body: Body,
    place: string,
  ): Promise<PlannedBatch> {
    const { batch, bodyLength, version } = message;
    const types = this.schema?.fields.map(({ type }) => type) ?? [];
    const layout = layoutBatch(types, batch, bodyLength, version, this.file, place);
    const rows = batch.length;
    const codec = await this.codecOf(batch);
    const nulls: number[] = [];
    const regions: Region[] = [];
    let componentIndices: Uint16Array | null = null;
    for (const column of this.plan) {
      const own = layout[column.fieldIndex];
      const isVector = column.targets.length === 3;
      const leaf = isVector ? own.children[0] : own;
      const values = rows * column.targets.length;
      const missing = isVector ? own.nulls + leaf.nulls : own.nulls;
      if (missing > 0 && this.isForReading) throw this.missingValues(column, missing, place);
      if (leaf.rows !== values)
        throw damaged(
          this.file,
          place,
          `${leaf.rows} numbers in "${column.fileName}", not ${values}`,
        );
      nulls.push(missing);
      const region = leaf.buffers[1];
      if (column.isText) {
        regions.push(region);
        if (!this.isForReading) continue;
        const type = types[column.fieldIndex];
        const [offsets, ...data] = await this.readTexts(own, type, rows, codec, body, place);
        const { components, file } = this;
        componentIndices = textIndices(type, rows, offsets, data, components, file, place);
        continue;
      }
      await this.checkLength(region, values * BYTES_OF[column.kind], codec, body, place);
      regions.push(region);
    }
    const needsComponents = this.plan.some(({ dictionaryId }) => dictionaryId !== null);
    const componentOf = needsComponents ? this.components.current : null;
    if (needsComponents && componentOf === null && rows > 0)
      throw damaged(this.file, place, 'the dictionary of its component column is missing');
    return {
      place,
      body,
      bodyLength,
      rows,
      codec: codec?.name ?? null,
      regions,
      nulls,
      componentOf,
      componentIndices,
    };
  }

  private async takeDictionary(
    message: ArrowMessage & { kind: 'dictionary' },
    body: Body,
    place: string,
  ): Promise<void> {
    const { batch: dictionary, bodyLength, version } = message;
    const type = this.schema?.dictionaries.get(dictionary.id);
    if (!type) throw damaged(this.file, place, `no column uses dictionary ${dictionary.id}`);
    const batch = dictionary.data;
    const [layout] = layoutBatch([type], batch, bodyLength, version, this.file, place);
    const column = this.plan.find(({ dictionaryId }) => dictionaryId === dictionary.id);
    if (!column) return;
    const count = batch.length;
    assertComponentCount(count, this.file);
    if (layout.nulls > 0) throw this.missingValues(column, layout.nulls, place);
    const codec = await this.codecOf(batch);
    const [offsets, ...data] = await this.readTexts(layout, type, count, codec, body, place);
    const texts = decodeTexts(type, count, offsets, data, this.file, place);
    this.components.add(texts, dictionary.isDelta, this.file);
  }

  /** Offsets (or views) and text buffers of a column of texts. */
  private readTexts(
    layout: ColumnLayout,
    type: DataType,
    count: number,
    codec: Codec | null,
    body: Body,
    place: string,
  ): Promise<Uint8Array[]> {
    return Promise.all(
      layout.buffers.slice(1).map((region, i) => {
        const needed = i === 0 && count > 0 ? offsetBytes(type, count) : 0;
        return this.readTextBuffer(region, needed, codec, body, place);
      }),
    );
  }

  private async readTextBuffer(
    region: Region,
    needed: number,
    codec: Codec | null,
    body: Body,
    place: string,
  ): Promise<Uint8Array> {
    const bytes = new Uint8Array(region.length);
    await readBody(body, bytes, region.offset);
    if (codec && bytes.length > 0) {
      // Texts have no length that follows from the schema: their own promise is all there is.
      const promised = needed || Math.max(0, unboundedPromise(bytes));
      return decompress(codec, bytes, promised, this.file, place);
    }
    if (bytes.length < needed)
      throw damaged(this.file, place, `${bytes.length} bytes of offsets, not ${needed}`);
    return bytes;
  }

  private async codecOf(batch: RecordBatch): Promise<Codec | null> {
    if (!batch.compression) return null;
    const { type, method } = batch.compression;
    const codec = await codecOf(type, method, this.file);
    this.codecs.add(codec.name);
    return codec;
  }

  /** Checks that a buffer can hold `needed` bytes and is not so long that it must hold others. */
  private async checkLength(
    region: Region,
    needed: number,
    codec: Codec | null,
    body: Body,
    place: string,
  ): Promise<void> {
    const { offset, length } = region;
    if (codec && length > 0) {
      if (length < LENGTH_PREFIX) throw damaged(this.file, place, `a buffer of ${length} bytes`);
      const prefix = new Uint8Array(LENGTH_PREFIX);
      await readBody(body, prefix, offset);
      promisedLength(prefix, codec, needed, this.file, place, length - LENGTH_PREFIX);
    } else if (length < needed || length > paddedLimit(needed)) {
      throw damaged(this.file, place, `a buffer of ${length} bytes where ${needed} are needed`);
    }
  }

  private missingValues(column: PlannedColumn, count: number, place: string): InputError {
    return new InputError(
      'input.nulls',
      `${this.file}: column "${column.fileName}" (${column.field}) has ${count} missing values in ${place}; expected none`,
      'Fill them, or drop those bodies, before writing the file.',
    );
  }
}

function unboundedPromise(bytes: Uint8Array): number {
  if (bytes.length < LENGTH_PREFIX) return 0;
  const promised = Number(new DataView(bytes.buffer, bytes.byteOffset).getBigInt64(0, true));
  return promised < 0 ? bytes.length - LENGTH_PREFIX : promised;
}
