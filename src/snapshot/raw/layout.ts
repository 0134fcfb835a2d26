/**
 * The layout of a raw file: one schema for validation, for the types and for the published JSON
 * Schema. `docs/` tells users what it means; the checks that a schema cannot say are in
 * `layout-check.ts`.
 */
import { z } from 'zod';
import { VELOCITY_FORMS } from '../particles.ts';
import { UNIT_SYSTEMS } from '../units.ts';
import { NUMBER_TYPES, TYPE_BYTES } from './types.ts';

const numberType = z.enum(NUMBER_TYPES);

const headerItem = z
  .strictObject({
    name: z
      .string()
      .min(1)
      .describe(
        'time, count, gravity and softening are used; any other name is kept as a value of the header',
      ),
    type: numberType,
    offset: z
      .int()
      .min(0)
      .describe('bytes from the beginning of the header, Fortran length words not counted'),
  })
  .describe('one number of the header');

const fromHeader = z.string().min(1).describe('name of an item of the header');

const reference = z.strictObject({
  header: fromHeader,
  scale: z.number().default(1).describe('the value is the number in the header times this'),
});

/** A number in the layout, or one of the header. */
const stated = z.union([z.number(), reference]);

const component = z
  .strictObject({
    name: z.string().min(1),
    count: z
      .union([z.int().min(0), z.strictObject({ header: fromHeader })])
      .describe('number of bodies, 0 or more'),
    mass: stated.optional().describe('mass of each of its bodies, if no field holds it'),
    softening: stated
      .optional()
      .describe('Plummer-equivalent softening length of each of its bodies, if no field holds it'),
  })
  .describe('a kind of bodies that lie together');

const holders = z
  .array(z.string())
  .min(1)
  .optional()
  .describe('names of the components that hold it; all if left out');

const field = z
  .strictObject({
    name: z
      .string()
      .min(1)
      .describe(
        'mass position velocity, or m, x y z, vx vy vz; id component softening potential acceleration (ax ay az) specificEnergy density group subgroup; a field of any other name is left on disk',
      ),
    type: numberType,
    width: z
      .int()
      .min(1)
      .max(65536)
      .default(1)
      .describe('numbers a body: 3 for position, velocity, acceleration'),
    scale: z.number().default(1).describe('the value is the number in the file times this; not 0'),
    components: holders,
  })
  .describe('a quantity of each body');

const skip = z
  .strictObject({
    skip: z
      .int()
      .min(1)
      .max(2 ** 31)
      .describe('bytes a body to pass over'),
    components: holders,
  })
  .describe('bytes that hold nothing of interest');

const constants = z
  .strictObject({
    mass: z.number().min(0).optional().describe('mass of every body, if the file holds none'),
    gravity: z.number().positive().optional().describe('constant of gravity G'),
    softening: z
      .number()
      .min(0)
      .optional()
      .describe('Plummer-equivalent softening length of every body'),
    time: z.number().optional().describe('time of the snapshot'),
    count: z.int().min(1).optional().describe('number of bodies'),
  })
  .describe('what the file does not hold');

const comoving = z
  .strictObject({
    scaleFactor: stated.optional().describe('a, above 0'),
    redshift: stated.optional().describe('z, in place of the scale factor: a = 1/(1 + z)'),
    hubbleRate: stated
      .optional()
      .describe('H = (da/dt)/a at this time, in units of velocity over physical length'),
    hubbleConstant: stated
      .optional()
      .describe(
        'H today, from which H follows with the densities, in place of hubbleRate; same unit',
      ),
    matterDensity: stated.optional().describe('density of matter today, over the critical one'),
    darkEnergyDensity: stated
      .optional()
      .describe('that of dark energy, constant in time; without it space is flat'),
    boxSize: stated.optional().describe('edge of the periodic box, in the unit of positions'),
    velocity: z
      .enum(VELOCITY_FORMS)
      .describe('what the column of velocities holds; x is the comoving position'),
  })
  .describe('positions are comoving: physical ones are a times them');

const unitNames = Object.keys(UNIT_SYSTEMS) as (keyof typeof UNIT_SYSTEMS)[];

