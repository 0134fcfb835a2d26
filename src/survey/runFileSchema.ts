/**
 * The form of a run file: one schema for validation and for the published JSON Schema. `docs/runs.md`
 * tells users what the keys mean. Only what reads a run file imports this module.
 */
import { z } from 'zod';
import { EXTRA_NAMES } from '../dynamics/extras.ts';
import { MOST_SHELLS } from '../dynamics/settings.ts';
import { FIELD_NAMES } from '../snapshot/reading.ts';
import { UNIT_SYSTEMS } from '../snapshot/units.ts';
import type { RunSettings } from './runFile.ts';

const size = (what: string) =>
  z
    .union([z.number().positive(), z.string().min(1)], {
      error: 'a number in SI, or a text such as "2 kpc"',
    })
    .describe(`${what}: a number in SI, or a named unit with or without a factor`);

const ownUnits = z
  .strictObject({
    length: size('unit of length'),
    mass: size('unit of mass'),
    velocity: size('unit of velocity').optional(),
    time: size('unit of time, instead of velocity').optional(),
    gravity: z.number().positive().optional().describe('G in these units, instead of velocity'),
  })
  .describe('units of your own');

const columnNames = Object.fromEntries(
  [...FIELD_NAMES].map((name) => [name, z.string().min(1).optional()]),
);

/** One schema for every key of RunSettings, options of a measurement among them: a new one must come here. */
const shape = {
  layout: z.string().min(1).optional().describe('layout of raw snapshots, a path from this file'),
  columns: z
    .strictObject(columnNames)
    .optional()
    .describe('from the names of Settlemark to those of columns in the files'),
  only: z.string().min(1).optional().describe('only the bodies of this component'),
  group: z.int().optional().describe('only the bodies with this number in the column group'),
  within: z
    .number()
    .positive()
    .optional()
    .describe('only the bodies within this radius, in the coordinates of the file'),
  about: z.tuple([z.number(), z.number(), z.number()]).optional().describe('centre of that radius'),
  units: z
    .union([z.string().min(1), ownUnits], {
      error: 'a name, a file that ends in .json, or an object with length, mass and velocity',
    })
    .optional()
    .describe(
      `unit system: ${Object.keys(UNIT_SYSTEMS).join(', ')}; a file of units, a path from this file; or sizes`,
    ),
  gravity: z.number().positive().optional().describe('constant of gravitation G'),
  softening: z
    .union([z.number().min(0), z.literal('column')], {
      error: 'a number of 0 or more, or "column"',
    })
    .optional()
    .describe('Plummer-equivalent softening length, or "column" for those of the single bodies'),
  softeningKernel: z.enum(['none', 'plummer', 'spline']).optional(),
  error: z.number().min(1e-15).max(1).optional().describe('relative error wanted of U'),
  exact: z.boolean().optional().describe('direct sums over all pairs'),
  fractions: z
    .array(z.number().gt(0).lt(1))
    .min(1)
    .optional()
    .describe('mass fractions of Lagrangian radii'),
  centre: z.enum(['density', 'shrinking', 'mass', 'potential']).optional(),
  coulombFactor: z.number().positive().optional().describe('γ in Λ = γN'),
  coincident: z
    .enum(['leave-out', 'refuse'])
    .optional()
    .describe('what to do with bodies at one point, unsoftened'),
  forces: z
    .enum(['own', 'file'])
    .optional()
    .describe('U and W from own sums, or the columns of the file'),
  with: z
    .array(z.string())
    .optional()
    .describe(`names of what is measured besides: ${EXTRA_NAMES.join(', ')}, or all`),
  shells: z
    .int()
    .min(1)
    .max(MOST_SHELLS)
    .optional()
    .describe('number of shells of equal number of bodies'),
  times: z
    .union([z.string().min(1), z.literal(false)], {
      error: 'the path of a table of times, or false',
    })
    .optional()
    .describe('table of times, a path from this file; false: not even times.csv'),
  interval: z.number().positive().optional().describe('time from one snapshot to the next'),
  start: z.number().optional().describe('time of the first snapshot, with interval (0)'),
  timePattern: z.string().min(1).optional().describe('name of a snapshot with {time} in it'),
  from: z.number().optional().describe('no snapshots of the series before this time'),
  to: z.number().optional().describe('no snapshots of the series after this time'),
  every: z.int().min(1).optional().describe('only every n-th snapshot of the series'),
  external: z.string().min(1).optional().describe('file of external fields, a path from this file'),
  threads: z.int().min(1).optional().describe('worker threads'),
} satisfies Record<keyof RunSettings, z.ZodType>;

export const runFileSchema = z
  .strictObject({
    $schema: z.string().optional().describe('for editors; not used'),
    settlemark: z.literal('run/1').optional().describe('kind and version of this file'),
    ...shape,
  })
  .meta({
    title: 'Settlemark run file',
    description:
      'Defaults for the snapshots in its folder (settlemark.json). The command line goes before them, and they go before what the snapshots say themselves.',
  });

/** Names of the keys that a run file may have, for messages about a misspelt one. */
export const RUN_FILE_KEYS: readonly string[] = ['settlemark', ...Object.keys(shape)];

/** JSON Schema (draft 2020-12) of run files, for editors and for `docs/run.schema.json`. */
export function runFileJsonSchema(): Record<string, unknown> {
  return z.toJSONSchema(runFileSchema, { target: 'draft-2020-12', io: 'input' });
}
