/** Comoving coordinates, periodic or not → physical ones. */
import { UnanswerableError } from '../errors.ts';
import {
  allocateColumn,
  type FloatColumn,
  type Frame,
  type Particles,
  type Remark,
} from './particles.ts';

type Vector = readonly [number, number, number];
type Positions = Pick<Particles, 'count' | 'mass' | 'x' | 'y' | 'z'>;
type Comoving = Extract<Frame, { kind: 'comoving' }>;

/**
 * Centre of mass on a circle, axis by axis: the direction of Σ m (cos 2πx/L, sin 2πx/L).
 * Source: circular mean, Mardia & Jupp 2000, Directional Statistics, § 2.2 (from memory).
 * @param boxSize - L, edge of the periodic box
 * @returns coordinates from 0 to L
 */
export function periodicCentre(bodies: Positions, boxSize: number): Vector {
  const { count, mass, x, y, z } = bodies;
  const toAngle = (2 * Math.PI) / boxSize;
  const centreOf = (column: FloatColumn): number => {
    let cosine = 0;
    let sine = 0;
    for (let i = 0; i < count; i++) {
      cosine += mass[i] * Math.cos(toAngle * column[i]);
      sine += mass[i] * Math.sin(toAngle * column[i]);
    }
    const centre = Math.atan2(sine, cosine) / toAngle;
    return centre < 0 ? centre + boxSize : centre;
  };
  return [centreOf(x), centreOf(y), centreOf(z)];
}

/** The distance along an axis to the nearest image. */
export function nearestImage(distance: number, boxSize: number | null): number {
  return boxSize === null ? distance : distance - boxSize * Math.round(distance / boxSize);
}

export interface Unwrapped {
  readonly x: Float64Array;
  readonly y: Float64Array;
  readonly z: Float64Array;
  /** Largest extent along an axis, over the edge of the box. */
  readonly span: number;
}

/**
 * Positions in a periodic box, each at its image nearest to the circular mean. If `span` is below
 * ½, all distances are those of the nearest images: the bodies are one object, wherever the edge of
 * the box cuts it. (Bodies within less than half a circle have their mean among them.)
 */
export function unwrap(bodies: Positions, boxSize: number): Unwrapped {
  const centre = periodicCentre(bodies, boxSize);
  let span = 0;
  const [x, y, z] = [bodies.x, bodies.y, bodies.z].map((column, axis) => {
    const unwrapped = allocateColumn(bodies.count) as Float64Array;
    let low = Infinity;
    let high = -Infinity;
    for (let i = 0; i < bodies.count; i++) {
      const value = centre[axis] + nearestImage(column[i] - centre[axis], boxSize);
      unwrapped[i] = value;
      if (value < low) low = value;
      if (value > high) high = value;
    }
    span = Math.max(span, (high - low) / boxSize);
    return unwrapped;
  });
  return { x, y, z, span };
}

/**
 * Particles in physical coordinates: positions a x, velocities u + H (r − r_c) with the peculiar
 * velocity u = a dx/dt, r_c the centre of mass. In a periodic box the bodies are unwrapped first.
 * Lengths of softening are multiplied by a; potentials, accelerations and the like of the file are
 * left out, since it does not say what they are in. Physical particles are given back as they are.
 * @returns new columns of double precision; mass and identifiers are shared with the old
 * @throws UnanswerableError `unanswerable.periodicBox` if the bodies are no single object in it
 */
export function toPhysical(particles: Particles): Particles {
  const { frame } = particles;
  if (frame.kind === 'physical') return particles;
  const { scaleFactor: a, hubbleRate, boxSize } = frame;
  const places = boxSize === null ? particles : unwrap(particles, boxSize);
  if ('span' in places && places.span >= 0.5) throw wholeBox(particles, places.span, frame);
  const [x, y, z] = [places.x, places.y, places.z].map((column) => scaled(column, a));
  const axes = [
    [x, particles.x, particles.vx],
    [y, particles.y, particles.vy],
    [z, particles.z, particles.vz],
  ] as const;
  const [vx, vy, vz] = axes.map(([position, stored, velocity]) => {
    const centre = massMean(particles.mass, position);
    const physical = allocateColumn(particles.count) as Float64Array;
    // In d(ax)/dt = a dx/dt + H a x the flow is that of the place in the file.
    const factor = peculiarFactor(frame);
    const included = frame.velocity === 'd(ax)/dt' ? hubbleRate * a : 0;
    for (let i = 0; i < physical.length; i++) {
      const peculiar = factor * velocity[i] - included * stored[i];
      physical[i] = peculiar + hubbleRate * (position[i] - centre);
    }
    return physical;
  });
  const { id, component, softening, group, subgroup } = particles.columns;
  return {
    ...particles,
    ...{ x, y, z, vx, vy, vz },
    columns: {
      ...(id && { id }),
      ...(component && { component }),
      ...(group && { group }),
      ...(subgroup && { subgroup }),
      ...(softening && { softening: scaled(softening, a) }),
    },
    softening: particles.softening === null ? null : a * particles.softening,
    frame: { kind: 'physical' },
    origin: {
      ...particles.origin,
      remarks: [...particles.origin.remarks, converted(frame)],
    },
  };
}

/** Peculiar velocity over the stored one. */
function peculiarFactor({ velocity, scaleFactor: a }: Comoving): number {
  switch (velocity) {
    case 'a dx/dt':
    case 'd(ax)/dt':
      return 1;
    case 'dx/dt':
      return a;
    case 'a^2 dx/dt':
      return 1 / a;
    case 'sqrt(a) dx/dt':
      return Math.sqrt(a);
  }
}

function scaled(column: FloatColumn, factor: number): Float64Array {
  const result = allocateColumn(column.length) as Float64Array;
  for (let i = 0; i < result.length; i++) result[i] = factor * column[i];
  return result;
}

function massMean(mass: FloatColumn, column: Float64Array): number {
  let sum = 0;
  let total = 0;
  for (let i = 0; i < column.length; i++) {
    total += mass[i];
    // From the first body, so that no digits are lost far from the origin.
    sum += mass[i] * (column[i] - column[0]);
  }
  return total > 0 ? column[0] + sum / total : column[0];
}

function converted({ scaleFactor, hubbleRate, boxSize, velocity }: Comoving): Remark {
  return {
    code: 'comoving',
    text: `Coordinates were comoving: positions were multiplied by a = ${short(scaleFactor)}, and velocities are the peculiar ones (from ${velocity}) plus H r about the centre of mass, H = ${short(hubbleRate)}.${boxSize === null ? '' : ` The bodies were joined across the edges of the periodic box.`}`,
    remedy:
      'Check that H is in units of velocity over physical length, and that lengths and masses hold no factor h.',
  };
}

function wholeBox(particles: Particles, span: number, frame: Comoving): UnanswerableError {
  const { file, selection } = particles.origin;
  const bodies = selection ? 'the bodies selected' : 'its bodies';
  return new UnanswerableError(
    'unanswerable.periodicBox',
    `${file}: ${bodies} span ${short(span)} of the periodic box of edge ${short(frame.boxSize ?? 0)}; T, U and the virial ratio are those of a single object, which spans less than half of it`,
    selection
      ? 'Select a single object: --group ID, or --within R --about X,Y,Z with a smaller R.'
      : 'Select an object: --only COMPONENT, --group ID, or --within R --about X,Y,Z.',
  );
}

function short(value: number): string {
  return String(Number(value.toPrecision(4)));
}
