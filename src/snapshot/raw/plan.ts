/** Which number of which field goes into which of our columns. */
import { InputError } from '../../errors.ts';
import { nearestName } from '../../numerics/nearest.ts';
import { missingColumn, unknownColumn } from '../columns.ts';
import type { Remark } from '../particles.ts';
import { FIELD_NAMES, type FieldName, type ReadOptions } from '../reading.ts';
import { isSkip, type Layout, type LayoutField } from './layout.ts';

/** Our columns, one number a body. */
export const QUANTITIES = [
  'mass',
  'x',
  'y',
  'z',
  'vx',
  'vy',
  'vz',
  'id',
  'component',
  'softening',
  'potential',
  'ax',
  'ay',
  'az',
  'specificEnergy',
  'density',
  'group',
  'subgroup',
] as const satisfies readonly FieldName[];

export type Quantity = (typeof QUANTITIES)[number];

/** One number of each body: item `lane` of a field. */
export interface Source {
  readonly field: LayoutField;
  readonly lane: number;
}

export type Plan = ReadonlyMap<Quantity, Source>;

const VECTORS = [
  { vector: 'position', scalars: ['x', 'y', 'z'], needed: true },
  { vector: 'velocity', scalars: ['vx', 'vy', 'vz'], needed: true },
  { vector: 'acceleration', scalars: ['ax', 'ay', 'az'], needed: false },
] as const;

const OPTIONAL_SCALARS = [
  'component',
  'softening',
  'potential',
  'specificEnergy',
  'density',
  'group',
  'subgroup',
] as const;

/**
 * Plans the reading of mass, position, velocity and `id`, and of the optional columns asked for
 * that the file has.
 * @throws InputError `input.unknownColumn`, `input.missingColumn`, `input.columnWidth`
 */
export function planColumns(file: string, layout: Layout, options: ReadOptions): Plan {
  const fields = new Map<string, LayoutField>();
  for (const entry of layout.fields) if (!isSkip(entry)) fields.set(entry.name, entry);
  const find = fieldFinder(file, fields, options);
  const plan = new Map<Quantity, Source>();

  const mass = find('mass', 1) ?? (options.columns?.mass === undefined ? find('m', 1) : null);
  if (mass !== null) plan.set('mass', { field: mass, lane: 0 });
  else if (layout.constants?.mass === undefined) {
    throw missingColumn(
      file,
      'mass',
      [...fields.keys()],
      ', or give constants.mass in the layout.',
    );
  }
  const wanted = new Set<string>(options.optional ?? []);
  for (const { vector, scalars, needed } of VECTORS) {
    if (!needed && !wanted.has(vector) && !scalars.some((name) => wanted.has(name))) continue;
    planVector(file, plan, [...fields.keys()], find, options, vector, scalars, needed);
  }
  const id = find('id', 1);
  if (id !== null) plan.set('id', { field: id, lane: 0 });
  for (const name of OPTIONAL_SCALARS) {
    const field = wanted.has(name) ? find(name, 1) : null;
    if (field !== null) plan.set(name, { field, lane: 0 });
  }
  return plan;
}

type Finder = (name: FieldName | 'm', width: number) => LayoutField | null;

function fieldFinder(
  file: string,
  fields: ReadonlyMap<string, LayoutField>,
  options: ReadOptions,
): Finder {
  return (name, width) => {
    const column = name === 'm' ? undefined : options.columns?.[name];
    const field = fields.get(column ?? name);
    if (field === undefined) {
      if (column === undefined || name === 'm') return null;
      throw unknownColumn(file, name, column, [...fields.keys()]);
    }
    if (field.width !== width) {
      throw new InputError(
        'input.columnWidth',
        `${file}: "${field.name}" has ${field.width} numbers a body; expected ${width} for ${name}`,
        width === 3 ? 'Name a field of width 3, or x, y and z one by one.' : 'Name another field.',
      );
    }
    return field;
  };
}

function planVector(
  file: string,
  plan: Map<Quantity, Source>,
  available: readonly string[],
  find: Finder,
  options: ReadOptions,
  vector: 'position' | 'velocity' | 'acceleration',
  scalars: readonly ('x' | 'y' | 'z' | 'vx' | 'vy' | 'vz' | 'ax' | 'ay' | 'az')[],
  needed: boolean,
): void {
  const byScalars = scalars.some((name) => options.columns?.[name] !== undefined);
  const field = byScalars ? null : find(vector, 3);
  if (field !== null) {
    scalars.forEach((name, lane) => plan.set(name, { field, lane }));
    return;
  }
  const found = scalars.map((name) => find(name, 1));
  if (!needed && found.every((one) => one === null)) return;
  found.forEach((one, index) => {
    const name = scalars[index];
    if (one === null) {
      const missing = found.every((other) => other === null) ? vector : name;
      throw missingColumn(file, missing, available);
    }
    plan.set(name, { field: one, lane: 0 });
  });
}

/** Remarks on fields that no column uses and whose names are nearly one of ours. */
export function similarNames(file: string, layout: Layout, options: ReadOptions): Remark[] {
  const known: readonly string[] = [...FIELD_NAMES, 'm'];
  const used = new Set(Object.values(options.columns ?? {}));
  const remarks: Remark[] = [];
  for (const entry of layout.fields) {
    if (isSkip(entry) || known.includes(entry.name) || used.has(entry.name)) continue;
    const nearest = nearestName(entry.name, known);
    // Of one or two letters nearly everything is near.
    if (nearest === null || nearest.length < 4) continue;
    remarks.push({
      code: 'layout.similarName',
      text: `${file}: the field "${entry.name}" is not used; a name that is known is "${nearest}"`,
      remedy: `If it is meant, correct the layout or say --columns ${nearest}=${entry.name}.`,
    });
  }
  return remarks;
}
