/** Tables of records read back: the columns of `recordColumns` → records. */
import { RECORD_VERSION, type MeasureRecord } from '../dynamics/record.ts';
import { recordColumns } from '../dynamics/recordColumns.ts';
import { QUANTITIES } from '../dynamics/registry.ts';
import { InputError } from '../errors.ts';

type Cell = string | number | boolean | null;

/** A table as its reader gives it; numbers may still be text. */
export interface TableOfRecords {
  /** For messages. */
  readonly path: string;
  readonly names: readonly string[];
  readonly rows: number;
  readonly cell: (row: number, column: number) => Cell;
  /** Where a row stands, for messages. */
  readonly place: (row: number) => string;
}

/** Columns without which there is nothing to judge. */
const NEEDED = [
  'record',
  'time',
  'settings.gravity',
  'settings.softening.kernel',
  'frame.centreOfMass.x',
  'whole.particles',
  'whole.mass',
  'whole.energy',
  'bound.mass',
  'lagrangian[0.5]',
  'boundLagrangian[0.5]',
  'crossingTime',
];
const FRACTION = /^(lagrangian|boundLagrangian)(\.errors)?\[(.+)\]$/;
const MEMBER = /^(.+)\[(\d+)\]$/;
const VECTORS = new Set(QUANTITIES.filter(({ kind }) => kind === 'vector').map(({ key }) => key));
/** First keys of what is only measured when it is asked for: a null there is a key that is not there. */
const EXTRA_ROOTS = new Set(
  QUANTITIES.filter(({ extra }) => extra !== null).map(({ key }) => key.split('.')[0]),
);

const isOptional = (name: string): boolean =>
  EXTRA_ROOTS.has(name.split(/[.[]/)[0]) || name.startsWith('settings.softening.ofBodies.');

type Branch = { [key: string]: unknown };

/**
 * Records of a table. What a table does not hold is not in them: the words of remarks, of which there
 * are the codes.
 * @throws InputError `input.notARecord` with the column, or the row and column, that is wrong;
 *   `input.recordVersion`
 */
export async function recordsFromTable(table: TableOfRecords): Promise<MeasureRecord[]> {
  const missing = NEEDED.find((name) => !table.names.includes(name));
  if (missing !== undefined) throw notATable(table.path, `it has no column "${missing}"`);
  const texts = await textColumns();
  const setters = table.names.map((name) => setterOf(name));
  return Array.from({ length: table.rows }, (_, row) => {
    const record: Branch = {};
    table.names.forEach((name, column) => {
      const cell = typedCell(table, row, column, texts.has(name));
      if (cell !== null || !isOptional(name)) setters[column](record, cell);
    });
    if (record['record'] !== RECORD_VERSION) {
      throw new InputError(
        'input.recordVersion',
        `${table.place(row)}: a record of version ${JSON.stringify(record['record'])}; this Settlemark knows version ${RECORD_VERSION}`,
        'measure the snapshot again',
      );
    }
    return record as unknown as MeasureRecord;
  });
}

/** Names of the columns that hold text, by the schema of the record. */
async function textColumns(): Promise<ReadonlySet<string>> {
  const columns = await recordColumns([]);
  return new Set(columns.filter(({ type }) => type === 'text').map(({ name }) => name));
}

function typedCell(table: TableOfRecords, row: number, column: number, isText: boolean): Cell {
  const cell = table.cell(row, column);
  if (cell === '') return null;
  if (typeof cell !== 'string' || isText) return cell;
  if (cell === 'true' || cell === 'false') return cell === 'true';
  const value = Number(cell);
  if (Number.isFinite(value) && cell.trim() !== '') return value;
  throw notATable(table.place(row), `"${cell}" in column "${table.names[column]}" is no number`);
}

function setterOf(name: string): (record: Branch, cell: Cell) => void {
  const fraction = FRACTION.exec(name);
  if (fraction !== null) {
    const [, set, errors, text] = fraction;
    return (record, cell) => setFraction(record, set, errors !== undefined, Number(text), cell);
  }
  if (name === 'remarks') return (record, cell) => void (record[name] = codesOf(cell));
  const path = pathOf(name);
  const last = path.pop() as string;
  const isList = name === 'settings.fractions' || name === 'settings.with';
  return (record, cell) => {
    const value = isList ? wordsOf(cell, name) : cell;
    branchAt(record, path, last)[last] = value;
  };
}

/** Keys down to a figure; members of lists are keys too. */
function pathOf(name: string): string[] {
  const member = MEMBER.exec(name);
  if (member !== null) return [...pathOf(member[1]), member[2]];
  const keys = name.split('.');
  const axis = 'xyz'.indexOf(keys[keys.length - 1]);
  const vector = keys.slice(0, -1).join('.');
  if (VECTORS.has(vector)) return [...keys.slice(0, -1), String(axis)];
  if (keys[0] !== 'settings') return keys;
  const [, setting, ...rest] = keys;
  // The value is an object for the softening alone; what other settings have besides stands beside it.
  const isApart = rest.length > 0 && (setting !== 'softening' || rest[0] === 'from');
  return ['settings', setting, ...(isApart ? [] : ['value']), ...rest];
}

/** The object or list at a path, made where it is not there: a list where the next key is a number. */
function branchAt(record: Branch, path: readonly string[], last = ''): Branch {
  let branch = record;
  path.forEach((key, k) => {
    const isList = /^\d+$/.test(path[k + 1] ?? last);
    branch[key] ??= isList ? [] : {};
    branch = branch[key] as Branch;
  });
  return branch;
}

function setFraction(
  record: Branch,
  set: string,
  isError: boolean,
  fraction: number,
  cell: Cell,
): void {
  const { value: fractions } = branchAt(record, ['settings', 'fractions']) as {
    value?: readonly number[];
  };
  // A table has all fractions that any of its records has.
  if (fractions?.includes(fraction) === false) return;
  record[set] ??= { fractions: [], radii: [], errors: [] };
  const radii = record[set] as { fractions: number[]; radii: Cell[]; errors: Cell[] };
  let k = radii.fractions.indexOf(fraction);
  if (k < 0) k = radii.fractions.push(fraction) - 1;
  radii[isError ? 'errors' : 'radii'][k] = cell;
}

const wordsOf = (cell: Cell, name: string): unknown[] => {
  const words = String(cell ?? '')
    .split(' ')
    .filter((word) => word !== '');
  return name === 'settings.fractions' ? words.map(Number) : words;
};

const codesOf = (cell: Cell): object[] =>
  (wordsOf(cell, 'remarks') as string[]).map((code) => ({ code, text: code, remedy: '' }));

export function notATable(where: string, why: string, cause?: unknown): InputError {
  return new InputError(
    'input.notARecord',
    `${where}: not a table of records: ${why}`,
    'give files that `settlemark measure --format csv` or `--format arrow` wrote',
    { cause },
  );
}
