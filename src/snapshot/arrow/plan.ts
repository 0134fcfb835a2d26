/** Which columns of an Arrow schema become which columns of Particles. */
import { Precision } from 'apache-arrow/enum';
import { DataType } from 'apache-arrow/type';
import { InputError } from '../../errors.ts';
import { missingColumn, unknownColumn } from '../columns.ts';
import type { FieldName, ReadOptions } from '../reading.ts';
import { BYTES_OF, type NumberKind, type PlannedColumn, type StoredKind } from './kinds.ts';
import { typeName, type Schema } from './messages.ts';

const VECTORS: Readonly<Partial<Record<FieldName, readonly FieldName[]>>> = {
  position: ['x', 'y', 'z'],
  velocity: ['vx', 'vy', 'vz'],
  acceleration: ['ax', 'ay', 'az'],
};
const IDENTIFIERS: readonly FieldName[] = ['id', 'group', 'subgroup'];
const OPTIONAL: readonly FieldName[] = [
  'component',
  'softening',
  'potential',
  'specificEnergy',
  'density',
  'group',
  'subgroup',
];

/**
 * Plans the load: mass, position, velocity (needed), id (if there is one), and of `options.optional`
 * what the file has. A vector is taken from three columns if all are there, else from one
 * FixedSizeList<3>; a column named in `options.columns` goes before both.
 * @throws InputError `input.missingColumn`, `input.unknownColumn`, `input.duplicateColumn`,
 * `input.columnType`
 */
export function planColumns(schema: Schema, file: string, options: ReadOptions): PlannedColumn[] {
  const finder = new ColumnFinder(schema, file, options);
  const wanted = new Set(options.optional ?? []);
  const mass = finder.scalar('mass') ?? finder.scalarNamed('mass', 'm');
  if (!mass) throw missingColumn(file, 'mass', finder.names);
  const position = finder.vector('position');
  const velocity = finder.vector('velocity');
  const optional = OPTIONAL.filter((field) => wanted.has(field)).map((field) =>
    finder.scalar(field),
  );
  const accelerations: FieldName[] = ['acceleration', 'ax', 'ay', 'az'];
  const acceleration = accelerations.some((field) => wanted.has(field))
    ? finder.vector('acceleration', true)
    : [];
  const all = [mass, ...position, ...velocity, finder.scalar('id'), ...optional, ...acceleration];
  return all.filter((column) => column !== null);
}

/** Our name for every column of the schema, as far as it has one; nothing is required. */
export function nameColumns(schema: Schema, options: ReadOptions): (FieldName | null)[] {
  const ours = new Map<string, FieldName>([['m', 'mass']]);
  for (const field of [
    ...IDENTIFIERS,
    ...OPTIONAL,
    'mass',
    ...Object.entries(VECTORS).flatMap(([vector, parts]) => [vector, ...parts]),
  ] as FieldName[]) {
    if (options.columns?.[field] === undefined) ours.set(field, field);
  }
  for (const [field, name] of Object.entries(options.columns ?? {})) {
    ours.set(name, field as FieldName);
  }
  return schema.fields.map(({ name }) => ours.get(name) ?? null);
}

/** The plan of one column, or null if its type cannot be one of ours. */
export function planField(
  schema: Schema,
  fieldIndex: number,
  field: FieldName,
): PlannedColumn | null {
  const { type, name: fileName } = schema.fields[fieldIndex];
  const targets = VECTORS[field] ?? [field];
  const base = { fieldIndex, fileName, field, targets, isText: false };
  if (field === 'component') {
    if (isText(type)) {
      return { ...base, kind: 'uint16', stored: 'uint16', dictionaryId: null, isText: true };
    }
    if (!DataType.isDictionary(type) || !isText(type.dictionary as DataType)) return null;
    const kind = numberKind(type.indices);
    return kind && { ...base, kind, stored: 'uint16', dictionaryId: type.id };
  }
  let element: DataType = type;
  if (targets.length === 3) {
    if (!DataType.isFixedSizeList(type) || type.listSize !== 3 || !type.children[0]) return null;
    element = type.children[0].type as DataType;
  }
  const kind = numberKind(element);
  if (kind === null) return null;
  return { ...base, kind, stored: storedKind(kind, field), dictionaryId: null };
}

