/** The reader of raw files: layout, structure, plan, columns. */
import { InputError } from '../../errors.ts';
import { reusingMemory } from '../../numerics/reuse.ts';
import type { Crew } from '../../parallel/crew.ts';
import { assertUnchanged, withInput, type OpenFile } from '../files.ts';
import {
  allocateColumn,
  type FloatColumn,
  type OptionalColumns,
  type Particles,
  type Unread,
} from '../particles.ts';
import type { ReadOptions } from '../reading.ts';
import { UNIT_SYSTEMS } from '../units.ts';
import { readBodies, type BodyRange, type Target } from './bodies.ts';
import { ComponentCodes } from './component-codes.ts';
import type { PlacedComponent } from './components.ts';
import { allocateIds } from './decode.ts';
import { findLayout, type FoundLayout } from './find-layout.ts';
import { frameOf } from './frame.ts';
import { readHeader } from './header.ts';
import { layOverOrExplain } from './fit.ts';
import { isSkip, type Layout } from './layout.ts';
import {
  partialFields,
  planColumns,
  similarNames,
  type Plan,
  type Quantity,
  type Sources,
} from './plan.ts';
import { layOver, type RawStructure } from './structure.ts';
import { TYPE_DIGITS } from './types.ts';

/**
 * Reads a raw file as its layout says. Memory: one copy of the columns that are wanted, and one
 * chunk of 2 MiB a thread. Fields of float32 without a scale stay float32; all others are float64.
 * The values are not judged here (`screenParticles` does).
 *
 * @param path - a regular file
 * @throws InputError with a code of `openInput`, `findLayout`, `layOver`, `planColumns` or
 * `readBodies`; `input.tooLarge` if memory does not suffice; InterruptedError
 */
export function readRaw(path: string, options: ReadOptions, crew?: Crew): Promise<Particles> {
  return withInput(path, (file) => readRawFile(file, options, crew));
}

/** {@link readRaw} for a file that is open. */
export async function readRawFile(
  file: OpenFile,
  options: ReadOptions,
  crew?: Crew,
): Promise<Particles> {
  const found = await findLayout(file.path, options.layout);
  if (found.layout.parts !== undefined) {
    return (await import('./parts.ts')).readParts(file.path, found, options, crew);
  }
  const structure = await layOverOrExplain(file, found.layout, found.file);
  const whole = { begin: 0, end: structure.count };
  const particles = await readRange(file, found, structure, whole, options, crew);
  await assertUnchanged(file);
  return particles;
}

/**
 * Reads a file with a layout of which it is known that it is the right one, some bodies at a time.
 * Each part is given to `visit` before the next is read; errors as {@link readRaw}.
 * @param first - index in the file of the first body of the part
 */
export async function readRawParts(
  path: string,
  layout: Layout,
  bodiesAPart: number,
  options: ReadOptions,
  visit: (part: Particles, first: number) => void,
): Promise<void> {
  await withInput(path, async (file) => {
    const structure = await layOver(file, layout);
    const found = { layout, file: null, remarks: [] };
    for (let begin = 0; begin < structure.count; begin += bodiesAPart) {
      const range = { begin, end: Math.min(begin + bodiesAPart, structure.count) };
      await reusingMemory(async () => {
        visit(await readRange(file, found, structure, range, options), begin);
      });
    }
  });
}

async function readRange(
  file: OpenFile,
  found: FoundLayout,
  structure: RawStructure,
  range: BodyRange,
  options: ReadOptions,
  crew?: Crew,
): Promise<Particles> {
  const plan = planColumns(file.path, found.layout, options);
  const columns = allocate(file, range.end - range.begin, plan, found.layout);
  await readBodies(file, structure, [...columns.values()], [range], options, crew);
  return assemble(file.path, found, structure, plan, columns, options, range);
}

const ID_QUANTITIES: ReadonlySet<Quantity> = new Set(['id', 'group', 'subgroup']);

export type Columns = ReadonlyMap<Quantity, Target>;

/** Columns for so many bodies. @throws InputError `input.tooLarge` */
export function allocate(
  file: Pick<OpenFile, 'path'>,
  count: number,
  plan: Plan,
  layout: Layout,
): Columns {
  try {
    return new Map(
      [...plan].map(([quantity, sources]) => [
        quantity,
        allocateTarget(file, count, quantity, sources, layout),
      ]),
    );
  } catch (error) {
    if (!(error instanceof RangeError)) throw error;
    throw new InputError(
      'input.tooLarge',
      `${file.path} holds ${count} bodies, for which the memory of this process does not suffice`,
      'Run on a machine with more memory, or cut the snapshot into components.',
      { cause: error },
    );
  }
}

