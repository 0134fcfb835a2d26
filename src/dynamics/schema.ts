/**
 * The form of a record as a schema, for validation here and as JSON Schema for programs outside.
 *
 * Quantities come from the registry; what is no quantity (settings, engine, remarks) is written here.
 * Nothing that measures imports this module, and it loads zod only when called.
 */
import type { z as ZodNamespace, ZodType } from 'zod';
import { EXTRA_NAMES } from './extras.ts';
import { RECORD_VERSION } from './record.ts';
import { QUANTITIES, type Quantity } from './registry.ts';
import { dimensionText } from './registryText.ts';

/**
 * The schema of a record. Numbers must be finite; keys that it does not know pass, since later
 * versions of the same record number may add some.
 */
export async function recordSchema(): Promise<ZodType> {
  const { z } = await import('zod');
  const atLeast0 = (text: string) => z.number().min(0).describe(text);
  const origin = z
    .enum(['option', 'run file', 'snapshot', 'default'])
    .describe('where the value came from');
  const setting = (value: ZodType, text: string) =>
    z.object({ value, from: origin }).describe(text);
  const ownSystem = z
    .object({
      ...{ mass: z.string(), length: z.string(), velocity: z.string(), time: z.string() },
      gravity: z.number().positive().describe('G in these units'),
      si: z
        .object({
          length: z.number().positive(),
          mass: z.number().positive(),
          velocity: z.number().positive(),
        })
        .optional()
        .describe('sizes of the units in m, kg and m/s'),
    })
    .describe('symbols and sizes of own units; only where value is own');
  const centreMethod = z.enum(['density', 'shrinking', 'mass', 'potential']);

  const settings = z.object({
    time: z
      .object({
        value: z.number().nullable(),
        from: origin,
        source: z
          .enum(['snapshot', 'times file', 'interval', 'file name'])
          .nullable()
          .describe('how the time was had; null if nothing tells it'),
      })
      .describe('time of the snapshot [time]'),
    gravity: setting(
      z.number().positive(),
      'constant of gravitation G [length³ mass⁻¹ time⁻²] that was used',
    ),
    units: z
      .object({
        value: z
          .string()
          .describe('name of the unit system; own if it is none of the built-in ones'),
        from: origin,
        system: ownSystem.optional(),
      })
      .describe('unit system'),
    softening: setting(
      z.object({
        length: atLeast0(
          'Plummer-equivalent length [length]; 0 without softening; of a typical pair where bodies have lengths of their own',
        ),
        support: z
          .number()
          .min(0)
          .nullable()
          .describe(
            'distance beyond which the force is Newtonian [length]; null where it never is exactly (plummer)',
          ),
        kernel: z.enum(['none', 'plummer', 'spline']),
        ofBodies: z
          .object({
            least: atLeast0('least length of a body [length]'),
            greatest: atLeast0('greatest length of a body [length]'),
          })
          .optional()
          .describe('only there if bodies are softened by lengths of their own'),
      }),
      'softening of the pair force',
    ),
    coulombFactor: setting(z.number().positive(), 'γ in Λ = γN'),
    error: setting(z.number().positive(), 'relative error that was wanted of U'),
    centre: setting(centreMethod, 'method of the centre that was asked for'),
    fractions: setting(z.array(z.number()), 'mass fractions of the Lagrangian radii'),
    exact: setting(z.boolean(), 'direct sums whatever they cost'),
    forces: setting(z.enum(['own', 'file']), 'where U and W come from'),
    with: setting(z.array(z.enum(EXTRA_NAMES)), 'extras that were asked for'),
    shells: setting(z.int().min(1), 'shells that the extras may use'),
  });

  const seconds = z.object({
    read: atLeast0('reading the file'),
    tree: atLeast0('building the tree'),
    forces: atLeast0('summing potentials'),
    error: atLeast0('measuring the error of the sums'),
    dynamics: atLeast0('everything after the sums'),
    total: atLeast0('all of it'),
  });
  const engine = z.object({
    origin: z.enum(['tree', 'direct', 'file']).describe('how the potentials were had'),
    order: z.int().nullable().describe('order of the expansions; null for direct sums'),
    tolerance: z.number().nullable().describe('tolerance of the walk; null for direct sums'),
    errorWanted: atLeast0('relative error of U that was asked for'),
    errorMeasured: atLeast0('2.6 σ of the measured error of U, over |U|'),
    interactions: atLeast0('pairs of cells and of bodies summed, each direction counted'),
    threads: z.int().min(1).describe('worker threads'),
    seconds: seconds.describe('wall-clock seconds'),
  });
  const remark = z.object({
    code: z.string().describe('stable name of the finding'),
    text: z.string().describe('the finding, one sentence'),
    remedy: z.string().describe('what to do about it'),
  });

  const selection = z.object({
    only: z.string().nullable().describe('their component'),
    group: z.string().nullable().describe('their number in the column group'),
    within: z.number().positive().nullable().describe('radius about the place `about`'),
    about: z.array(z.number()).length(3).nullable().describe('in the coordinates of the file'),
    of: z.int().min(1).describe('bodies in the snapshot'),
  });

  const tree: Branch = {
    record: z.literal(RECORD_VERSION).describe('version of the form of the record'),
    file: z.string().describe('the snapshot as it was named; - for standard input'),
    time: z.number().nullable().describe('time of the snapshot [time]; null if it is not stated'),
    runFile: z.string().nullable().describe('run file whose defaults were used; null without one'),
    selection: selection
      .optional()
      .describe('which bodies of the snapshot were measured; absent if all were'),
    settings: settings.describe('what was used, and where it came from'),
    frame: { centreMethod: centreMethod.describe('method of frame.centre that was used') },
  };
  const energy = (text: string) => z.number().describe(`${text} [mass length² time⁻²]`);
  tree.external = z
    .object({
      fields: z.array(z.looseObject({ form: z.string() })).describe('as they were stated'),
      potential: energy('Σ m φ of the fields'),
      clausius: energy('Σ m (x − x_c)·a of the fields'),
      energy: energy('T + U + Σ m φ'),
      clausiusRatio: z.number().nullable().describe('2T/|W| with the share of the fields in W'),
      jacobiRadius: z.number().min(0).nullable().describe('(G m/(λ₁ − λ₂))^⅓ [length]'),
      massBeyond: z.number().min(0).nullable().describe('mass farther out than that [mass]'),
    })
    .optional()
    .describe('external fields; only with --external');
  const optional = new Set<string>();
  for (const quantity of QUANTITIES) {
    const path = quantity.key.split('.');
    place(tree, path, quantitySchema(quantity, z));
    if (quantity.extra !== null) optional.add(path[0]);
  }
  const set = z.enum(['whole', 'bound']).describe('which bodies the figures are of');
  for (const extra of ['shells', 'profiles']) place(tree, [extra, 'set'], set);
  tree.engine = engine.describe('how the sums were done and what they cost');
  tree.remarks = z.array(remark).describe('findings beside the figures');
  return asObject(tree, z, optional).meta({
    title: 'Settlemark record of one snapshot',
    description:
      'All that is measured of one snapshot, in the units of the snapshot. Dimensions stand in brackets; no brackets: a pure number.',
  });
}

