/**
 * A bounded check of a flatbuffer against the shape of its tables, before any library walks it.
 *
 * Decoders trust the offsets and lengths in a flatbuffer: a few changed bytes can send them
 * through billions of entries or past the end. After this check every table, string and vector
 * that the shape names lies inside the bytes, nesting is bounded, and so is the number of objects.
 * Source: "FlatBuffers internals" of the FlatBuffers documentation (tables, vtables, vectors).
 */

/** What a slot of a table may hold; null for a slot that nobody reads. */
export type Slot =
  | null
  | { readonly scalar: 1 | 2 | 4 | 8 }
  | { readonly string: true }
  | { readonly table: TableShape }
  /** Vector of fixed-size structs or scalars of so many bytes each. */
  | { readonly vectorOf: number }
  | { readonly tables: TableShape }
  /** Table whose shape is named by the type byte in the slot before. */
  | { readonly union: Readonly<Record<number, TableShape>> };

export interface TableShape {
  readonly name: string;
  readonly slots: readonly Slot[];
  /** Slots that must be there. */
  readonly required?: readonly number[];
}

const MAX_DEPTH = 64;

/** Returns null if `bytes` hold a root table of this shape, else what is wrong, in words. */
export function faultInFlatbuffer(bytes: Uint8Array, root: TableShape): string | null {
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  if (bytes.length < 8) return `${root.name}: ${bytes.length} bytes are too few`;
  // Shared objects are legal, so a small buffer can describe a huge tree: count what is visited.
  let budget = bytes.length;
  return faultInTable(view.getUint32(0, true), root, 0);

  function faultInTable(at: number, shape: TableShape, depth: number): string | null {
    if (depth > MAX_DEPTH) return `${shape.name}: nested more than ${MAX_DEPTH} deep`;
    if (--budget < 0) return `${shape.name}: more objects than bytes`;
    if (at + 4 > view.byteLength) return `${shape.name}: table begins outside`;
    const vtable = at - view.getInt32(at, true);
    if (vtable < 0 || vtable + 4 > view.byteLength) return `${shape.name}: vtable lies outside`;
    const vtableBytes = view.getUint16(vtable, true);
    const tableBytes = view.getUint16(vtable + 2, true);
    if (vtableBytes < 4 || vtableBytes % 2 !== 0 || vtable + vtableBytes > view.byteLength)
      return `${shape.name}: vtable of ${vtableBytes} bytes`;
    if (tableBytes < 4 || at + tableBytes > view.byteLength)
      return `${shape.name}: table of ${tableBytes} bytes reaches outside`;
    const slotCount = (vtableBytes - 4) / 2;
    const offsetOf = (slot: number) =>
      slot < slotCount ? view.getUint16(vtable + 4 + 2 * slot, true) : 0;
    for (const slot of shape.required ?? []) {
      if (offsetOf(slot) === 0) return `${shape.name}: entry ${slot} is missing`;
    }
    for (let i = 0; i < shape.slots.length; i++) {
      const slot = shape.slots[i];
      const offset = offsetOf(i);
      if (slot === null || offset === 0) continue;
      const size = 'scalar' in slot ? slot.scalar : 4;
      if (offset < 4 || offset + size > tableBytes) return `${shape.name}: entry ${i} lies outside`;
      if ('scalar' in slot) continue;
      let target: TableShape | undefined;
      if ('union' in slot) {
        const tag = offsetOf(i - 1) === 0 ? 0 : view.getUint8(at + offsetOf(i - 1));
        target = slot.union[tag];
        if (target === undefined) return `${shape.name}: unknown kind ${tag} of entry ${i}`;
      }
      const place = at + offset + view.getUint32(at + offset, true);
      const fault = target
        ? faultInTable(place, target, depth + 1)
        : faultAt(place, slot, shape.name, depth);
      if (fault !== null) return fault;
    }
    return null;
  }

  function faultAt(place: number, slot: Slot, owner: string, depth: number): string | null {
    if (slot === null) return null;
    if ('table' in slot) return faultInTable(place, slot.table, depth + 1);
    if (--budget < 0) return `${owner}: more objects than bytes`;
    if (place + 4 > view.byteLength) return `${owner}: a text or list begins outside`;
    const length = view.getUint32(place, true);
    const size = 'string' in slot ? 1 : 'vectorOf' in slot ? slot.vectorOf : 4;
    if (place + 4 + length * size > view.byteLength)
      return `${owner}: a text or list of ${length} entries reaches outside`;
    if (!('tables' in slot)) return null;
    for (let j = 0; j < length; j++) {
      const entry = place + 4 + 4 * j;
      const fault = faultInTable(entry + view.getUint32(entry, true), slot.tables, depth + 1);
      if (fault !== null) return fault;
    }
    return null;
  }
}

/** Position of a table's slot in a checked flatbuffer, or 0 if absent. `table` 0 means the root. */
export function slotPosition(view: DataView, table: number, slot: number): number {
  const at = table === 0 ? view.getUint32(0, true) : table;
  const vtable = at - view.getInt32(at, true);
  if (4 + 2 * slot >= view.getUint16(vtable, true)) return 0;
  const offset = view.getUint16(vtable + 4 + 2 * slot, true);
  return offset === 0 ? 0 : at + offset;
}
