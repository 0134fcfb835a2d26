/** What every reader takes and gives; the readers themselves are in `raw/` and `arrow/`. */
import type { Frame, Particles, Remark } from './particles.ts';

/** Names of the columns that the engine knows, in files of every format. */
export const FIELD_NAMES = [
  'mass',
  'position',
  'velocity',
  'x',
  'y',
  'z',
  'vx',
  'vy',
  'vz',
  'id',
  'component',
  'softening',
  'potential',
  'acceleration',
  'ax',
  'ay',
  'az',
  'specificEnergy',
  'density',
  'group',
  'subgroup',
] as const;

export type FieldName = (typeof FIELD_NAMES)[number];

export interface ReadOptions {
  /** Layout file of a raw snapshot, as the user gave it. Without it, one beside the data is looked for. */
  readonly layout?: string;
  /** From our field name to the name of the column or field in the file (`--columns mass=m,…`). */
  readonly columns?: Readonly<Partial<Record<FieldName, string>>>;
  /** Optional columns to load besides mass, position, velocity and `id`; others are left on disk. */
  readonly optional?: readonly FieldName[];
  /** Only the bodies of the component of this name. */
  readonly only?: string;
  /** Only the bodies with this number in the column `group`. */
  readonly group?: number | bigint;
  /** Only the bodies within this radius about `about`, in the coordinates of the file. */
  readonly within?: number;
  /** If not given, `within` is about where the bodies lie densest. */
  readonly about?: readonly [number, number, number];
  /** Called with bytes done and bytes in all, not more than some tens of times a second. */
  readonly onProgress?: (bytesDone: number, bytesTotal: number) => void;
  readonly signal?: AbortSignal;
}

/** Result of `describe`: what is in the file, without reading more than it must. */
export interface SnapshotDescription {
  readonly file: string;
  readonly format: 'raw' | 'arrow-file' | 'arrow-stream';
  /** Length of the file, or null for standard input. */
  readonly bytes: number | null;
  readonly count: number;
  readonly time: number | null;
  readonly units: string | null;
  readonly gravity: number | null;
  readonly softening: number | null;
  /** Whether coordinates are physical, or comoving with what makes them physical. */
  readonly frame: Frame;
  /** Byte order of the numbers in the file. */
  readonly byteOrder: 'little' | 'big';
  /** For a raw file its layout in one line; for Arrow the compression and number of batches. */
  readonly structure: string;
  readonly columns: readonly DescribedColumn[];
  /** Kinds of bodies, as far as they are known without reading each body. */
  readonly components: readonly DescribedComponent[];
  /** First sanity findings, from the first and last few thousand bodies. */
  readonly remarks: readonly Remark[];
}

export interface DescribedColumn {
  /** Name in the file. */
  readonly name: string;
  /** Our name for it, or null for a column that Settlemark does not use. */
  readonly field: FieldName | null;
  readonly type: string;
  /** Numbers a body: 3 for a vector. */
  readonly width: number;
  /** Where the column's values lie: byte offset of the first and distance to the next, if that makes sense. */
  readonly offset: number | null;
  readonly stride: number | null;
  /** Smallest and largest finite value among the bodies looked at, or null if none was. */
  readonly smallest: number | null;
  readonly largest: number | null;
}

export interface DescribedComponent {
  readonly name: string;
  /** Null where only the names are known (a dictionary of an Arrow file). */
  readonly count: number | null;
  /** Mass of each of its bodies, if the layout or the header states it. */
  readonly mass: number | null;
}

export type SnapshotReader = (path: string, options: ReadOptions) => Promise<Particles>;
export type SnapshotDescriber = (
  path: string,
  options: ReadOptions,
) => Promise<SnapshotDescription>;
