/** A layout that holds all that particles hold, for files whose layout nobody has chosen. */
import type { FloatColumn, Frame, IdColumn, Particles } from '../particles.ts';
import { numberColumns } from '../particleColumns.ts';
import { UNIT_SYSTEMS } from '../units.ts';
import { layoutSchema, type Layout, type LayoutInput } from './layout.ts';
import type { NumberType } from './types.ts';

const VECTORS = [
  ['position', 'x', 'y', 'z'],
  ['velocity', 'vx', 'vy', 'vz'],
  ['acceleration', 'ax', 'ay', 'az'],
] as const;
const HEADER = ['time', 'gravity', 'softening'] as const;

/**
 * A little-endian layout, body after body, with the columns and facts of the particles: a header with
 * the number of bodies and what is known of time, G and softening; components as blocks if their
 * bodies lie together, else as codes if their names are whole numbers. Units of one's own and other
 * components have no place in it.
 * @param without - names of columns and facts to leave out
 * @param precision - of reals; default: the one they have
 */
export function fittingLayout(
  particles: Particles,
  without: ReadonlySet<string> = new Set(),
  precision?: 'float32' | 'float64',
): LayoutInput {
  const facts = HEADER.filter(
    (name) => particles[name] !== null && !without.has(name) && !(name in particles.columns),
  );
  const header = [
    { name: 'count', type: 'uint64', offset: 0 } as const,
    ...facts.map((name, k) => ({ name, type: 'float64', offset: 8 + 8 * k }) as const),
  ];
  const components = without.has('component') ? null : blocksOf(particles);
  const units = particles.units?.name;
  const isNamed =
    units !== undefined && Object.hasOwn(UNIT_SYSTEMS, units) && !without.has('units');
  return {
    settlemark: 'layout/1',
    headerBytes: 8 * header.length,
    header,
    ...(components && { components }),
    fields: fieldsOf(particles, without, precision, components !== null),
    ...(particles.frame.kind === 'comoving' && { comoving: comovingOf(particles.frame) }),
    ...(isNamed && { units: units as keyof typeof UNIT_SYSTEMS }),
  };
}

function comovingOf(frame: Extract<Frame, { kind: 'comoving' }>): LayoutInput['comoving'] {
  const { scaleFactor, hubbleRate, velocity, boxSize } = frame;
  return { scaleFactor, hubbleRate, velocity, ...(boxSize !== null && { boxSize }) };
}

/** {@link fittingLayout} with all defaults filled in. */
export function completeLayout(layout: LayoutInput): Layout {
  return layoutSchema.parse(layout);
}

function fieldsOf(
  particles: Particles,
  without: ReadonlySet<string>,
  precision: 'float32' | 'float64' | undefined,
  hasBlocks: boolean,
): LayoutInput['fields'] {
  const columns = [...numberColumns(particles)].filter(([name]) => !without.has(name));
  const types = new Map(
    columns.map(([name, values]): [string, NumberType] => [
      name,
      name === 'id' || name === 'group' || name === 'subgroup'
        ? typeOf(values)
        : (precision ?? typeOf(values)),
    ]),
  );
  const fields: LayoutInput['fields'] = [];
  for (const [name, type] of types) {
    const vector = VECTORS.find((parts) => (parts as readonly string[]).includes(name));
    if (vector === undefined || new Set(vector.slice(1).map((part) => types.get(part))).size > 1) {
      fields.push({ name, type });
    } else if (name === vector[1]) fields.push({ name: vector[0], type, width: 3 });
  }
  const { component } = particles.columns;
  const hasCodes = particles.componentNames.every((name) => /^-?\d+$/.test(name));
  if (component !== undefined && !hasBlocks && hasCodes && !without.has('component')) {
    fields.push({ name: 'component', type: 'int64' });
  }
  return fields;
}

/** Components whose bodies lie together, in their order in the file; null if they do not, or there are none. */
function blocksOf({ columns, componentNames, count }: Particles): LayoutInput['components'] | null {
  const { component } = columns;
  if (component === undefined) return null;
  const blocks: { name: string; count: number }[] = [];
  for (let begin = 0, end = 0; begin < count; begin = end) {
    while (end < count && component[end] === component[begin]) end++;
    const name = componentNames[component[begin]];
    if (name === '' || blocks.some((block) => block.name === name)) return null;
    blocks.push({ name, count: end - begin });
    if (blocks.length > componentNames.length) return null;
  }
  return blocks;
}

function typeOf(values: FloatColumn | IdColumn): NumberType {
  if (values instanceof Float64Array) return 'float64';
  if (values instanceof Float32Array) return 'float32';
  if (values instanceof BigInt64Array) return 'int64';
  if (values instanceof BigUint64Array) return 'uint64';
  if (values instanceof Int32Array) return 'int32';
  if (values instanceof Uint32Array) return 'uint32';
  if (values instanceof Int16Array) return 'int16';
  if (values instanceof Uint16Array) return 'uint16';
  return values instanceof Int8Array ? 'int8' : 'uint8';
}
