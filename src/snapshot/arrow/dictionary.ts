/** Dictionaries of component names, and the one list of names that all batches share. */
import { DataType } from 'apache-arrow/type';
import { InputError } from '../../errors.ts';
import { damaged } from './damage.ts';

const MOST_COMPONENTS = 65536;

/**
 * The components of a snapshot. Batches may come with different dictionaries (a stream may replace
 * or extend them), so that each keeps the map from its own indices to the common list.
 */
export class ComponentNames {
  readonly names: string[] = [];
  /** From index in the dictionary in force to index in {@link names}; null before the first one. */
  current: Uint16Array | null = null;
  private readonly indexOf = new Map<string, number>();

  /** Takes a dictionary batch: replaces the dictionary in force, or extends it. */
  add(entries: readonly string[], extend: boolean, file: string): void {
    const before = extend ? (this.current ?? new Uint16Array(0)) : new Uint16Array(0);
    const map = new Uint16Array(before.length + entries.length);
    map.set(before);
    entries.forEach((name, i) => (map[before.length + i] = this.indexFor(name, file)));
    this.current = map;
  }

  /** Index of a name in {@link names}, to which it is added if it is new. */
  indexFor(name: string, file: string): number {
    let index = this.indexOf.get(name);
    if (index === undefined) {
      index = this.names.length;
      if (index >= MOST_COMPONENTS) throw tooMany(file, index + 1);
      this.names.push(name);
      this.indexOf.set(name, index);
    }
    return index;
  }
}

/** `input.tooManyComponents` */
export function tooMany(file: string, found: number): InputError {
  return new InputError(
    'input.tooManyComponents',
    `${file}: the component column has ${found} names or more; expected at most ${MOST_COMPONENTS}`,
    'Name a column with the kinds of bodies, not one with a name for each body.',
  );
}

/** @throws InputError `input.tooManyComponents` before anything is allocated for them. */
export function assertComponentCount(count: number, file: string): void {
  if (count > MOST_COMPONENTS) throw tooMany(file, count);
}

/** Bytes that each of the first two data buffers must hold for `count` texts of this type. */
export function offsetBytes(type: DataType, count: number): number {
  if (DataType.isUtf8View(type)) return count * 16;
  return (count + 1) * (DataType.isLargeUtf8(type) ? 8 : 4);
}

/**
 * Decodes the texts of a dictionary.
 * @param offsets - offsets (Utf8, LargeUtf8) or views (Utf8View), at least `offsetBytes` long
 * @param data - the text buffers: one, or any number for Utf8View
 * @throws InputError `input.arrowDamaged` if an offset leads outside
 * Source: Apache Arrow columnar format 1.5, "Variable-size Binary Layout" and "View Layout".
 */
export function decodeTexts(
  type: DataType,
  count: number,
  offsets: Uint8Array,
  data: readonly Uint8Array[],
  file: string,
  place: string,
): string[] {
  const spanOf = spans(type, offsets, data, file, place);
  return Array.from({ length: count }, (_, i) => decodeText(spanOf(i), i, file, place));
}

/**
 * Indices of the texts of a column into {@link ComponentNames.names}; the arguments are those of
 * {@link decodeTexts}.
 */
export function textIndices(
  type: DataType,
  count: number,
  offsets: Uint8Array,
  data: readonly Uint8Array[],
  names: ComponentNames,
  file: string,
  place: string,
): Uint16Array {
  const spanOf = spans(type, offsets, data, file, place);
  const indices = new Uint16Array(new SharedArrayBuffer(2 * count));
  let last: Uint8Array | null = null;
  let index = 0;
  for (let i = 0; i < count; i++) {
    const text = spanOf(i);
    // Neighbours mostly belong together: to decode each would be slow.
    if (last === null || !isSame(text, last)) {
      index = names.indexFor(decodeText(text, i, file, place), file);
      last = text;
    }
    indices[i] = index;
  }
  return indices;
}

function isSame(a: Uint8Array, b: Uint8Array): boolean {
  if (a.length !== b.length) return false;
  for (let k = 0; k < a.length; k++) if (a[k] !== b[k]) return false;
  return true;
}

const DECODER = new TextDecoder('utf-8', { fatal: true, ignoreBOM: true });

function decodeText(bytes: Uint8Array, i: number, file: string, place: string): string {
  try {
    return DECODER.decode(bytes);
  } catch (error) {
    throw damaged(file, place, `text ${i} is not UTF-8`, error);
  }
}

/** Gives the bytes of the i-th text. */
function spans(
  type: DataType,
  offsets: Uint8Array,
  data: readonly Uint8Array[],
  file: string,
  place: string,
): (i: number) => Uint8Array {
  const view = new DataView(offsets.buffer, offsets.byteOffset, offsets.byteLength);
  return (i) => {
    const [source, begin, end] = span(i);
    if (!source || !(begin >= 0 && begin <= end && end <= source.length))
      throw damaged(file, place, `text ${i} lies outside its buffer`);
    return source.subarray(begin, end);
  };

  function span(i: number): [source: Uint8Array | undefined, begin: number, end: number] {
    if (DataType.isUtf8View(type)) {
      const length = view.getInt32(16 * i, true);
      if (length >= 0 && length <= 12) return [offsets, 16 * i + 4, 16 * i + 4 + length];
      const begin = view.getInt32(16 * i + 12, true);
      return [data[view.getInt32(16 * i + 8, true)], begin, begin + length];
    }
    if (DataType.isLargeUtf8(type)) {
      const begin = Number(view.getBigInt64(8 * i, true));
      return [data[0], begin, Number(view.getBigInt64(8 * i + 8, true))];
    }
    return [data[0], view.getInt32(4 * i, true), view.getInt32(4 * i + 4, true)];
  }
}