/** JSON Schema (draft 2020-12) of a record, for `docs/record.schema.json`. */
export async function recordJsonSchema(): Promise<Record<string, unknown>> {
  const { z } = await import('zod');
  return z.toJSONSchema(await recordSchema(), { target: 'draft-2020-12', io: 'input' });
}

type Zod = typeof ZodNamespace;

function quantitySchema(quantity: Quantity, z: Zod): ZodType {
  const isWhole = quantity.kind === 'integer' || quantity.kind === 'integers';
  const single = isWhole ? z.int().min(0) : z.number();
  const orNull = <S extends ZodType>(schema: S) => (quantity.nullable ? schema.nullable() : schema);
  const schemas: Record<Quantity['kind'], () => ZodType> = {
    number: () => orNull(single),
    integer: () => orNull(single),
    vector: () => orNull(z.array(single).length(3)),
    list: () => z.array(orNull(single)),
    integers: () => z.array(single),
    ids: () => z.array(z.union([z.int(), z.string()])),
  };
  const unit = dimensionText(quantity.dimension);
  const error = quantity.error === null ? '' : `; 1σ error in ${quantity.error}`;
  const extra = quantity.extra === null ? '' : `; only with --with ${quantity.extra}`;
  return schemas[quantity.kind]().describe(
    `${quantity.text}${unit === '' ? '' : ` [${unit}]`}${error}${extra}`,
  );
}

/** Schemas by key, nested as the record is. */
interface Branch {
  [key: string]: ZodType | Branch;
}

function place(branch: Branch, [key, ...rest]: readonly string[], schema: ZodType): void {
  if (rest.length === 0) branch[key] = schema;
  else place((branch[key] ??= {}) as Branch, rest, schema);
}

function asObject(branch: Branch, z: Zod, optional: ReadonlySet<string> = new Set()): ZodType {
  const shape = Object.entries(branch).map(([key, value]) => {
    const schema = value instanceof z.ZodType ? value : asObject(value, z);
    return [key, optional.has(key) ? schema.optional() : schema];
  });
  return z.object(Object.fromEntries(shape) as Record<string, ZodType>);
}
