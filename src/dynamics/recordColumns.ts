/**
 * Records as columns of a table: one row a record, one flat name a figure.
 *
 * Names and types come from the schema of the record, and with it from the registry; so a quantity
 * or setting that is added there is in every table.
 */
import type { Dimension } from '../snapshot/units.ts';
import { unitText } from '../snapshot/unitText.ts';
import type { MeasureRecord } from './record.ts';
import { recordUnits } from './recordUnits.ts';
import { QUANTITIES, type Quantity } from './registry.ts';
import { recordJsonSchema } from './schema.ts';

export type CellType = 'text' | 'number' | 'integer' | 'boolean';
export type Cell = string | number | boolean | null;

/** One column, with a value or null for each record. */
export interface RecordColumn {
  /** Such as `whole.virialRatio`, `frame.centre.x`, `lagrangian[0.5]`, `settings.gravity`. */
  readonly name: string;
  readonly type: CellType;
  readonly cells: readonly Cell[];
  /** Powers of mass, length and time; null for what is no physical quantity. */
  readonly dimension: Dimension | null;
  /** In symbols, if all records have the same units; else empty, as for pure numbers. */
  readonly unit: string;
  /** Name of the column with the 1σ error, or null. */
  readonly error: string | null;
  /** One line for people. */
  readonly text: string;
}

/** Quantities that are no entries of the registry. */
const DIMENSIONS: Readonly<Record<string, Dimension>> = {
  time: { mass: 0, length: 0, time: 1 },
  'settings.gravity': { mass: -1, length: 3, time: -2 },
  'settings.softening.length': { mass: 0, length: 1, time: 0 },
  'settings.softening.support': { mass: 0, length: 1, time: 0 },
  'settings.softening.ofBodies.least': { mass: 0, length: 1, time: 0 },
  'settings.softening.ofBodies.greatest': { mass: 0, length: 1, time: 0 },
};
const SECONDS = 'engine.seconds.';

/** What is read here of a JSON Schema. */
interface Schema {
  readonly type?: string | readonly string[];
  readonly const?: unknown;
  readonly anyOf?: readonly Schema[];
  readonly properties?: Readonly<Record<string, Schema>>;
  readonly items?: Schema;
  readonly description?: string;
}

/**
 * The columns of a table of records, in the order of the record.
 *
 * A vector has the columns `.x .y .z`. Of the Lagrangian radii each mass fraction has one for the
 * radius (`lagrangian[0.5]`) and one for its error (`lagrangian.errors[0.5]`); fractions that any
 * of the records has, ascending. Other lists are numbered from 0. Of a setting there are the value
 * and, as `.from`, where it is from; of the remarks there are the codes, with spaces between. What no record has is left out.
 */
export async function recordColumns(records: readonly MeasureRecord[]): Promise<RecordColumn[]> {
  const table = new TableOfRecords(records);
  table.addBranch([], await recordJsonSchema(), '');
  return table.columns;
}

type Path = readonly string[];

const REGISTRY = new Map(QUANTITIES.map((quantity) => [quantity.key, quantity]));

class TableOfRecords {
  readonly columns: RecordColumn[] = [];
  readonly #records: readonly MeasureRecord[];

  constructor(records: readonly MeasureRecord[]) {
    this.#records = records;
  }

  addBranch(path: Path, schema: Schema, text: string): void {
    for (const [key, property] of Object.entries(schema.properties ?? {})) {
      this.#add([...path, key], property, property.description ?? text);
    }
  }

