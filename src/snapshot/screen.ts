/** One look at all values before any physics: what cannot be measured is refused with place and cause. */
import { InputError } from '../errors.ts';
import { findMisreading } from './misread.ts';
import type { FloatColumn, Particles } from './particles.ts';

/** Squares and products of magnitudes up to this stay finite. */
const LARGEST = 1e150;

/** What one pass over a column finds. */
interface Extremes {
  /** NaN or infinite values. */
  readonly bad: number;
  /** Index of the first of these, or -1. */
  readonly firstBad: number;
  readonly smallest: number;
  readonly largest: number;
}

/**
 * Refuses values that no physics can be done with. Zero masses (tracers), velocities all zero, far
 * outliers and any unit system pass.
 *
 * @throws InputError `input.notFinite` (NaN or infinite), `input.negativeMass`, `input.zeroMass`
 * (no mass at all), `input.onePoint` (more than one body, all at one place),
 * `input.negativeSoftening`, `input.outOfRange` (a magnitude above 1e150), `input.misread` (byte
 * order or number type look wrong)
 */
export function screenParticles(particles: Particles): void {
  screenSample(particles, (index) => index);
}

/**
 * The same for particles that are a sample of a file.
 * @param bodyOf - number of a body in the file from its index in the sample
 */
export function screenSample(particles: Particles, bodyOf: (index: number) => number): void {
  const { x, y, z, vx, vy, vz } = particles;
  const { file } = particles.origin;
  const coordinates = [x, y, z, vx, vy, vz];
  const named = usedColumns(particles);
  if (isSound(named) && findMisreading(coordinates, false) === null) return;
  const extremes = named.map(([, column]) => extremesOf(column));
  const misread = (suspicious: boolean): InputError | null => {
    const cause = findMisreading(coordinates, suspicious);
    return cause === null ? null : misreadError(file, cause, named, extremes);
  };

  named.forEach(([name, column], index) => {
    const { bad, firstBad } = extremes[index];
    if (bad === 0) return;
    throw misread(true) ?? notFinite(file, name, column[firstBad], bodyOf(firstBad), bad);
  });
  named.forEach(([name, column], index) => {
    const { smallest, largest } = extremes[index];
    if (largest <= LARGEST && smallest >= -LARGEST) return;
    const at = column.findIndex((value) => Math.abs(value) > LARGEST);
    throw misread(true) ?? outOfRange(file, name, column[at], bodyOf(at));
  });
  const [, mass] = named[0];
  if (extremes[0].smallest < 0) {
    throw misread(true) ?? negative(file, 'mass', mass, bodyOf);
  }
  const wide = misread(false);
  if (wide !== null) throw wide;
  if (extremes[0].largest === 0) {
    throw new InputError(
      'input.zeroMass',
      `${file}: all ${particles.count} masses are 0; expected at least one above 0`,
      'Give the mass of each body as constants.mass in the layout, or name the right column with --columns mass=NAME.',
    );
  }
  named.forEach(([name, column], index) => {
    if (name === 'softening' && extremes[index].smallest < 0) {
      throw negative(file, 'softening', column, bodyOf);
    }
  });
  const isPoint = [1, 2, 3].every((index) => extremes[index].smallest === extremes[index].largest);
  if (particles.count > 1 && isPoint) {
    throw new InputError(
      'input.onePoint',
      `${file}: all ${particles.count} bodies are at one point (${x[0]}, ${y[0]}, ${z[0]}); expected different positions`,
      'Check the offsets of the positions in the layout, or the names in --columns.',
    );
  }
}

/** A quick look that finds nothing wrong, as nearly always. What it finds is looked at again, in full. */
function isSound(named: readonly [name: string, column: FloatColumn][]): boolean {
  const areWithin = named.every(([name, column]) => {
    const smallest = name === 'mass' || name === 'softening' ? 0 : -LARGEST;
    return column instanceof Float64Array
      ? doublesLie(column, smallest, LARGEST)
      : singlesLie(column, smallest, LARGEST);
  });
  if (!areWithin) return false;
  const [[, mass], ...positions] = named.slice(0, 4);
  const isPoint = positions.every(([, column]) => column.every((value) => value === column[0]));
  return mass.some((value) => value > 0) && (mass.length === 1 || !isPoint);
}

/** Whether all numbers lie between two others; NaN does not. Four at a time take half the time. */
function doublesLie(column: Float64Array, low: number, high: number): boolean {
  let i = 0;
  for (const last = column.length - 3; i < last; i += 4) {
    const a = column[i];
    const b = column[i + 1];
    const c = column[i + 2];
    const d = column[i + 3];
    if (!(a >= low && b >= low && c >= low && d >= low)) return false;
    if (!(a <= high && b <= high && c <= high && d <= high)) return false;
  }
  for (; i < column.length; i++) if (!(column[i] >= low && column[i] <= high)) return false;
  return true;
}

