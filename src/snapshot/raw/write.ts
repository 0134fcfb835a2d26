/** The writer of raw files: the bytes that a layout asks for, under the final name only when whole. */
import type { FileHandle } from 'node:fs/promises';
import { InputError, InterruptedError } from '../../errors.ts';
import { writeAtomically } from '../atomic.ts';
import type { Particles } from '../particles.ts';
import { writtenComponents, componentHeader } from './component-writer.ts';
import type { StatedComponent } from './components.ts';
import { quotient, sourceOf, type Values } from './encode.ts';
import { frameHeader } from './frame.ts';
import {
  bodyBytes,
  DEFAULT_LAYOUT,
  fieldBytes,
  isSkip,
  type Layout,
  type LayoutField,
  type LayoutSkip,
} from './layout.ts';
import { RecordWriter } from './record-writer.ts';
import { runsOf, sectionsOf } from './sections.ts';
import { integerRange, TYPE_BYTES, writeNumber, type NumberType } from './types.ts';

export interface WriteOptions {
  /** Most bytes of a Fortran subrecord with 4-byte words; 2^31 − 9, as compilers have it. */
  readonly subrecordBytes?: number;
  /** Looks at the temporary file before it gets its name; what it throws keeps it from that. */
  readonly check?: ((temporary: string) => Promise<void>) | undefined;
  readonly signal?: AbortSignal | undefined;
}

const SUBRECORD_BYTES = 2 ** 31 - 9;
const CHUNK_BYTES = 4 << 20;

/**
 * Writes particles as a layout says; skipped bytes become 0, a `scale` divides.
 *
 * @param layout - default: 7 little-endian float64 a body, mass x y z vx vy vz
 * @throws InputError `input.cannotWrite` (file system), `input.missingColumn` (the layout has a
 * field or header item that the particles lack), `input.doesNotFit` (a value outside its type's
 * range, or at odds with the layout's constants or units); InterruptedError; the old file stays in
 * these cases
 */
export async function writeRaw(
  path: string,
  particles: Particles,
  layout: Layout = DEFAULT_LAYOUT,
  options: WriteOptions = {},
): Promise<void> {
  if (layout.parts !== undefined) {
    throw new InputError(
      'input.layoutUnsupported',
      `${path}: the layout has the key "parts", and one file is written`,
      'Remove the key from the layout to write.',
    );
  }
  checkConstants(path, particles, layout);
  const components = writtenComponents(path, particles, layout);
  const header = headerOf(path, particles, layout, components ?? []);
  const blocks = sectionsOf(layout, components).map((section) => ({
    runs: runsOf(section, particles.count),
    encoder: encoderOf(path, particles, layout, section.entries),
  }));
  const write = async (handle: FileHandle): Promise<void> => {
    const out = new RecordWriter(handle, layout, options.subrecordBytes ?? SUBRECORD_BYTES);
    if (header.length > 0) {
      await out.begin(header.length);
      await out.write(header);
      await out.end();
    }
    for (const { runs, encoder } of blocks) {
      const { stride } = encoder;
      await out.begin(runs.reduce((sum, { count }) => sum + count, 0) * stride);
      const perChunk = Math.max(1, Math.floor(CHUNK_BYTES / stride));
      const chunk = new DataView(new ArrayBuffer(Math.min(perChunk, particles.count) * stride));
      for (const run of runs) {
        for (let done = 0; done < run.count; done += perChunk) {
          if (options.signal?.aborted === true) throw new InterruptedError();
          const count = Math.min(perChunk, run.count - done);
          for (const encode of encoder.fields) encode(chunk, run.at + done, count);
          await out.write(new Uint8Array(chunk.buffer, 0, count * stride));
        }
      }
      await out.end();
    }
  };
  await writeAtomically(path, write, options.check);
}

type Encode = (chunk: DataView, firstBody: number, count: number) => void;

interface Encoder {
  readonly stride: number;
  readonly fields: readonly Encode[];
}

function encoderOf(
  path: string,
  particles: Particles,
  layout: Layout,
  entries: readonly (LayoutField | LayoutSkip)[],
): Encoder {
  const stride = entries.reduce((sum, entry) => sum + fieldBytes(entry), 0);
  const fields: Encode[] = [];
  let offset = 0;
  for (const entry of entries) {
    if (!isSkip(entry)) {
      sourceOf(path, particles, entry).forEach((values, lane) => {
        const at = offset + lane * TYPE_BYTES[entry.type];
        fields.push(encodeLane(path, layout, entry, values, at, stride));
      });
    }
    offset += fieldBytes(entry);
  }
  return { stride, fields };
}