function allocateTarget(
  file: Pick<OpenFile, 'path'>,
  count: number,
  quantity: Quantity,
  sources: Sources,
  layout: Layout,
): Target {
  if (quantity === 'component') {
    return { kind: 'components', sources, codes: new ComponentCodes(file.path, count) };
  }
  if (ID_QUANTITIES.has(quantity) && sources.every(({ field }) => field.scale === 1)) {
    return { kind: 'ids', sources, column: allocateIds(count, sources[0].field.type) };
  }
  const type = isStated(layout, quantity) ? 'float64' : columnType(sources);
  return { kind: 'reals', sources, column: allocateColumn(count, type) };
}

/** The precision of the file is kept where nothing is lost by it. */
export function columnType(sources: Sources): 'float64' | 'float32' {
  const isSingle = ({ field }: Sources[number]) => field.type === 'float32' && field.scale === 1;
  return sources.every(isSingle) ? 'float32' : 'float64';
}

type StatedQuantity = 'mass' | 'softening';

/** Whether the layout itself states this quantity of all bodies or of some components. */
function isStated(layout: Layout, quantity: Quantity): quantity is StatedQuantity {
  if (quantity !== 'mass' && quantity !== 'softening') return false;
  const isConstant = quantity === 'mass' && layout.constants?.mass !== undefined;
  return isConstant || (layout.components ?? []).some((one) => one[quantity] !== undefined);
}

/** Writes what the layout states into a column of the bodies of a range. */
function fillStated(
  { components, layout }: RawStructure,
  range: BodyRange,
  quantity: StatedQuantity,
  column: FloatColumn,
): void {
  if (quantity === 'mass' && layout.constants?.mass !== undefined) {
    column.fill(layout.constants.mass);
  }
  for (const component of components) {
    const { [quantity]: value } = component;
    if (value !== null) column.fill(value, ...within(component, range));
  }
}

/** Indices in a range at which the bodies of a component begin and end. */
function within({ begin, count }: PlacedComponent, range: BodyRange): [number, number] {
  const index = (body: number) => Math.min(Math.max(body, range.begin), range.end) - range.begin;
  return [index(begin), index(begin + count)];
}

/** Particles of the columns that were read, and what the layout states of them. */
export function assemble(
  path: string,
  found: FoundLayout,
  structure: RawStructure,
  plan: Plan,
  columns: Columns,
  options: ReadOptions,
  range: BodyRange = { begin: 0, end: structure.count },
): Particles {
  const { layout } = found;
  for (const [quantity, target] of columns) {
    if (target.kind === 'reals' && isStated(layout, quantity)) {
      fillStated(structure, range, quantity, target.column);
    }
  }
  const [mass, x, y, z, vx, vy, vz] = PHASE_SPACE.map((name) => realsOf(columns, name));
  const { component, componentNames } = componentsOf(structure, range, columns, options);
  return {
    count: range.end - range.begin,
    ...{ mass, x, y, z, vx, vy, vz },
    columns: { ...optionalColumns(columns), ...(component && { component }) },
    componentNames,
    ...statedValues(path, structure),
    frame: frameOf(path, structure),
    origin: {
      file: path,
      format: 'raw',
      mantissaBits: mantissaBits(plan),
      ...(!plan.has('softening') && hasSoftening(layout, options) && { hasMoreSoftening: true }),
      remarks: [
        ...found.remarks,
        ...similarNames(path, layout, options),
        ...partialFields(path, layout, options, plan),
      ],
      unread: unreadOf(layout, plan),
    },
  };
}

const HEADER_USED = new Set(['time', 'count', 'gravity', 'softening', 'partCount', 'totalCount']);

/** Fields and items of the header that say something which the particles do not. */
function unreadOf(layout: Layout, plan: Plan): Unread[] {
  const planned = new Set([...plan.values()].flat().map(({ field }) => field));
  const fields = layout.fields.flatMap((entry) =>
    isSkip(entry) || planned.has(entry) ? [] : [entry.name],
  );
  const { scaleFactor, redshift, hubbleRate, boxSize } = layout.comoving ?? {};
  const referred = new Set(
    (layout.components ?? [])
      .flatMap(({ count, mass, softening }) => [count, mass, softening])
      // From the others of the frame the rate at this time follows, but not they from it.
      .concat(scaleFactor, redshift, hubbleRate, boxSize)
      .map((one) => (typeof one === 'object' ? one.header : null)),
  );
  const items = layout.header
    .filter(({ name }) => !HEADER_USED.has(name) && !referred.has(name))
    .map(({ name }) => ({ name, what: 'item of the header' as const }));
  return [...new Set(fields)].map((name): Unread => ({ name, what: 'field' })).concat(items);
}

