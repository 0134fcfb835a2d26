/** Which values of the particles a field of a layout takes when a file is written. */
import { InputError } from '../../errors.ts';
import type { Particles } from '../particles.ts';
import type { LayoutField } from './layout.ts';

export type Values = ArrayLike<number> | ArrayLike<bigint>;

/**
 * The columns that a field is written from, one for each number of it.
 * @throws InputError `input.missingColumn` if the particles have no such column
 */
export function sourceOf(path: string, particles: Particles, field: LayoutField): Values[] {
  const columns = columnsOf(particles);
  const values = Object.hasOwn(columns, field.name) ? columns[field.name] : undefined;
  if (values === undefined || values.length !== field.width) {
    throw new InputError(
      'input.missingColumn',
      `${path}: the layout has the field "${field.name}" of width ${field.width}, which the particles do not hold`,
      'Remove it from the layout to write, or replace it by {"skip": n}.',
    );
  }
  return values;
}

/**
 * The number to write for a value, so that the number times `scale` gives the value again: their
 * quotient, or a double beside it, since the quotient is rounded.
 */
export function quotient(value: number, scale: number): number {
  const nearest = value / scale;
  if (nearest * scale === value) return nearest;
  const step = Math.abs(nearest) * 2 ** -53;
  for (let k = 1; k <= 4; k++) {
    if ((nearest + k * step) * scale === value) return nearest + k * step;
    if ((nearest - k * step) * scale === value) return nearest - k * step;
  }
  return nearest;
}

function columnsOf(particles: Particles): Record<string, Values[] | undefined> {
  const { mass, x, y, z, vx, vy, vz, columns } = particles;
  const { acceleration } = columns;
  const one = (values: Values | undefined): Values[] | undefined => values && [values];
  return {
    mass: [mass],
    m: [mass],
    x: [x],
    y: [y],
    z: [z],
    vx: [vx],
    vy: [vy],
    vz: [vz],
    position: [x, y, z],
    velocity: [vx, vy, vz],
    id: one(columns.id),
    component: one(codesOf(particles)),
    softening: one(columns.softening),
    potential: one(columns.potential),
    acceleration: acceleration && [acceleration.x, acceleration.y, acceleration.z],
    ax: one(acceleration?.x),
    ay: one(acceleration?.y),
    az: one(acceleration?.z),
    specificEnergy: one(columns.specificEnergy),
    density: one(columns.density),
    group: one(columns.group),
    subgroup: one(columns.subgroup),
  };
}

/** Codes as they were read, if the names are whole numbers; else the index. */
function codesOf(particles: Particles): Values | undefined {
  const { component } = particles.columns;
  if (component === undefined) return undefined;
  const codes = particles.componentNames.map(Number);
  if (!particles.componentNames.every((name) => /^-?\d+$/.test(name))) return component;
  return Float64Array.from(component, (index) => codes[index]);
}