function isText(type: DataType): boolean {
  return DataType.isUtf8(type) || DataType.isLargeUtf8(type) || DataType.isUtf8View(type);
}

function numberKind(type: DataType): NumberKind | null {
  if (DataType.isInt(type)) {
    const kind = `${type.isSigned ? '' : 'u'}int${type.bitWidth}`;
    return kind in BYTES_OF ? (kind as NumberKind) : null;
  }
  if (!DataType.isFloat(type)) return null;
  switch (type.precision) {
    case Precision.HALF:
      return 'float16';
    case Precision.SINGLE:
      return 'float32';
    case Precision.DOUBLE:
      return 'float64';
    default:
      return null;
  }
}

function storedKind(kind: NumberKind, field: FieldName): StoredKind {
  if (kind === 'float16') return 'float32';
  if (kind === 'float32' || kind === 'float64' || IDENTIFIERS.includes(field)) return kind;
  return 'float64';
}

class ColumnFinder {
  readonly names: readonly string[];
  private readonly schema: Schema;
  private readonly file: string;
  private readonly columns: NonNullable<ReadOptions['columns']>;

  constructor(schema: Schema, file: string, options: ReadOptions) {
    this.schema = schema;
    this.file = file;
    this.columns = options.columns ?? {};
    this.names = schema.fields.map(({ name }) => name);
  }

  /** The column of our name, or of the name that the user gave for it; null if there is none. */
  scalar(field: FieldName): PlannedColumn | null {
    const given = this.columns[field];
    if (given !== undefined && !this.names.includes(given))
      throw unknownColumn(this.file, field, given, this.names);
    return this.scalarNamed(field, given ?? field);
  }

  scalarNamed(field: FieldName, name: string): PlannedColumn | null {
    const fieldIndex = this.names.indexOf(name);
    if (fieldIndex < 0) return null;
    if (this.names.includes(name, fieldIndex + 1))
      throw new InputError(
        'input.duplicateColumn',
        `${this.file}: several columns are named "${name}"; expected one`,
        'Rename or drop all but one of them.',
      );
    const planned = planField(this.schema, fieldIndex, field);
    if (!planned) throw this.wrongType(fieldIndex, field);
    return planned;
  }

  vector(vector: FieldName, optional = false): PlannedColumn[] {
    const parts = VECTORS[vector] ?? [];
    const asOne = this.columns[vector] !== undefined;
    const asThree = parts.some((part) => this.columns[part] !== undefined);
    if (!asOne || asThree) {
      const separate = parts.map((part) => this.scalar(part));
      const found = separate.filter((column) => column !== null);
      if (found.length === 3) return found;
      const missing = parts[separate.indexOf(null)];
      if (asThree) throw missingColumn(this.file, missing, this.names);
      const whole = this.scalar(vector);
      if (whole) return [whole];
      if (optional) return [];
      const field = found.length > 0 ? missing : vector;
      throw missingColumn(this.file, field, this.names, `, or ${parts.join(', ')} one by one.`);
    }
    const whole = this.scalar(vector);
    return whole ? [whole] : [];
  }

  private wrongType(fieldIndex: number, field: FieldName): InputError {
    const { name, type } = this.schema.fields[fieldIndex];
    const expected =
      field === 'component'
        ? 'texts, or a dictionary of texts'
        : VECTORS[field]
          ? 'a FixedSizeList of 3 numbers'
          : 'integers or floating-point numbers';
    return new InputError(
      'input.columnType',
      `${this.file}: column "${name}" (${field}) holds ${typeName(type)}; expected ${expected}`,
      field === 'component'
        ? 'Write names, best as a dictionary (a categorical column).'
        : 'Cast the column before writing, or name another one with --columns.',
    );
  }
}
