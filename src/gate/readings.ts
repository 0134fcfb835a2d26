/** Records and verdict → the values of the quantities that rules name. */
import type { Cell } from '../dynamics/recordColumns.ts';
import { recordColumns } from '../dynamics/recordColumns.ts';
import type { MeasureRecord } from '../dynamics/record.ts';
import type { Verdict } from '../settling/verdict.ts';
import { OF_RUN, OF_SNAPSHOT, type Reading } from './derived.ts';
import { VERDICT_SCALARS, type GateQuantity } from './quantities.ts';

/** Errors of figures that have none of their own name in the record. */
const ERRORS: Readonly<Record<string, string>> = { halfMassRadius: 'lagrangian.errors[0.5]' };

const NOTHING: Reading = { value: null, error: null };

export class Readings {
  readonly records: readonly MeasureRecord[];
  readonly verdict: Verdict | null;
  readonly #columns: ReadonlyMap<
    string,
    { readonly cells: readonly Cell[]; readonly error: string | null }
  >;

  private constructor(
    records: readonly MeasureRecord[],
    verdict: Verdict | null,
    columns: Awaited<ReturnType<typeof recordColumns>>,
  ) {
    this.records = records;
    this.verdict = verdict;
    this.#columns = new Map(columns.map(({ name, cells, error }) => [name, { cells, error }]));
  }

  static async of(records: readonly MeasureRecord[], verdict: Verdict | null): Promise<Readings> {
    return new Readings(records, verdict, await recordColumns(records));
  }

  /** The value of a quantity of snapshots in record k; null where the record has none. */
  ofSnapshot({ name }: GateQuantity, k: number): Reading {
    const record = this.records[k];
    if (Object.hasOwn(OF_SNAPSHOT, name)) return finite(OF_SNAPSHOT[name].of(record));
    const remark = /^remarks\[(.*)\]$/.exec(name)?.[1];
    if (remark !== undefined) {
      return { value: record.remarks.some(({ code }) => code === remark), error: null };
    }
    const column = this.#columns.get(name);
    if (column === undefined) return NOTHING;
    const error = this.#columns.get(column.error ?? ERRORS[name] ?? '')?.cells[k];
    return { value: column.cells[k], error: typeof error === 'number' ? error : null };
  }

  /** The value of a quantity of the run; null where there is no verdict. */
  ofRun({ name }: GateQuantity): Reading {
    const { verdict, records } = this;
    if (verdict === null) return NOTHING;
    if (Object.hasOwn(OF_RUN, name)) return finite(OF_RUN[name].of({ verdict, records }));
    const path = name.replace(/^verdict\./, '');
    const error = VERDICT_SCALARS[path][1];
    const at = error === null ? null : valueAt(verdict, error);
    return {
      value: valueAt(verdict, path) as Reading['value'],
      error: typeof at === 'number' ? at : null,
    };
  }
}

function valueAt(verdict: Verdict, path: string): unknown {
  let value: unknown = verdict;
  for (const key of path.split('.')) {
    if (typeof value !== 'object' || value === null) return null;
    value = (value as Readonly<Record<string, unknown>>)[key] ?? null;
  }
  return value;
}

/** Ratios of extreme figures may overflow: that is no figure. */
function finite({ value, error }: Reading): Reading {
  const good = typeof value !== 'number' || Number.isFinite(value);
  return { value: good ? value : null, error: Number.isFinite(error) ? error : null };
}
