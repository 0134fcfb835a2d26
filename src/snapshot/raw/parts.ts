/** Snapshots in parts: several raw files of one layout, whose bodies follow each other. */
import { InputError } from '../../errors.ts';
import type { Crew } from '../../parallel/crew.ts';
import { assertUnchanged, closeInput, openInput, type OpenFile } from '../files.ts';
import type { FloatColumn, IdColumn, Particles, Remark } from '../particles.ts';
import type { ReadOptions } from '../reading.ts';
import { readLoads, type Load, type Target } from './bodies.ts';
import { ComponentCodes } from './component-codes.ts';
import type { FoundLayout } from './find-layout.ts';
import { layOverOrExplain } from './fit.ts';
import { frameOf } from './frame.ts';
import { countOf } from './header.ts';
import { partPaths } from './part-names.ts';
import { planColumns } from './plan.ts';
import { allocate, assemble, statedValues, type Columns } from './read.ts';
import type { RawStructure } from './structure.ts';

/** Files that are open at a time. */
const OPEN_AT_MOST = 64;

/** One of the files; `structure` is null if it has no bodies. */
export interface RawPart {
  readonly path: string;
  readonly bytes: number;
  readonly changedNs: bigint;
  readonly structure: RawStructure | null;
}

/**
 * Lays the layout over each part and holds them against each other.
 * @throws InputError of `partPaths` and `layOver`; `input.missingPart`, `input.badCount` if the
 * header's `partCount` or `totalCount` says so; `input.partsDiffer` if they are not of one snapshot
 */
export async function findParts(path: string, found: FoundLayout): Promise<RawPart[]> {
  const { layout } = found;
  const paths = await partPaths(path, layout.parts ?? '{part}');
  const parts: RawPart[] = [];
  for (const part of paths) {
    const file = await openInput(part);
    try {
      const structure = await layOverOrNothing(file, found);
      parts.push({ path: part, bytes: file.size, changedNs: file.changedNs, structure });
    } finally {
      await closeInput(file);
    }
  }
  checkCounts(parts);
  checkAlike(parts);
  return parts;
}

/** Null for a part without bodies: other parts may have all of them. */
async function layOverOrNothing(
  file: OpenFile,
  { layout, file: name }: FoundLayout,
): Promise<RawStructure | null> {
  try {
    return await layOverOrExplain(file, layout, name);
  } catch (error) {
    if (error instanceof InputError && error.code === 'input.noParticles') return null;
    throw error;
  }
}

function countIn({ structure }: RawPart): number {
  return structure?.count ?? 0;
}

export function totalOf(parts: readonly RawPart[]): number {
  return parts.reduce((sum, part) => sum + countIn(part), 0);
}

function checkCounts(parts: readonly RawPart[]): void {
  const total = totalOf(parts);
  if (total === 0) {
    throw new InputError(
      'input.noParticles',
      `${parts[0].path} and the other parts of its snapshot hold no particles; expected at least 1`,
      'Look whether the simulation wrote this snapshot to its end.',
    );
  }
  for (const { path, structure } of parts) {
    if (structure === null) continue;
    const stated = (item: string): bigint | null => {
      const value = structure.header.get(item);
      return value === undefined ? null : countOf({ path }, item, value);
    };
    const partCount = stated('partCount');
    if (partCount !== null && partCount !== BigInt(parts.length)) {
      throw new InputError(
        'input.missingPart',
        `${path}: the header says that the snapshot is in ${partCount} parts; found ${parts.length}, ${parts[0].path} to ${parts[parts.length - 1].path}`,
        'Put all parts into one folder and nothing else of these names, or correct partCount in the layout.',
      );
    }
    const all = stated('totalCount');
    if (all !== null && all !== BigInt(total)) {
      throw new InputError(
        'input.badCount',
        `${path}: the header says that all parts have ${all} bodies; found ${total} in the ${parts.length} from ${parts[0].path} to ${parts[parts.length - 1].path}`,
        'Look whether parts are missing, or correct totalCount in the layout.',
      );
    }
  }
}