  #add(path: Path, schema: Schema, text: string): void {
    const name = path.filter((key) => key !== 'value').join('.');
    const quantity = REGISTRY.get(name);
    const type = plainType(schema);
    if (type === 'object') this.addBranch(path, schema, text);
    else if (quantity?.kind === 'vector') this.#addVector(path, quantity);
    else if (type === 'array' && quantity !== undefined) this.#addList(path, quantity, schema);
    else if (type === 'array') this.#addWords(path, name, text);
    else this.#put(name, cellType(type, schema), this.#cells(path), text, quantity);
  }

  #addVector(path: Path, quantity: Quantity): void {
    ['x', 'y', 'z'].forEach((axis, k) => {
      const cells = this.#cells(path, (vector) => (vector as number[])[k]);
      this.#put(`${quantity.key}.${axis}`, 'number', cells, quantity.text, quantity);
    });
  }

  #addList(path: Path, quantity: Quantity, schema: Schema): void {
    const set = path.slice(0, -1);
    const type = cellType(plainType(schema.items ?? {}), schema.items ?? {});
    if (!REGISTRY.has([...set, 'fractions'].join('.'))) {
      const lengths = this.#cells(path, (list) => (list as Cell[]).length);
      const length = lengths.reduce<number>((most, n) => Math.max(most, Number(n ?? 0)), 0);
      for (let k = 0; k < length; k++) {
        const cells = this.#cells(path, (list) => (list as Cell[])[k]);
        this.#put(`${quantity.key}[${k}]`, type, cells, quantity.text, quantity, `[${k}]`);
      }
      return;
    }
    if (path.at(-1) === 'fractions') return; // They are in the names of the other columns.
    for (const fraction of this.#fractionsOf(set)) {
      const key = path.at(-1) === 'radii' ? set.join('.') : quantity.key;
      const cells = this.#records.map((record) => {
        const fractions = valueAt(record, [...set, 'fractions']) as readonly number[] | null;
        const k = fractions?.indexOf(fraction) ?? -1;
        return k < 0 ? null : ((valueAt(record, path) as Cell[] | null)?.[k] ?? null);
      });
      this.#put(`${key}[${fraction}]`, type, cells, quantity.text, quantity, `[${fraction}]`);
    }
  }

  #fractionsOf(set: Path): number[] {
    const all = this.#records.flatMap(
      (record) => (valueAt(record, [...set, 'fractions']) as readonly number[] | null) ?? [],
    );
    return [...new Set(all)].sort((a, b) => a - b);
  }

  /** A list that is no quantity as one text: the codes of remarks, the fractions that were set. */
  #addWords(path: Path, name: string, text: string): void {
    const cells = this.#cells(path, (list) =>
      (list as readonly unknown[])
        .map((item) =>
          typeof item === 'object' && item !== null && 'code' in item ? item.code : item,
        )
        .join(' '),
    );
    this.#put(name, 'text', cells, text, undefined);
  }

  #put(
    name: string,
    type: CellType,
    cells: readonly (Cell | undefined)[],
    text: string,
    quantity: Quantity | undefined,
    member = '',
  ): void {
    if (cells.length > 0 && cells.every((cell) => cell === undefined)) return;
    const dimension = quantity?.dimension ?? DIMENSIONS[name] ?? null;
    const error = quantity?.error ?? null;
    this.columns.push({
      name,
      type,
      cells: cells.map((cell) => cell ?? null),
      dimension,
      unit: name.startsWith(SECONDS) ? 's' : dimension === null ? '' : this.#unitOf(dimension),
      error: error === null ? null : error + member,
      text,
    });
  }

  /** Undefined where a record has no such key. */
  #cells(
    path: Path,
    cellOf: (value: unknown) => Cell | undefined = (value) => value as Cell,
  ): (Cell | undefined)[] {
    return this.#records.map((record) => {
      const value = valueAt(record, path);
      return value === undefined || value === null ? value : cellOf(value);
    });
  }

  #unitOf(dimension: Dimension): string {
    const units = new Set(this.#records.map((record) => unitText(dimension, recordUnits(record))));
    return units.size === 1 ? [...units][0] : '';
  }
}

function valueAt(record: MeasureRecord, path: Path): unknown {
  let value: unknown = record;
  for (const key of path) {
    if (typeof value !== 'object' || value === null) return undefined;
    value = (value as Readonly<Record<string, unknown>>)[key];
  }
  return value;
}

/** The type that is not null. */
function plainType({ type, anyOf }: Schema): string {
  if (anyOf !== undefined) {
    const types = anyOf.map(plainType).filter((one) => one !== 'null');
    return types.includes('string') ? 'string' : types[0];
  }
  if (typeof type === 'string') return type;
  return type?.find((one) => one !== 'null') ?? 'null';
}

function cellType(type: string, schema: Schema): CellType {
  switch (type) {
    case 'string':
      return 'text';
    case 'integer':
    case 'number':
    case 'boolean':
      return type === 'number' && Number.isInteger(schema.const) ? 'integer' : type;
    default:
      throw new Error(`a table of records has no cells for ${type}`);
  }
}
