/** The reader of raw files: layout, structure, plan, columns. */
import { InputError } from '../../errors.ts';
import type { Crew } from '../../parallel/crew.ts';
import { assertUnchanged, withInput, type OpenFile } from '../files.ts';
import {
  allocateColumn,
  type FloatColumn,
  type OptionalColumns,
  type Particles,
} from '../particles.ts';
import type { ReadOptions } from '../reading.ts';
import { UNIT_SYSTEMS } from '../units.ts';
import { readBodies, type Target } from './bodies.ts';
import { ComponentCodes } from './components.ts';
import { allocateIds } from './decode.ts';
import { findLayout, type FoundLayout } from './find-layout.ts';
import { layOverOrExplain } from './fit.ts';
import { planColumns, similarNames, type Plan, type Quantity, type Source } from './plan.ts';
import type { RawStructure } from './structure.ts';
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
  const structure = await layOverOrExplain(file, found.layout, found.file);
  const plan = planColumns(file.path, found.layout, options);
  const columns = allocate(file, structure.count, plan);
  await readBodies(
    file,
    structure,
    [...columns.values()],
    [{ begin: 0, end: structure.count }],
    options,
    crew,
  );
  await assertUnchanged(file);
  return assemble(file.path, found, structure, plan, columns, options);
}

const ID_QUANTITIES: ReadonlySet<Quantity> = new Set(['id', 'group', 'subgroup']);

type Columns = ReadonlyMap<Quantity, Target>;

function allocate(file: OpenFile, count: number, plan: Plan): Columns {
  try {
    return new Map(
      [...plan].map(([quantity, source]) => [
        quantity,
        allocateTarget(file, count, quantity, source),
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

function allocateTarget(file: OpenFile, count: number, quantity: Quantity, source: Source): Target {
  const { type, scale } = source.field;
  if (quantity === 'component') {
    return { kind: 'components', source, codes: new ComponentCodes(file.path, count) };
  }
  if (ID_QUANTITIES.has(quantity) && scale === 1) {
    return { kind: 'ids', source, column: allocateIds(count, type) };
  }
  return { kind: 'reals', source, column: allocateColumn(count, columnType(source)) };
}

/** The precision of the file is kept where nothing is lost by it. */
export function columnType(source: Source): 'float64' | 'float32' {
  return source.field.type === 'float32' && source.field.scale === 1 ? 'float32' : 'float64';
}

function assemble(
  path: string,
  found: FoundLayout,
  structure: RawStructure,
  plan: Plan,
  columns: Columns,
  options: ReadOptions,
): Particles {
  const { layout } = found;
  const { count } = structure;
  const reals = (quantity: Quantity): FloatColumn => {
    const target = columns.get(quantity);
    if (target?.kind === 'reals') return target.column;
    // Only a mass can be missing here: it is the same for all bodies then.
    return allocateColumn(count).fill(layout.constants?.mass ?? NaN);
  };
  const components = columns.get('component');
  return {
    count,
    mass: reals('mass'),
    x: reals('x'),
    y: reals('y'),
    z: reals('z'),
    vx: reals('vx'),
    vy: reals('vy'),
    vz: reals('vz'),
    columns: optionalColumns(columns),
    componentNames: components?.kind === 'components' ? components.codes.finish() : [],
    ...statedValues(path, structure),
    frame: { kind: 'physical' },
    origin: {
      file: path,
      format: 'raw',
      mantissaBits: mantissaBits(plan),
      remarks: [...found.remarks, ...similarNames(path, layout, options)],
    },
  };
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
  const components = columns.get('component');
  if (components?.kind === 'components') result.component = components.codes.column;
  const [x, y, z] = (['ax', 'ay', 'az'] as const).map((quantity) => columns.get(quantity));
  if (x?.kind === 'reals' && y?.kind === 'reals' && z?.kind === 'reals') {
    result.acceleration = { x: x.column, y: y.column, z: z.column };
  }
  return result;
}

function mantissaBits(plan: Plan): number {
  let bits = 53;
  for (const quantity of ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'] as const) {
    const source = plan.get(quantity);
    if (source !== undefined) bits = Math.min(bits, TYPE_DIGITS[source.field.type]);
  }
  return bits;
}

/**
 * Time, units, G and softening as header or constants state them; null if they do not.
 * @throws InputError `input.headerValue` if one is not finite, or G ≤ 0, or a softening < 0
 */
export function statedValues(
  path: string,
  structure: RawStructure,
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