/** What all parts of one snapshot must say alike. */
function checkAlike(parts: readonly RawPart[]): void {
  let first: { path: string; facts: Readonly<Record<string, unknown>> } | undefined;
  for (const { path, structure } of parts) {
    if (structure === null) continue;
    const { time, gravity, softening } = statedValues(path, structure);
    const facts = { time, gravity, softening, ...frameOf(path, structure) };
    if (first === undefined) {
      first = { path, facts };
      continue;
    }
    for (const [key, value] of Object.entries(facts)) {
      if (value === first.facts[key]) continue;
      throw new InputError(
        'input.partsDiffer',
        `${path} has the ${key} ${String(value)}, and ${first.path} ${String(first.facts[key])}; expected parts of one snapshot`,
        'Look whether files of several snapshots lie there, and whether * in "parts" stands for what differs between snapshots.',
      );
    }
  }
}

/**
 * Reads all parts of the snapshot that a file belongs to; their bodies follow each other in the
 * order of the numbers of the parts. Memory and types as of one file; all workers read all parts.
 * @throws as {@link findParts}, and as the reader of one file
 */
export async function readParts(
  path: string,
  found: FoundLayout,
  options: ReadOptions,
  crew?: Crew,
): Promise<Particles> {
  const { layout } = found;
  const parts = await findParts(path, found);
  const total = totalOf(parts);
  const plan = planColumns(path, layout, options);
  const columns = allocate({ path }, total, plan, layout);
  const particles: Particles[] = [];
  const begins: number[] = [];
  const progress = progressOf(parts, options);
  let begin = 0;
  for (let at = 0; at < parts.length; at += OPEN_AT_MOST) {
    const loads: Load[] = [];
    const views: Columns[] = [];
    const files: OpenFile[] = [];
    try {
      for (const part of parts.slice(at, at + OPEN_AT_MOST)) {
        const { structure } = part;
        if (structure === null) continue;
        const file = await openInput(part.path);
        files.push(file);
        assertSame(file, part);
        const end = begin + structure.count;
        const view = viewOf(columns, begin, end, file.path);
        begins.push(begin);
        begin = end;
        views.push(view);
        const ranges = [{ begin: 0, end: structure.count }];
        // What was read of small files is not sent to the workers: that is dearer than reading it.
        loads.push({
          file: { ...file, whole: null },
          structure,
          targets: [...view.values()],
          ranges,
        });
      }
      await readLoads(loads, { ...options, onProgress: progress.next() }, crew);
      for (const file of files) await assertUnchanged(file);
    } finally {
      for (const file of files) await closeInput(file);
    }
    loads.forEach(({ file, structure }, k) =>
      particles.push(assemble(file.path, found, structure, plan, views[k], options)),
    );
  }
  return join(path, parts, particles, begins, columns, found.remarks);
}

function assertSame(file: OpenFile, { path, bytes, changedNs }: RawPart): void {
  if (file.size === bytes && file.changedNs === changedNs) return;
  throw new InputError(
    'input.changed',
    `${path} changed while the snapshot was read: ${bytes} bytes before, ${file.size} after`,
    'Read it when the simulation has finished writing it.',
  );
}

/** Progress over all files, though they are read some at a time. */
function progressOf(parts: readonly RawPart[], { onProgress }: ReadOptions) {
  const all = parts.reduce((sum, { bytes }) => sum + bytes, 0);
  let before = 0;
  return {
    next: (): ReadOptions['onProgress'] => {
      if (onProgress === undefined) return undefined;
      const offset = before;
      return (done, total) => {
        before = offset + total;
        onProgress(Math.min(offset + done, all), all);
      };
    },
  };
}