/** Time, units, G and softening of an open file; no body is read. Errors as {@link readRaw}. */
export async function readRawFacts(
  file: OpenFile,
  options: ReadOptions,
): Promise<ReturnType<typeof statedValues>> {
  const { layout } = await findLayout(file.path, options.layout);
  return statedValues(file.path, { layout, header: (await readHeader(file, layout)).header });
}

const PHASE_SPACE = ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'] as const;

function realsOf(columns: Columns, quantity: Quantity): FloatColumn {
  const target = columns.get(quantity);
  if (target?.kind !== 'reals') throw new Error(`${quantity} was planned as something else`);
  return target.column;
}

/** Whether the file or its layout has softening lengths of all bodies or some. */
function hasSoftening({ fields, components = [] }: Layout, { columns }: ReadOptions): boolean {
  const name = columns?.softening ?? 'softening';
  return (
    fields.some((field) => 'name' in field && field.name === name) ||
    components.some(({ softening }) => softening !== undefined)
  );
}

/** Components as the layout lists them, or as a field has them. */
function componentsOf(
  { components }: RawStructure,
  range: BodyRange,
  columns: Columns,
  options: ReadOptions,
): { component?: Uint16Array; componentNames: readonly string[] } {
  const target = columns.get('component');
  if (target?.kind === 'components') {
    return { componentNames: target.codes.finish(), component: target.codes.column };
  }
  const isWanted = options.optional?.includes('component') ?? false;
  if (!isWanted || components.length === 0) return { componentNames: [] };
  const component = new Uint16Array(new SharedArrayBuffer(2 * (range.end - range.begin)));
  components.forEach((one, index) => component.fill(index, ...within(one, range)));
  return { component, componentNames: components.map(({ name }) => name) };
}

function optionalColumns(columns: Columns): OptionalColumns {
  const result: { -readonly [Key in keyof OptionalColumns]: OptionalColumns[Key] } = {};
  for (const quantity of ['softening', 'potential', 'specificEnergy', 'density'] as const) {
    const target = columns.get(quantity);
    if (target?.kind === 'reals') result[quantity] = target.column;
  }
  for (const quantity of ['id', 'group', 'subgroup'] as const) {
    const target = columns.get(quantity);
    if (target !== undefined && target.kind !== 'components') {
      result[quantity] = target.column;
    }
  }
  const [x, y, z] = (['ax', 'ay', 'az'] as const).map((quantity) => columns.get(quantity));
  if (x?.kind === 'reals' && y?.kind === 'reals' && z?.kind === 'reals') {
    result.acceleration = { x: x.column, y: y.column, z: z.column };
  }
  return result;
}

function mantissaBits(plan: Plan): number {
  const sources = PHASE_SPACE.flatMap((quantity) => plan.get(quantity) ?? []);
  return Math.min(53, ...sources.map(({ field }) => TYPE_DIGITS[field.type]));
}

/**
 * Time, units, G and softening as header or constants state them; null if they do not.
 * @throws InputError `input.headerValue` if one is not finite, or G ≤ 0, or a softening < 0
 */
export function statedValues(
  path: string,
  structure: Pick<RawStructure, 'layout' | 'header'>,
): Pick<Particles, 'time' | 'units' | 'gravity' | 'softening'> {
  const { layout, header } = structure;
  const value = (
    name: 'time' | 'gravity' | 'softening',
    expected: string,
    isValid: (value: number) => boolean,
  ): number | null => {
    const stated = header.get(name) ?? layout.constants?.[name];
    if (stated === undefined) return null;
    if (Number.isFinite(Number(stated)) && isValid(Number(stated))) return Number(stated);
    throw new InputError(
      'input.headerValue',
      `${path}: the header's ${name} is ${stated}; expected ${expected}`,
      'Correct its type, offset or byteOrder in the layout.',
    );
  };
  return {
    time: value('time', 'a finite number', () => true),
    gravity: value('gravity', 'a finite number above 0', (gravity) => gravity > 0),
    softening: value('softening', 'a finite number of at least 0', (length) => length >= 0),
    units: layout.units === undefined ? null : UNIT_SYSTEMS[layout.units],
  };
}
