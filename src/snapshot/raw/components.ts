/** The components of a raw file: how many bodies each has, and what the header states of them. */
import { InputError } from '../../errors.ts';
import type { OpenFile } from '../files.ts';
import { countOf } from './header.ts';
import type { Layout, StatedNumber } from './layout.ts';

/** A component as the file has it. */
export interface StatedComponent {
  readonly name: string;
  readonly count: bigint;
  /** What holds for each of its bodies, or null if that lies in a field. */
  readonly mass: number | null;
  readonly softening: number | null;
}

/** The same when the length of the file has proved the count. */
export interface PlacedComponent extends Omit<StatedComponent, 'count'> {
  /** Index of its first body. */
  readonly begin: number;
  readonly count: number;
}

type Header = ReadonlyMap<string, number | bigint>;

/**
 * Counts, masses and softening lengths of the components; null for a layout without components.
 * @throws InputError `input.badCount`, `input.headerValue`
 */
export function statedComponents(
  file: OpenFile,
  layout: Layout,
  header: Header,
): StatedComponent[] | null {
  return (
    layout.components?.map(({ name, count, mass, softening }) => ({
      name,
      count:
        typeof count === 'number'
          ? BigInt(count)
          : countOf(file, `count of ${name}, ${count.header},`, header.get(count.header) ?? 0),
      mass: lengthOrMass(file, `mass of ${name}`, mass, header),
      softening: lengthOrMass(file, `softening of ${name}`, softening, header),
    })) ?? null
  );
}

function lengthOrMass(
  file: OpenFile,
  what: string,
  stated: StatedNumber | undefined,
  header: Header,
): number | null {
  if (stated === undefined) return null;
  const value = statedNumber(stated, header);
  if (Number.isFinite(value) && value >= 0) return value;
  throw new InputError(
    'input.headerValue',
    `${file.path}: the header's ${what} is ${value}; expected a finite number of at least 0`,
    'Correct its type, offset, scale or byteOrder in the layout.',
  );
}

/** A number of the layout, or the one of the header that it refers to. */
export function statedNumber(stated: StatedNumber, header: Header): number {
  if (typeof stated === 'number') return stated;
  return Number(header.get(stated.header)) * stated.scale;
}

/**
 * Puts the components one after the other.
 * @param total - number of all bodies as header or constants state it, or null
 * @throws InputError `input.badCount` if the counts do not add up to it
 */
export function addUp(
  file: OpenFile,
  components: readonly StatedComponent[],
  total: bigint | null,
): bigint {
  const sum = components.reduce((all, { count }) => all + count, 0n);
  if (total === null || total === sum) return sum;
  throw new InputError(
    'input.badCount',
    `${file.path}: the components add up to ${sum} bodies (${countsText(components)}); expected ${total}, the count of all`,
    'Correct type, offset or byteOrder of the counts in the layout, or add the component that is missing.',
  );
}

/** Components with the index of their first body; the counts must be proved. */
export function placeComponents(components: readonly StatedComponent[]): PlacedComponent[] {
  let begin = 0;
  return components.map((component) => {
    const placed = { ...component, begin, count: Number(component.count) };
    begin += placed.count;
    return placed;
  });
}

/** `4 gas, 5 dark` */
export function countsText(components: readonly Pick<StatedComponent, 'name' | 'count'>[]): string {
  return components.map(({ name, count }) => `${count} ${name}`).join(', ');
}