/** The stretch of the columns that the bodies of one part take. */
function viewOf(columns: Columns, begin: number, end: number, path: string): Columns {
  return new Map(
    [...columns].map(([quantity, target]): [typeof quantity, Target] => {
      if (target.kind === 'components') {
        return [quantity, { ...target, codes: new ComponentCodes(path, end - begin) }];
      }
      if (target.kind === 'ids') {
        return [quantity, { ...target, column: target.column.subarray(begin, end) }];
      }
      return [quantity, { ...target, column: target.column.subarray(begin, end) }];
    }),
  );
}

/** One snapshot of its parts, whose columns are stretches of those given. */
function join(
  path: string,
  parts: readonly RawPart[],
  particles: readonly Particles[],
  begins: readonly number[],
  columns: Columns,
  foundRemarks: readonly Remark[],
): Particles {
  const [first] = particles;
  const count = totalOf(parts);
  const whole = <T extends FloatColumn | IdColumn>(part: T): T => {
    for (const target of columns.values()) {
      if (target.kind !== 'components' && target.column.buffer === part.buffer) {
        return target.column as T;
      }
    }
    throw new Error('a part has a column of its own');
  };
  const { id, softening, potential, acceleration, specificEnergy, density, group, subgroup } =
    first.columns;
  const { names, component } = joinComponents(particles, begins, count);
  return {
    ...first,
    count,
    mass: whole(first.mass),
    ...{ x: whole(first.x), y: whole(first.y), z: whole(first.z) },
    ...{ vx: whole(first.vx), vy: whole(first.vy), vz: whole(first.vz) },
    columns: {
      ...(id && { id: whole(id) }),
      ...(component && { component }),
      ...(softening && { softening: whole(softening) }),
      ...(potential && { potential: whole(potential) }),
      ...(acceleration && {
        acceleration: {
          x: whole(acceleration.x),
          y: whole(acceleration.y),
          z: whole(acceleration.z),
        },
      }),
      ...(specificEnergy && { specificEnergy: whole(specificEnergy) }),
      ...(density && { density: whole(density) }),
      ...(group && { group: whole(group) }),
      ...(subgroup && { subgroup: whole(subgroup) }),
    },
    componentNames: names,
    origin: {
      ...first.origin,
      file: path,
      remarks: [
        partsJoined(parts),
        ...foundRemarks,
        ...first.origin.remarks.filter((remark) => !foundRemarks.includes(remark)),
      ],
    },
  };
}

/** Components of all parts under one list of names: codes in their order, as in a single file. */
function joinComponents(
  particles: readonly Particles[],
  begins: readonly number[],
  count: number,
): { names: string[]; component?: Uint16Array } {
  const names = [...new Set(particles.flatMap(({ componentNames }) => componentNames))];
  const isListed = particles.every(
    ({ componentNames }) =>
      componentNames.length === names.length && componentNames[0] === names[0],
  );
  if (!isListed && names.every((name) => /^-?\d+$/.test(name))) {
    names.sort((a, b) => Number(a) - Number(b));
  }
  if (particles[0].columns.component === undefined) return { names };
  const component = new Uint16Array(new SharedArrayBuffer(2 * count));
  particles.forEach(({ columns, componentNames }, k) => {
    const newIndex = componentNames.map((name) => names.indexOf(name));
    const own = columns.component ?? new Uint16Array(0);
    for (let i = 0; i < own.length; i++) component[begins[k] + i] = newIndex[own[i]];
  });
  return { names, component };
}

/** Says how many files were joined. */
export function partsJoined(parts: readonly RawPart[]): Remark {
  const [first, last] = [parts[0].path, parts[parts.length - 1].path];
  return {
    code: 'partsJoined',
    text: `The snapshot is in ${parts.length} ${parts.length === 1 ? 'part' : `parts, ${first} to ${last}`}.`,
    remedy:
      'If there should be more of them: a layout that takes partCount or totalCount from the header finds out.',
  };
}
