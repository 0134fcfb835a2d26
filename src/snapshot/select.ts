/** Some of the bodies of a snapshot: of a component, of a group, within a radius. */
import { InputError, UnanswerableError, UsageError } from '../errors.ts';
import { takeBuffer } from '../numerics/reuse.ts';
import { missingColumn, unknownComponent } from './columns.ts';
import { nearestImage, unwrap } from './frame.ts';
import type { FloatColumn, IdColumn, Particles, Remark, Selection } from './particles.ts';
import type { FieldName, ReadOptions } from './reading.ts';

type Chosen = Pick<ReadOptions, 'only' | 'group' | 'within' | 'about'>;
type Vector = readonly [number, number, number];

/** Bodies that were selected, and the index in the snapshot of each. */
export interface Selected {
  readonly particles: Particles;
  readonly indices: Uint32Array;
}

export function isSelecting({ only, group, within, about }: Chosen): boolean {
  return [only, group, within, about].some((value) => value !== undefined);
}

/** Options that also load what the selection looks at. */
export function withSelectingColumns(options: ReadOptions): ReadOptions {
  const more: FieldName[] = [];
  if (options.only !== undefined) more.push('component');
  if (options.group !== undefined) more.push('group');
  if (more.length === 0) return options;
  return { ...options, optional: [...new Set([...(options.optional ?? []), ...more])] };
}

/** @throws UsageError `usage.range`, `usage.about` */
export function checkSelection({ within, about }: Chosen): void {
  if (within !== undefined && !(within > 0 && within < Infinity)) {
    throw new UsageError(
      'usage.range',
      `--within ${within} is out of range`,
      'give a radius above 0',
    );
  }
  if (about !== undefined && within === undefined) {
    throw new UsageError(
      'usage.about',
      `--about ${about.join(',')} needs a radius`,
      'add --within R, or leave --about out',
    );
  }
  if (about !== undefined && !about.every(Number.isFinite)) {
    throw new UsageError('usage.about', `--about ${about.join(',')} is not a place`, 'give X,Y,Z');
  }
}

/**
 * Selects bodies; those that are left keep their order. Forces of the others are not counted, so
 * that potentials, accelerations and energies of the file, which hold them, are left out.
 * @throws UsageError `usage.range`, `usage.about`; InputError `input.unknownComponent`,
 * `input.missingColumn`; UnanswerableError `unanswerable.emptySelection`
 */
export function selectBodies(particles: Particles, options: Chosen): Selected {
  checkSelection(options);
  const { only, group, within } = options;
  let indices = new Uint32Array(particles.count);
  for (let i = 0; i < indices.length; i++) indices[i] = i;
  if (only !== undefined) indices = indices.filter(ofComponent(particles, only));
  if (group !== undefined) indices = indices.filter(ofGroup(particles, group));
  let about: Vector | null = null;
  if (within !== undefined && indices.length > 0) {
    const isWhole = indices.length === particles.count;
    about = options.about ?? densestPlace(isWhole ? particles : subset(particles, indices), within);
    indices = indices.filter(within3(particles, within, about));
  }
  if (indices.length === 0) throw nothingSelected(particles, options);
  const selection: Selection = {
    only: only ?? null,
    group: group === undefined ? null : String(group),
    within: within ?? null,
    about,
    of: particles.count,
  };
  const chosen = subset(particles, indices);
  const remarks = [...particles.origin.remarks, selected(chosen.count, particles.count)];
  const origin = { ...particles.origin, remarks, selection };
  return { particles: { ...chosen, origin }, indices };
}

type Test = (index: number) => boolean;

function ofComponent({ componentNames, columns, origin }: Particles, only: string): Test {
  const { component } = columns;
  if (component === undefined) {
    throw new InputError(
      'input.missingColumn',
      `${origin.file}: --only ${only} needs components, and the file does not tell them apart`,
      'List them in the layout, name their column with --columns component=NAME, or leave --only out.',
    );
  }
  const index = componentNames.indexOf(only);
  if (index < 0) throw unknownComponent(origin.file, only, componentNames);
  return (i) => component[i] === index;
}

function ofGroup({ columns, origin }: Particles, wanted: number | bigint): Test {
  const { group } = columns;
  if (group === undefined) throw missingColumn(origin.file, 'group', []);
  const isBig = group instanceof BigInt64Array || group instanceof BigUint64Array;
  const isWhole = typeof wanted === 'bigint' || Number.isInteger(wanted);
  if (isBig && !isWhole) return () => false;
  const value = isBig ? BigInt(wanted) : Number(wanted);
  return (i) => group[i] === value;
}