function singlesLie(column: Float32Array, low: number, high: number): boolean {
  let i = 0;
  for (const last = column.length - 3; i < last; i += 4) {
    const a = column[i];
    const b = column[i + 1];
    const c = column[i + 2];
    const d = column[i + 3];
    if (!(a >= low && b >= low && c >= low && d >= low)) return false;
    if (!(a <= high && b <= high && c <= high && d <= high)) return false;
  }
  for (; i < column.length; i++) if (!(column[i] >= low && column[i] <= high)) return false;
  return true;
}

function usedColumns(particles: Particles): [name: string, column: FloatColumn][] {
  const { mass, x, y, z, vx, vy, vz, columns } = particles;
  const named: [string, FloatColumn][] = Object.entries({ mass, x, y, z, vx, vy, vz });
  for (const name of ['softening', 'potential', 'specificEnergy', 'density'] as const) {
    const column = columns[name];
    if (column !== undefined) named.push([name, column]);
  }
  if (columns.acceleration !== undefined) {
    const { x: ax, y: ay, z: az } = columns.acceleration;
    named.push(['ax', ax], ['ay', ay], ['az', az]);
  }
  return named;
}

/** Both kinds of column have a loop of their own: one loop for both would run at half the speed. */
function extremesOf(column: FloatColumn): Extremes {
  return column instanceof Float64Array ? extremesOfDoubles(column) : extremesOfSingles(column);
}

function extremesOfDoubles(column: Float64Array): Extremes {
  let smallest = Infinity;
  let largest = -Infinity;
  let bad = 0;
  let firstBad = -1;
  for (let i = 0; i < column.length; i++) {
    const value = column[i];
    if (value - value !== 0) {
      if (bad++ === 0) firstBad = i;
      continue;
    }
    if (value < smallest) smallest = value;
    if (value > largest) largest = value;
  }
  return { bad, firstBad, smallest, largest };
}

function extremesOfSingles(column: Float32Array): Extremes {
  let smallest = Infinity;
  let largest = -Infinity;
  let bad = 0;
  let firstBad = -1;
  for (let i = 0; i < column.length; i++) {
    const value = column[i];
    if (value - value !== 0) {
      if (bad++ === 0) firstBad = i;
      continue;
    }
    if (value < smallest) smallest = value;
    if (value > largest) largest = value;
  }
  return { bad, firstBad, smallest, largest };
}

function notFinite(
  file: string,
  name: string,
  value: number,
  body: number,
  bad: number,
): InputError {
  return new InputError(
    'input.notFinite',
    `${file}: ${name} of body ${body} is ${value}${bad > 1 ? `, the first of ${bad} that are not finite` : ''}; expected finite numbers`,
    'The simulation has broken down before this snapshot, or the layout is not that of the file.',
  );
}

function outOfRange(file: string, name: string, value: number, body: number): InputError {
  return new InputError(
    'input.outOfRange',
    `${file}: ${name} of body ${body} is ${value}; expected magnitudes up to ${LARGEST}`,
    'Check byteOrder, type and offset in the layout.',
  );
}

function negative(
  file: string,
  name: string,
  column: FloatColumn,
  bodyOf: (index: number) => number,
): InputError {
  const first = column.findIndex((value) => value < 0);
  let count = 0;
  for (let i = 0; i < column.length; i++) if (column[i] < 0) count++;
  return new InputError(
    name === 'mass' ? 'input.negativeMass' : 'input.negativeSoftening',
    `${file}: ${name} of body ${bodyOf(first)} is ${column[first]}${count > 1 ? `, the first of ${count} below 0` : ''}; expected at least 0`,
    'Check the order of the fields in the layout, or the names in --columns.',
  );
}

function misreadError(
  file: string,
  cause: string,
  named: readonly [string, FloatColumn][],
  extremes: readonly Extremes[],
): InputError {
  const found = named
    .slice(1, 4)
    .map(([name], index) => {
      const { smallest, largest } = extremes[index + 1];
      return `${name} from ${smallest.toPrecision(3)} to ${largest.toPrecision(3)}`;
    })
    .join(', ');
  return new InputError(
    'input.misread',
    `${file}: the values cannot be positions and velocities (${found}, over far too many decades): it looks as if ${cause}`,
    'Correct byteOrder or types in the layout.',
  );
}
