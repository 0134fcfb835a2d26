/**
 * The tables of Arrow's metadata, for the check before decoding.
 * Source: Schema.fbs, Message.fbs and File.fbs of the Apache Arrow format, version 1.5; a slot is
 * the place of a field in its table (a union takes two).
 */
import type { TableShape } from './flatbuffer.ts';

const S1 = { scalar: 1 } as const;
const S2 = { scalar: 2 } as const;
const S4 = { scalar: 4 } as const;
const S8 = { scalar: 8 } as const;
const TEXT = { string: true } as const;

const KEY_VALUE: TableShape = { name: 'KeyValue', slots: [TEXT, TEXT] };
const METADATA = { tables: KEY_VALUE };

const plain = (name: string, ...slots: TableShape['slots']): TableShape => ({ name, slots });
const INT = plain('Int', S4, S1);

/** By the number of the type in the union `Type`. */
const TYPES: Readonly<Record<number, TableShape>> = {
  1: plain('Null'),
  2: INT,
  3: plain('FloatingPoint', S2),
  4: plain('Binary'),
  5: plain('Utf8'),
  6: plain('Bool'),
  7: plain('Decimal', S4, S4, S4),
  8: plain('Date', S2),
  9: plain('Time', S2, S4),
  10: plain('Timestamp', S2, TEXT),
  11: plain('Interval', S2),
  12: plain('List'),
  13: plain('Struct'),
  14: plain('Union', S2, { vectorOf: 4 }),
  15: plain('FixedSizeBinary', S4),
  16: plain('FixedSizeList', S4),
  17: plain('Map', S1),
  18: plain('Duration', S2),
  19: plain('LargeBinary'),
  20: plain('LargeUtf8'),
  21: plain('LargeList'),
  22: plain('RunEndEncoded'),
  23: plain('BinaryView'),
  24: plain('Utf8View'),
  25: plain('ListView'),
  26: plain('LargeListView'),
};

const DICTIONARY_ENCODING = plain('DictionaryEncoding', S8, { table: INT }, S1, S2);

const fieldSlots: TableShape['slots'][number][] = [
  TEXT,
  S1,
  S1,
  { union: TYPES },
  { table: DICTIONARY_ENCODING },
];
const FIELD: TableShape = { name: 'Field', slots: fieldSlots, required: [2, 3] };
fieldSlots.push({ tables: FIELD }, METADATA);

const SCHEMA: TableShape = {
  name: 'Schema',
  slots: [S2, { tables: FIELD }, METADATA, { vectorOf: 8 }],
  required: [1],
};

const BODY_COMPRESSION = plain('BodyCompression', S1, S1);
const RECORD_BATCH: TableShape = {
  name: 'RecordBatch',
  slots: [S8, { vectorOf: 16 }, { vectorOf: 16 }, { table: BODY_COMPRESSION }, { vectorOf: 8 }],
};
const DICTIONARY_BATCH: TableShape = {
  name: 'DictionaryBatch',
  slots: [S8, { table: RECORD_BATCH }, S1],
  required: [1],
};

export const MESSAGE: TableShape = {
  name: 'Message',
  slots: [S2, S1, { union: { 1: SCHEMA, 2: DICTIONARY_BATCH, 3: RECORD_BATCH } }, S8, METADATA],
  required: [1, 2],
};

export const FOOTER: TableShape = {
  name: 'Footer',
  slots: [S2, { table: SCHEMA }, { vectorOf: 24 }, { vectorOf: 24 }, METADATA],
  required: [1],
};