function encodeLane(
  path: string,
  layout: Layout,
  field: LayoutField,
  values: Values,
  offset: number,
  stride: number,
): Encode {
  const { type, scale, name } = field;
  const little = layout.byteOrder === 'little';
  if (type === 'float64') {
    return (chunk, firstBody, count) => {
      for (let i = 0, o = offset; i < count; i++, o += stride) {
        chunk.setFloat64(o, quotient(Number(values[firstBody + i]), scale), little);
      }
    };
  }
  if (type === 'float32') {
    return (chunk, firstBody, count) => {
      for (let i = 0, o = offset; i < count; i++, o += stride) {
        const value = Number(values[firstBody + i]) / scale;
        if (Number.isFinite(value) && !Number.isFinite(Math.fround(value))) {
          throw doesNotFit(path, name, firstBody + i, value, 'float32');
        }
        chunk.setFloat32(o, value, little);
      }
    };
  }
  const [lowest, highest] = integerRange(type) ?? [0n, 0n];
  return (chunk, firstBody, count) => {
    for (let i = 0, o = offset; i < count; i++, o += stride) {
      const given = values[firstBody + i];
      const value = scale === 1 ? given : Math.round(Number(given) / scale);
      if (typeof value === 'number' && !Number.isInteger(value)) {
        throw doesNotFit(path, name, firstBody + i, value, type);
      }
      if (value < lowest || value > highest) {
        throw doesNotFit(path, name, firstBody + i, value, type);
      }
      writeNumber(chunk, o, type, layout.byteOrder, value);
    }
  };
}

function doesNotFit(
  path: string,
  name: string,
  body: number,
  value: number | bigint,
  type: NumberType,
): InputError {
  return new InputError(
    'input.doesNotFit',
    `${path}: ${name} of body ${body} is ${value}, which ${type} cannot hold`,
    'Choose another type in the layout.',
  );
}

function headerOf(
  path: string,
  particles: Particles,
  layout: Layout,
  components: readonly StatedComponent[],
): Uint8Array {
  const header = new DataView(new ArrayBuffer(layout.headerBytes));
  const values: Readonly<Record<string, number | null>> = {
    time: particles.time,
    count: particles.count,
    gravity: particles.gravity,
    softening: particles.softening,
    ...componentHeader(path, layout, components),
    ...frameHeader(path, layout.comoving, particles.frame),
  };
  for (const item of layout.header) {
    const value = Object.hasOwn(values, item.name) ? values[item.name] : null;
    if (value === null) {
      throw new InputError(
        'input.missingColumn',
        `${path}: the layout's header has "${item.name}", which the particles do not state`,
        'Remove it from the header of the layout to write.',
      );
    }
    const range = integerRange(item.type);
    const fits =
      range === null
        ? item.type === 'float64' || Number.isFinite(Math.fround(value))
        : Number.isInteger(value) && value >= range[0] && value <= range[1];
    if (!fits) {
      throw new InputError(
        'input.doesNotFit',
        `${path}: the header's ${item.name} is ${value}, which ${item.type} cannot hold`,
        'Choose another type in the layout.',
      );
    }
    writeNumber(header, item.offset, item.type, layout.byteOrder, value);
  }
  return new Uint8Array(header.buffer);
}

/** A layout whose constants or units say something else than the particles would make the file lie. */
function checkConstants(path: string, particles: Particles, layout: Layout): void {
  const { constants = {}, units } = layout;
  const refuse = (key: string, stated: unknown, own: unknown): InputError =>
    new InputError(
      'input.doesNotFit',
      `${path}: the layout says ${key} ${String(stated)}, the particles ${String(own)}`,
      `Correct ${key} in the layout to write.`,
    );
  if (units !== undefined && particles.units !== null && particles.units.name !== units) {
    throw refuse('units', units, particles.units.name);
  }
  for (const key of ['time', 'gravity', 'softening', 'count'] as const) {
    const own = particles[key];
    if (constants[key] !== undefined && own !== null && own !== constants[key]) {
      throw refuse(`constants.${key}`, constants[key], own);
    }
  }
  if (constants.mass !== undefined) {
    const other = particles.mass.find((mass) => mass !== constants.mass);
    if (other !== undefined) throw refuse('constants.mass', constants.mass, other);
  }
  if (bodyBytes(layout) === 0) throw refuse('fields', 'nothing', 'something');
}
