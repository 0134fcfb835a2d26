/** Which number of which field goes into which of our columns. */
import { InputError } from '../../errors.ts';
import { nearestName } from '../../numerics/nearest.ts';
import { missingColumn, unknownColumn, unknownComponent } from '../columns.ts';
import type { Remark } from '../particles.ts';
import { FIELD_NAMES, type FieldName, type ReadOptions } from '../reading.ts';
import { isHeldBy, isSkip, type Layout, type LayoutComponent, type LayoutField } from './layout.ts';

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

/**
 * Of one column: several if components hold it in fields of their own; none if the layout states
 * the value (a mass or a softening).
 */
export type Sources = readonly Source[];

export type Plan = ReadonlyMap<Quantity, Sources>;

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
 * that the file has. A column is planned only if all components have it.
 * @throws InputError `input.unknownColumn`, `input.missingColumn`, `input.columnWidth`,
 * `input.unknownComponent`
 */
export function planColumns(file: string, layout: Layout, options: ReadOptions): Plan {
  const names = layout.components?.map(({ name }) => name) ?? [];
  if (options.only !== undefined && names.length > 0 && !names.includes(options.only)) {
    throw unknownComponent(file, options.only, names);
  }
  const finder = new FieldFinder(file, layout, options);
  const plan = new Map<Quantity, Sources>();
  const wanted = new Set<string>(options.optional ?? []);

  plan.set('mass', finder.needed('mass', finder.mass(), 'mass'));
  for (const { vector, scalars, needed } of VECTORS) {
    if (!needed && !wanted.has(vector) && !scalars.some((name) => wanted.has(name))) continue;
    const found = finder.vector(vector, scalars);
    if (!needed && !found.every((sources) => finder.isWhole(sources))) continue;
    const lacking = found.map((sources) => finder.lacking(sources));
    const isAbsent = lacking.every((one) => one === lacking[0]);
    scalars.forEach((name, k) => {
      plan.set(name, finder.needed(name, found[k], isAbsent ? vector : name));
    });
  }
  const others = OPTIONAL_SCALARS.filter((name) => wanted.has(name));
  for (const name of ['id', ...others] as const) {
    const sources = finder.scalar(name);
    if (finder.isWhole(sources, name)) plan.set(name, sources);
  }
  return plan;
}

const ALL = Symbol('all components');

class FieldFinder {
  readonly #file: string;
  readonly #layout: Layout;
  readonly #columns: NonNullable<ReadOptions['columns']>;
  readonly #fields: readonly LayoutField[];
  readonly #only: string | undefined;

  constructor(file: string, layout: Layout, options: ReadOptions) {
    this.#file = file;
    this.#layout = layout;
    this.#columns = options.columns ?? {};
    this.#only = options.only;
    this.#fields = layout.fields.flatMap((entry) => (isSkip(entry) ? [] : [entry]));
  }

  /** The fields of our name, or of the name that the user gave for it. */
  scalar(name: FieldName): Source[] {
    return this.#named(name, 1).map((field) => ({ field, lane: 0 }));
  }

  mass(): Source[] {
    const own = this.scalar('mass');
    if (this.#columns.mass !== undefined) return own;
    return [...own, ...this.#fields.filter(isNamed('m')).map((field) => ({ field, lane: 0 }))];
  }

  /** Sources of x, y and z: from fields of width 3 and from single ones. */
  vector(
    vector: 'position' | 'velocity' | 'acceleration',
    scalars: readonly FieldName[],
  ): Source[][] {
    const byScalars = scalars.some((name) => this.#columns[name] !== undefined);
    const whole = byScalars ? [] : this.#named(vector, 3);
    if (this.#columns[vector] !== undefined && !byScalars) {
      return scalars.map((_, lane) => whole.map((field) => ({ field, lane })));
    }
    return scalars.map((name, lane) => [
      ...whole.map((field) => ({ field, lane })),
      ...this.scalar(name),
    ]);
  }

  /** Whether all components have it. */
  isWhole(sources: Sources, quantity?: string): boolean {
    return this.lacking(sources, quantity) === null;
  }

  /** The sources, if all components have one. @throws InputError `input.missingColumn` */
  needed(quantity: Quantity, sources: Sources, asked: FieldName): Sources {
    const lacking = this.lacking(sources, quantity);
    if (lacking === null) return sources;
    const names = [...new Set(this.#fields.map(({ name }) => name))];
    const alternative =
      quantity !== 'mass'
        ? ''
        : lacking === ALL
          ? ', or give constants.mass in the layout.'
          : ', or give the component its mass in the layout.';
    const error = missingColumn(this.#file, asked, names, alternative);
    if (lacking === ALL) throw error;
    throw new InputError(
      'input.missingColumn',
      `${this.#file}: no column for ${asked} of the component ${lacking}; the file has ${names.join(', ')}`,
      `Add the component to the field in the layout${alternative || '.'}`,
    );
  }

  /** The first component that has it neither in a field nor stated; {@link ALL} if none has it. */
  lacking(sources: Sources, quantity?: string): string | typeof ALL | null {
    const { components, constants } = this.#layout;
    // What the layout itself can state, in place of a field.
    const stated = quantity === 'mass' || quantity === 'softening' ? quantity : null;
    if (stated === 'mass' && constants?.mass !== undefined) return null;
    if (components === undefined) return sources.length > 0 ? null : ALL;
    // Of the others nothing is kept.
    const wanted = components.filter(({ name }) => name === (this.#only ?? name));
    const isLacking = (component: LayoutComponent): boolean =>
      (stated === null || component[stated] === undefined) &&
      !sources.some(({ field }) => isHeldBy(field, component.name));
    const lacking = wanted.filter(isLacking);
    if (lacking.length === 0) return null;
    return lacking.length === components.length ? ALL : lacking[0].name;
  }

  #named(name: FieldName, width: number): LayoutField[] {
    const column = this.#columns[name];
    const fields = this.#fields.filter(isNamed(column ?? name));
    if (fields.length === 0 && column !== undefined) {
      const names = [...new Set(this.#fields.map((field) => field.name))];
      throw unknownColumn(this.#file, name, column, names);
    }
    for (const field of fields) {
      if (field.width === width) continue;
      throw new InputError(
        'input.columnWidth',
        `${this.#file}: "${field.name}" has ${field.width} numbers a body; expected ${width} for ${name}`,
        width === 3 ? 'Name a field of width 3, or x, y and z one by one.' : 'Name another field.',
      );
    }
    return fields;
  }
}

const isNamed =
  (name: string) =>
  (field: LayoutField): boolean =>
    field.name === name;

/** Remarks on columns that were asked for and that some components lack. */
export function partialFields(
  file: string,
  layout: Layout,
  options: ReadOptions,
  plan: Plan,
): Remark[] {
  const wanted = new Set<string>(options.optional ?? []);
  return layout.fields.flatMap((entry) => {
    if (isSkip(entry) || entry.components === undefined || !wanted.has(entry.name)) return [];
    if (plan.has((entry.name === 'acceleration' ? 'ax' : entry.name) as Quantity)) return [];
    const remark: Remark = {
      code: 'layout.partialField',
      text: `${file}: ${entry.name} was left on disk: of the components only ${entry.components.join(' and ')} have it`,
      remedy: 'Read these components alone if it is needed.',
    };
    return [remark];
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
