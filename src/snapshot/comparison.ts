/** Whether particles that were written and read again are the same, bit for bit. */
import type { Particles } from './particles.ts';
import { numberColumns, type NumberColumn } from './particleColumns.ts';

/** A column whose values are not all the same. */
export interface Difference {
  readonly column: string;
  readonly bodies: number;
  /** The first of them: index of the body, value before and after. */
  readonly first: { readonly body: number; readonly from: string; readonly to: string };
  /** Largest |after − before| / |before| over the bodies; null for texts and identifiers. */
  readonly largest: number | null;
}

/** What of some particles is found again in others, and what is not. */
export interface Compared {
  /** Columns and facts that the others lack; a fact is a time, a G, units ... */
  readonly missing: readonly string[];
  readonly different: readonly Difference[];
}

const FACTS = ['time', 'gravity', 'units', 'softening', 'frame'] as const;

interface Found {
  bodies: number;
  first: Difference['first'];
  largest: number | null;
}

/** Compares particles with the same read again in parts. */
export class Comparison {
  readonly #whole: Particles;
  readonly #columns: ReadonlyMap<string, NumberColumn>;
  readonly #missing = new Set<string>();
  readonly #found = new Map<string, Found>();
  #bodies = 0;

  constructor(whole: Particles) {
    this.#whole = whole;
    this.#columns = numberColumns(whole);
  }

  /** @param first - index of the first body of the part; parts come in order and leave no gap */
  add(part: Particles, first: number): void {
    if (first !== this.#bodies) throw new Error(`part at body ${first} after ${this.#bodies}`);
    this.#bodies += part.count;
    if (first === 0) this.#addFacts(part);
    const own = numberColumns(part);
    for (const [name, before] of this.#columns) {
      const after = own.get(name as never);
      if (after === undefined) this.#missing.add(name);
      else if (first + part.count <= this.#whole.count) {
        this.#compare(name, before, first, after);
      }
    }
    this.#addComponents(part, first);
  }

  /** @throws Error if the parts were more or fewer bodies than there are: a fault of a reader or writer */
  result(): Compared {
    const { count } = this.#whole;
    if (this.#bodies !== count)
      throw new Error(`${count} bodies were written, ${this.#bodies} read`);
    return {
      missing: [...this.#missing],
      different: [...this.#found].map(([column, found]) => ({ column, ...found })),
    };
  }

  /**
   * A fact that was not there and is now (a layout may state one) is no loss; nor is one length for
   * all, where each body has its own.
   */
  #addFacts(part: Particles): void {
    for (const fact of FACTS) {
      if (fact === 'softening' && part.columns.softening !== undefined) continue;
      const before = this.#whole[fact];
      if (before !== null && canonical(before) !== canonical(part[fact])) this.#missing.add(fact);
    }
  }

  #compare(name: string, before: NumberColumn, first: number, after: NumberColumn): void {
    const count = after.length;
    for (let i = 0; i < count; i++) {
      const a = before[first + i];
      const b = after[i];
      // 0 and −0 are equal and have other bits.
      if (a === b ? a !== 0 || Object.is(a, b) : isSame(a, b)) continue;
      const isReal = typeof a === 'number' && typeof b === 'number';
      this.#note(name, first + i, String(a), String(b), isReal ? relative(a, b) : null);
    }
  }

  #addComponents(part: Particles, first: number): void {
    const { componentNames: names, columns } = this.#whole;
    if (columns.component === undefined) return;
    const after = part.columns.component;
    if (after === undefined) {
      this.#missing.add('component');
      return;
    }
    for (let i = 0; i < part.count && first + i < this.#whole.count; i++) {
      const a = names[columns.component[first + i]];
      const b = part.componentNames[after[i]];
      if (a !== b) this.#note('component', first + i, a, b, null);
    }
  }

  #note(column: string, body: number, from: string, to: string, change: number | null): void {
    const found = this.#found.get(column);
    if (found === undefined) {
      this.#found.set(column, { bodies: 1, first: { body, from, to }, largest: change });
      return;
    }
    found.bodies++;
    if (change !== null) found.largest = Math.max(found.largest ?? 0, change);
  }
}

function isSame(a: number | bigint, b: number | bigint): boolean {
  if (typeof a === 'number' && typeof b === 'number') return Number.isNaN(a) && Number.isNaN(b);
  if (typeof a === 'bigint' && typeof b === 'bigint') return false;
  const [big, number] = typeof a === 'bigint' ? [a, b as number] : [b as bigint, a];
  return Number.isInteger(number) && BigInt(number) === big;
}

function relative(before: number, after: number): number {
  return before === 0 ? Infinity : Math.abs((after - before) / before);
}

/** Numbers and texts in one order of keys, so that equal facts give equal texts. */
function canonical(value: unknown): string {
  if (typeof value === 'number') return Object.is(value, -0) ? '-0' : String(value);
  if (typeof value !== 'object' || value === null) return JSON.stringify(value) ?? '';
  const entries = Object.entries(value as Record<string, unknown>).sort(([a], [b]) =>
    a < b ? -1 : 1,
  );
  return `{${entries.map(([key, one]) => `${key}:${canonical(one)}`).join()}}`;
}
