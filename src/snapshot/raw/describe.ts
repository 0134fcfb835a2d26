/** What is in a raw file, from its header and its first and last bodies. */
import { InputError } from '../../errors.ts';
import { withInput } from '../files.ts';
import { allocateColumn, type FloatColumn, type Particles, type Remark } from '../particles.ts';
import {
  FIELD_NAMES,
  type DescribedColumn,
  type DescribedComponent,
  type FieldName,
  type ReadOptions,
  type SnapshotDescription,
} from '../reading.ts';
import { screenSample } from '../screen.ts';
import { readBodies, type BodyRange, type Target } from './bodies.ts';
import { findLayout, type FoundLayout } from './find-layout.ts';
import { layOverOrExplain } from './fit.ts';
import { frameOf } from './frame.ts';
import type { PlacedComponent } from './components.ts';
import { describeLayout, isHeldBy, isSkip, type Layout, type LayoutField } from './layout.ts';
import { findParts, partsJoined, totalOf, type RawPart } from './parts.ts';
import { planColumns, QUANTITIES, similarNames, type Plan, type Quantity } from './plan.ts';
import { columnType, statedValues } from './read.ts';
import type { RawStructure } from './structure.ts';

/** Bodies looked at, from the beginning and as many from the end. */
const SAMPLE_BODIES = 4096;

/**
 * Describes a raw file: header, columns, smallest and largest value of the first and last 4096
 * bodies, and what is odd about them, as remarks.
 * @throws InputError as `readRaw` does if the file cannot be opened or the layout does not fit;
 * findings about the values are remarks
 */
export async function describeRaw(
  path: string,
  options: ReadOptions,
): Promise<SnapshotDescription> {
  const found = await findLayout(path, options.layout);
  const { layout } = found;
  if (layout.parts === undefined) return describeFile(path, path, found, options);
  const parts = await findParts(path, found);
  const withBodies = parts.filter(({ structure }) => structure !== null);
  const sample = withBodies.find((part) => part.path === path) ?? withBodies[0];
  const described = await describeFile(sample.path, path, found, options);
  return {
    ...described,
    bytes: parts.reduce((sum, { bytes }) => sum + bytes, 0),
    count: totalOf(parts),
    components: componentsOf(parts),
    remarks: [partsJoined(parts), ...described.remarks],
  };
}

/** Kinds of bodies of all parts; a mass is stated if it is the same in all of them. */
function componentsOf(parts: readonly RawPart[]): DescribedComponent[] {
  const all = new Map<string, { name: string; count: number; mass: number | null }>();
  for (const { name, count, mass } of parts.flatMap(
    ({ structure }) => structure?.components ?? [],
  )) {
    const known = all.get(name);
    if (known === undefined) all.set(name, { name, count, mass });
    else {
      if (known.count === 0) known.mass = mass;
      else if (count > 0 && mass !== known.mass) known.mass = null;
      known.count += count;
    }
  }
  return [...all.values()];
}

/** @param name - the snapshot as it was named */
async function describeFile(
  path: string,
  name: string,
  found: FoundLayout,
  options: ReadOptions,
): Promise<SnapshotDescription> {
  return withInput(path, async (file) => {
    const { layout } = found;
    const structure = await layOverOrExplain(file, layout, found.file);
    const ranges = sampleRanges(structure.count);
    const targets = sampleTargets(layout, ranges);
    await readBodies(file, structure, targets, ranges, options);
    const planned = tryPlan(path, layout, options);
    const stated = statedValues(path, structure);
    return {
      file: name,
      format: 'raw',
      bytes: file.size,
      count: structure.count,
      time: stated.time,
      units: stated.units?.name ?? null,
      gravity: stated.gravity,
      softening: stated.softening,
      frame: frameOf(path, structure),
      byteOrder: layout.byteOrder,
      structure: describeLayout(layout),
      columns: layout.fields.flatMap((entry) =>
        isSkip(entry) ? [] : [describeField(entry, structure, targets, planned.plan)],
      ),
      components: structure.components.map(({ name, count, mass }) => ({ name, count, mass })),
      remarks: [
        ...found.remarks,
        ...similarNames(path, layout, options),
        ...planned.remarks,
        ...screened(path, structure, targets, planned.plan, ranges),
      ],
    };
  });
}

function sampleRanges(count: number): BodyRange[] {
  if (count <= 2 * SAMPLE_BODIES) return [{ begin: 0, end: count }];
  return [
    { begin: 0, end: SAMPLE_BODIES },
    { begin: count - SAMPLE_BODIES, end: count },
  ];
}

type SampleTarget = Extract<Target, { kind: 'reals' }>;