export const layoutSchema = z
  .strictObject({
    $schema: z.string().optional().describe('for editors; not used'),
    settlemark: z.literal('layout/1').describe('kind and version of this file'),
    byteOrder: z.enum(['little', 'big']).default('little'),
    markers: z
      .enum(['none', 'fortran4', 'fortran8'])
      .default('none')
      .describe(
        'length words of 4 or 8 bytes around each record of a sequential unformatted Fortran file; the header is one or more whole records, the bodies are one record (interleaved: or one each) or one record a field (columns)',
      ),
    headerBytes: z
      .int()
      .min(0)
      .default(0)
      .describe('bytes before the first body, Fortran length words not counted'),
    header: z.array(headerItem).default([]),
    arrangement: z
      .enum(['interleaved', 'columns', 'columnsByComponent'])
      .default('interleaved')
      .describe(
        'all fields of a body together, one component after the other; or one block a field, in each the bodies of all components that hold it; or all blocks of one component after those of another',
      ),
    components: z
      .array(component)
      .min(1)
      .optional()
      .describe('kinds of bodies, in the order in which they lie in the file'),
    fields: z.array(z.union([field, skip])).min(1),
    constants: constants.optional(),
    comoving: comoving.optional(),
    parts: z
      .string()
      .min(1)
      .optional()
      .describe(
        'a snapshot lies in several files, whose names are this with a number for {part}; * stands for what is the same in all files of one snapshot and differs between snapshots',
      ),
    units: z.enum(unitNames).optional().describe('system of units; sets G unless gravity is given'),
  })
  .meta({
    title: 'Settlemark layout of a raw binary snapshot',
    description:
      'Says what the bytes of a raw binary file of particles are. The length of the file must fit to the byte.',
  });

/** Names of the keys of each kind of object, for messages about a misspelt one. */
export const LAYOUT_KEYS = {
  layout: Object.keys(layoutSchema.shape),
  header: Object.keys(headerItem.shape),
  fields: [...new Set([...Object.keys(field.shape), ...Object.keys(skip.shape)])],
  components: Object.keys(component.shape),
  reference: Object.keys(reference.shape),
  constants: Object.keys(constants.shape),
  comoving: Object.keys(comoving.shape),
} as const;

/** A layout as it stands in a file: what has a default may be left out. */
export type LayoutInput = z.input<typeof layoutSchema>;
/** A layout with all defaults filled in. */
export type Layout = z.output<typeof layoutSchema>;
export type LayoutField = z.output<typeof field>;
export type LayoutComponent = z.output<typeof component>;
export type LayoutComoving = z.output<typeof comoving>;
export type StatedNumber = z.output<typeof stated>;
export type LayoutSkip = z.output<typeof skip>;

/** Seven little-endian float64 a body: what is assumed when there is no layout at all. */
export const DEFAULT_LAYOUT: Layout = layoutSchema.parse({
  settlemark: 'layout/1',
  fields: ['mass', 'x', 'y', 'z', 'vx', 'vy', 'vz'].map((name) => ({ name, type: 'float64' })),
} satisfies LayoutInput);

/** JSON Schema (draft 2020-12) of layout files, for editors and for `docs/layout.schema.json`. */
export function layoutJsonSchema(): Record<string, unknown> {
  return z.toJSONSchema(layoutSchema, { target: 'draft-2020-12', io: 'input' });
}

export function isSkip(entry: LayoutField | LayoutSkip): entry is LayoutSkip {
  return 'skip' in entry;
}

/** Bytes that a field takes in each body. */
export function fieldBytes(entry: LayoutField | LayoutSkip): number {
  return isSkip(entry) ? entry.skip : TYPE_BYTES[entry.type] * entry.width;
}

/** Whether a component, or each body of a layout without components (null), holds a field. */
export function isHeldBy(entry: LayoutField | LayoutSkip, component: string | null): boolean {
  return entry.components === undefined || component === null
    ? true
    : entry.components.includes(component);
}

/** Bytes of one body, without Fortran length words. */
export function bodyBytes(layout: Layout, component: string | null = null): number {
  return layout.fields
    .filter((entry) => isHeldBy(entry, component))
    .reduce((sum, entry) => sum + fieldBytes(entry), 0);
}

const ARRANGEMENT_TEXT: Readonly<Record<Layout['arrangement'], string>> = {
  interleaved: 'interleaved',
  columns: 'columns',
  columnsByComponent: 'columns by component',
};

/** A layout in one line, for `describe`. */
export function describeLayout(layout: Layout): string {
  const fields = layout.fields.map((entry) => {
    const holders = entry.components === undefined ? '' : ` of ${entry.components.join(' and ')}`;
    return isSkip(entry)
      ? `(${entry.skip} bytes${holders})`
      : `${entry.name} ${entry.type}${entry.width > 1 ? `×${entry.width}` : ''}${holders}`;
  });
  const parts = [`${layout.byteOrder}-endian`, ARRANGEMENT_TEXT[layout.arrangement]];
  if (layout.markers !== 'none') parts.push(`${layout.markers} markers`);
  if (layout.parts !== undefined) parts.push(`parts ${layout.parts}`);
  if (layout.headerBytes > 0) parts.push(`header of ${layout.headerBytes} bytes`);
  return `${parts.join(', ')}: ${fields.join(', ')}`;
}
