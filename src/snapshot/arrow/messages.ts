/** Arrow's metadata, checked and then decoded by apache-arrow; any damage is an InputError. */
import type { Field as LooseField, Schema as LooseSchema } from 'apache-arrow/schema';
import type { DataType, TypeMap } from 'apache-arrow/type';
import { Footer } from 'apache-arrow/ipc/metadata/file';
import { Message, type DictionaryBatch, type RecordBatch } from 'apache-arrow/ipc/metadata/message';
import { MetadataVersion, Type } from 'apache-arrow/enum';
import { InputError, SettlemarkError } from '../../errors.ts';
import { damaged } from './damage.ts';
import { faultInFlatbuffer, slotPosition } from './flatbuffer.ts';
import { FOOTER, MESSAGE } from './shapes.ts';

/** A schema of any columns, with their types typed. */
export type Schema = LooseSchema<TypeMap>;
export type { DataType, RecordBatch, DictionaryBatch };

export type ArrowMessage = { readonly bodyLength: number; readonly version: number } & (
  | { readonly kind: 'schema'; readonly schema: Schema }
  | { readonly kind: 'batch'; readonly batch: RecordBatch }
  | { readonly kind: 'dictionary'; readonly batch: DictionaryBatch }
);

/** Arrow's name of a type, for instance `Float64`. */
export function typeName(type: DataType): string {
  return (type as { toString(): string }).toString();
}

/** Place and length of one message of a file, from its footer. */
export interface Block {
  readonly kind: 'batch' | 'dictionary';
  readonly offset: number;
  readonly metadataLength: number;
  readonly bodyLength: number;
}

/**
 * Decodes the metadata of one message.
 * @param bytes - the flatbuffer, without prefix
 * @throws InputError `input.arrowDamaged`, `input.byteOrder`, `input.arrowVersion`, `input.columnType`
 */
export function decodeMessage(bytes: Uint8Array, file: string, place: string): ArrowMessage {
  const fault = faultInFlatbuffer(bytes, MESSAGE);
  if (fault !== null) throw damaged(file, place, fault);
  return guarded(file, place, () => {
    const message = Message.decode(bytes);
    const { bodyLength, version } = message;
    if (bodyLength < 0) throw damaged(file, place, `its body has ${bodyLength} bytes`);
    assertVersion(version, file);
    if (message.isSchema()) {
      const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
      assertLittleEndian(view, followSlot(view, 2), file);
      const schema = message.header() as Schema;
      assertComplete(schema, file, place);
      return { kind: 'schema', schema, bodyLength, version };
    }
    if (message.isRecordBatch())
      return { kind: 'batch', batch: message.header(), bodyLength, version };
    if (message.isDictionaryBatch())
      return { kind: 'dictionary', batch: message.header(), bodyLength, version };
    throw damaged(file, place, 'a message of unknown kind');
  });
}

/** Decodes the footer of a file: schema and the places of all messages, dictionaries first. */
export function decodeFooter(
  bytes: Uint8Array,
  file: string,
): { readonly schema: Schema; readonly blocks: readonly Block[] } {
  const fault = faultInFlatbuffer(bytes, FOOTER);
  if (fault !== null) throw damaged(file, 'its footer', fault);
  return guarded(file, 'its footer', () => {
    const footer = Footer.decode(bytes);
    assertVersion(footer.version, file);
    const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
    assertLittleEndian(view, followSlot(view, 1), file);
    assertComplete(footer.schema, file, 'its footer');
    const blocks: Block[] = [];
    for (const block of footer.dictionaryBatches()) blocks.push(asBlock('dictionary', block));
    for (const block of footer.recordBatches()) blocks.push(asBlock('batch', block));
    return { schema: footer.schema as Schema, blocks };
  });
}

function asBlock(
  kind: Block['kind'],
  block: { offset: number; metaDataLength: number; bodyLength: number },
): Block {
  const { offset, metaDataLength, bodyLength } = block;
  return { kind, offset, metadataLength: metaDataLength, bodyLength };
}

/** Checks that every list says what it is a list of: the library fails on others when asked. */
function assertComplete(schema: LooseSchema, file: string, place: string): void {
  const check = ({ name, type }: LooseField): void => {
    const { children } = type as DataType;
    const isList = [Type.List, Type.LargeList, Type.FixedSizeList, Type.Map].includes(
      (type as DataType).typeId,
    );
    if (isList && !(children?.length === 1 && children[0]))
      throw damaged(file, place, `the list "${name}" has no type of its entries`);
    children?.forEach(check);
  };
  schema.fields.forEach(check);
}

/** Runs a decoder of apache-arrow; whatever it throws means that the bytes are wrong. */
function guarded<T>(file: string, place: string, decode: () => T): T {
  try {
    return decode();
  } catch (error) {
    if (error instanceof SettlemarkError) throw error;
    const text = error instanceof Error ? error.message : String(error);
    if (/^Unrecognized type/.test(text)) {
      throw new InputError(
        'input.columnType',
        `${file}: ${place} has a column of a type that is not supported (${text})`,
        'Write the file without run-end-encoded and list-view columns.',
        { cause: error },
      );
    }
    throw damaged(file, place, text, error);
  }
}

function assertVersion(version: number, file: string): void {
  const versions: readonly number[] = [MetadataVersion.V4, MetadataVersion.V5];
  if (versions.includes(version)) return;
  throw new InputError(
    'input.arrowVersion',
    `${file}: Arrow metadata of version V${version + 1}; expected V4 or V5`,
    'Write the file again with a library of Arrow format 1.0 or later.',
  );
}

/** Position of the table that slot `slot` of the root points to. */
function followSlot(view: DataView, slot: number): number {
  const position = slotPosition(view, 0, slot);
  return position + view.getUint32(position, true);
}

function assertLittleEndian(view: DataView, schemaTable: number, file: string): void {
  const position = slotPosition(view, schemaTable, 0);
  if (position === 0 || view.getInt16(position, true) === 0) return;
  throw new InputError(
    'input.byteOrder',
    `${file}: the numbers are big-endian; expected little-endian`,
    'Convert it on the machine that wrote it.',
  );
}