function sampleTargets(layout: Layout, ranges: readonly BodyRange[]): SampleTarget[] {
  const count = ranges.reduce((sum, range) => sum + range.end - range.begin, 0);
  const targets: SampleTarget[] = [];
  for (const field of layout.fields) {
    if (isSkip(field)) continue;
    for (let lane = 0; lane < field.width; lane++) {
      const sources = [{ field, lane }];
      // What a component does not hold is left as it is.
      const column = allocateColumn(count, columnType(sources)).fill(NaN);
      targets.push({ kind: 'reals', sources, column });
    }
  }
  return targets;
}

/** The plan with all optional columns; a column that is missing is a remark here, not an error. */
function tryPlan(
  path: string,
  layout: Layout,
  options: ReadOptions,
): { plan: Plan; remarks: Remark[] } {
  try {
    return {
      plan: planColumns(path, layout, { ...options, optional: QUANTITIES }),
      remarks: [],
    };
  } catch (error) {
    if (!(error instanceof InputError) || error.code !== 'input.missingColumn') throw error;
    return { plan: new Map(), remarks: [asRemark(error)] };
  }
}

function asRemark(error: InputError): Remark {
  return { code: error.code, text: error.message, remedy: error.remedy ?? '' };
}

function describeField(
  field: LayoutField,
  structure: RawStructure,
  targets: readonly SampleTarget[],
  plan: Plan,
): DescribedColumn {
  let smallest = Infinity;
  let largest = -Infinity;
  for (const target of targets) {
    if (target.sources[0].field !== field) continue;
    for (const value of target.column) {
      if (value < smallest && value !== -Infinity) smallest = value;
      if (value > largest && value !== Infinity) largest = value;
    }
  }
  const block = structure.blocks.find((one) => one.fields.some((place) => place.field === field));
  const place = block?.fields.find((one) => one.field === field);
  return {
    name: field.name,
    field: fieldNameOf(field, plan),
    type: field.type,
    width: field.width,
    offset:
      block && place && block.segments.length > 0 ? block.segments[0].offset + place.offset : null,
    stride: block?.stride ?? null,
    smallest: Number.isFinite(smallest) ? smallest : null,
    largest: Number.isFinite(largest) ? largest : null,
  };
}

function fieldNameOf(field: LayoutField, plan: Plan): FieldName | null {
  for (const [quantity, sources] of plan) {
    if (!sources.some((source) => source.field === field)) continue;
    if (field.width === 1) return quantity;
    return VECTOR_OF[quantity] ?? quantity;
  }
  // A field of some components only is ours by name, though no column can be made of it.
  const isOurs = (FIELD_NAMES as readonly string[]).includes(field.name);
  return isOurs && field.components !== undefined ? (field.name as FieldName) : null;
}

const VECTOR_OF: Readonly<Partial<Record<Quantity, FieldName>>> = {
  x: 'position',
  vx: 'velocity',
  ax: 'acceleration',
};

/** The findings of the screening of the sample. */
function screened(
  path: string,
  structure: RawStructure,
  targets: readonly SampleTarget[],
  plan: Plan,
  ranges: readonly BodyRange[],
): Remark[] {
  if (plan.size === 0) return [];
  const indices = ranges.flatMap(({ begin, end }) =>
    Array.from({ length: end - begin }, (_, k) => begin + k),
  );
  const count = indices.length;
  const column = (quantity: Quantity): FloatColumn => {
    const sources = plan.get(quantity) ?? [];
    const own = targets.filter((target) =>
      sources.some(({ field, lane }) => {
        const [source] = target.sources;
        return source.field === field && source.lane === lane;
      }),
    );
    const isWhole = own.length === 1 && structure.components.length === 0;
    if (isWhole) return own[0].column;
    return allocateColumn(count).map((_, k) => {
      const held = own.find((target) => isHeldAt(target.sources[0].field, structure, indices[k]));
      return held?.column[k] ?? statedAt(structure, quantity, indices[k]);
    });
  };
  const sample: Particles = {
    count,
    mass: column('mass'),
    x: column('x'),
    y: column('y'),
    z: column('z'),
    vx: column('vx'),
    vy: column('vy'),
    vz: column('vz'),
    columns: {},
    componentNames: [],
    ...statedValues(path, structure),
    frame: { kind: 'physical' },
    origin: { file: path, format: 'raw', mantissaBits: 53, remarks: [] },
  };
  try {
    screenSample(sample, (index) => indices[index]);
    return [];
  } catch (error) {
    if (!(error instanceof InputError)) throw error;
    return [asRemark(error)];
  }
}

function isHeldAt(field: LayoutField, { components }: RawStructure, body: number): boolean {
  return isHeldBy(field, componentAt(components, body)?.name ?? null);
}

/** The mass that the layout states of a body. */
function statedAt({ layout, components }: RawStructure, quantity: Quantity, body: number): number {
  if (quantity !== 'mass') return NaN;
  return layout.constants?.mass ?? componentAt(components, body)?.mass ?? NaN;
}

function componentAt(
  components: readonly PlacedComponent[],
  body: number,
): PlacedComponent | undefined {
  return components.find(({ begin, count }) => body >= begin && body < begin + count);
}