function within3(particles: Particles, radius: number, [cx, cy, cz]: Vector): Test {
  const { x, y, z, frame } = particles;
  const boxSize = frame.kind === 'comoving' ? frame.boxSize : null;
  return (i) => {
    const dx = nearestImage(x[i] - cx, boxSize);
    const dy = nearestImage(y[i] - cy, boxSize);
    const dz = nearestImage(z[i] - cz, boxSize);
    return dx * dx + dy * dy + dz * dz <= radius * radius;
  };
}

const MOST_SHIFTS = 100;

/**
 * A place that is the centre of mass of the bodies within the radius about it: the mean shift with
 * a flat kernel, from the median of each coordinate on.
 * Source: Fukunaga & Hostetler 1975, IEEE Trans. Inf. Theory 21, 32 (from memory).
 */
function densestPlace(bodies: Particles, radius: number): Vector {
  const { frame, origin, mass } = bodies;
  const boxSize = frame.kind === 'comoving' ? frame.boxSize : null;
  const places = boxSize === null ? bodies : unwrap(bodies, boxSize);
  if ('span' in places && places.span >= 0.5) {
    throw new UsageError(
      'usage.about',
      `${origin.file}: --within ${radius} needs a centre, since the bodies fill a periodic box`,
      'add --about X,Y,Z in the coordinates of the file',
    );
  }
  const { x, y, z } = places;
  let centre: Vector = [median(x), median(y), median(z)];
  for (let shift = 0; shift < MOST_SHIFTS; shift++) {
    const [cx, cy, cz] = centre;
    let m = 0;
    let sx = 0;
    let sy = 0;
    let sz = 0;
    for (let i = 0; i < bodies.count; i++) {
      const dx = x[i] - cx;
      const dy = y[i] - cy;
      const dz = z[i] - cz;
      if (dx * dx + dy * dy + dz * dz > radius * radius) continue;
      m += mass[i];
      sx += mass[i] * dx;
      sy += mass[i] * dy;
      sz += mass[i] * dz;
    }
    if (!(m > 0)) break;
    centre = [cx + sx / m, cy + sy / m, cz + sz / m];
    if (Math.hypot(sx, sy, sz) / m <= 1e-6 * radius) break;
  }
  return centre;
}

function median(column: FloatColumn): number {
  const sorted = Float64Array.from(column).sort();
  return sorted[(sorted.length - 1) >> 1];
}

/** The bodies of these indices, with columns of their own. */
function subset(particles: Particles, indices: Uint32Array): Particles {
  const { mass, x, y, z, vx, vy, vz, columns } = particles;
  const { id, component, softening, density, group, subgroup } = columns;
  const real = (column: FloatColumn): FloatColumn => pick(column, indices);
  return {
    ...particles,
    count: indices.length,
    ...{ mass: real(mass), x: real(x), y: real(y), z: real(z) },
    ...{ vx: real(vx), vy: real(vy), vz: real(vz) },
    columns: {
      ...(id && { id: pick(id, indices) }),
      ...(component && { component: pick(component, indices) }),
      ...(softening && { softening: real(softening) }),
      ...(density && { density: real(density) }),
      ...(group && { group: pick(group, indices) }),
      ...(subgroup && { subgroup: pick(subgroup, indices) }),
    },
  };
}

function pick<T extends IdColumn | FloatColumn>(column: T, indices: Uint32Array): T {
  const { length } = indices;
  const Kind = column.constructor as new (...of: [SharedArrayBuffer, number, number]) => T;
  const picked = new Kind(takeBuffer(length * column.BYTES_PER_ELEMENT), 0, length);
  // One kind on both sides, which the types cannot say.
  const [to, from] = [picked as Float64Array, column as Float64Array];
  for (let k = 0; k < length; k++) to[k] = from[indices[k]];
  return picked;
}

function selected(count: number, all: number): Remark {
  return {
    code: 'selection',
    text: `${count} of ${all} bodies are measured, as if the others were not there.`,
    remedy: 'If the others act on them, the ratio need not be 1 in equilibrium.',
  };
}

function nothingSelected({ origin, count }: Particles, options: Chosen): UnanswerableError {
  const { only, group, within, about } = options;
  const asked = [
    only === undefined ? null : `--only ${only}`,
    group === undefined ? null : `--group ${group}`,
    within === undefined ? null : `--within ${within}`,
    about === undefined ? null : `--about ${about.join(',')}`,
  ].filter((text) => text !== null);
  return new UnanswerableError(
    'unanswerable.emptySelection',
    `${origin.file}: none of its ${count} bodies is chosen by ${asked.join(' ')}`,
    'Look with describe what the file holds; radius and place are in its own coordinates.',
  );
}
