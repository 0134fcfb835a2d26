/** The columns of particles under the names that they have in files. */
import type { FloatColumn, IdColumn, Particles } from './particles.ts';
import type { FieldName } from './reading.ts';

/** What a reader is asked for so that it leaves no column behind that it knows. */
export const OPTIONAL_FIELDS = [
  'component',
  'softening',
  'potential',
  'acceleration',
  'specificEnergy',
  'density',
  'group',
  'subgroup',
] as const satisfies readonly FieldName[];

export type NumberColumn = FloatColumn | IdColumn;

/** All columns of numbers, one number a body; components are texts and not among them. */
export function numberColumns(particles: Particles): Map<FieldName, NumberColumn> {
  const { mass, x, y, z, vx, vy, vz, columns } = particles;
  const { acceleration, ...others } = columns;
  const named = {
    ...{ mass, x, y, z, vx, vy, vz },
    ...others,
    ...(acceleration && { ax: acceleration.x, ay: acceleration.y, az: acceleration.z }),
  };
  const all = new Map(Object.entries(named) as [FieldName, NumberColumn][]);
  all.delete('component');
  return all;
}
