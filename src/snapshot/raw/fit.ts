/** When a layout does not fit a file: which likely mistake, put right, would make it fit to the byte. */
import { InputError } from '../../errors.ts';
import { readExactly, type OpenFile } from '../files.ts';
import { addUp, statedComponents } from './components.ts';
import { isSkip, type Layout } from './layout.ts';
import { findRecord, type WordBytes } from './markers.ts';
import { headerItemsEnd, readHeader, statedCount } from './header.ts';
import { layOver, plainBytes, type RawStructure } from './structure.ts';
import type { ByteOrder } from './types.ts';

/**
 * {@link layOver}; if the layout does not fit, other byte order, float width, Fortran markers and
 * header length are tried, and what would fit is said in message and remedy.
 * @param layoutName - the layout's file, or null for the default
 */
export async function layOverOrExplain(
  file: OpenFile,
  layout: Layout,
  layoutName: string | null,
): Promise<RawStructure> {
  try {
    return await layOver(file, layout);
  } catch (error) {
    if (!(error instanceof InputError) || !EXPLAINED.has(error.code)) throw error;
    throw await explain(file, layout, layoutName, error);
  }
}

const EXPLAINED = new Set([
  'input.truncated',
  'input.sizeMismatch',
  'input.partialRecord',
  'input.badCount',
  'input.markers',
]);

async function explain(
  file: OpenFile,
  layout: Layout,
  layoutName: string | null,
  error: InputError,
): Promise<InputError> {
  const causes = await fittingChanges(file, layout);
  if (causes.length === 0) causes.push(...(await headerChange(file, layout)));
  const named =
    layoutName === null
      ? 'the default layout, 7 little-endian float64 a body (mass x y z vx vy vz)'
      : `the layout ${layoutName}`;
  const hint =
    layoutName === null
      ? 'Describe the file in a layout file and name it with --layout FILE.'
      : error.remedy;
  if (causes.length === 0) {
    const markers = await leadingMarker(file, layout);
    if (markers !== null) causes.push(markers);
    const code = error.code as `input.${string}`;
    return new InputError(code, `${error.message} (${named})`, [...causes, hint].join(' '), {
      cause: error,
    });
  }
  return new InputError(
    error.code === 'input.badCount' ? 'input.badCount' : 'input.sizeMismatch',
    `${error.message} (${named}); it would fit to the byte with ${causes.join(', or with ')}`,
    `${layoutName === null ? 'Write a layout file that says so' : `Change ${layoutName} accordingly`}, if that is what the simulation writes.`,
    { cause: error },
  );
}

interface Variant {
  readonly layout: Layout;
  readonly changes: readonly string[];
}

/** The smallest sets of changes with which the layout fits. */
async function fittingChanges(file: OpenFile, layout: Layout): Promise<string[]> {
  const variants = variantsOf(layout).sort((a, b) => a.changes.length - b.changes.length);
  const fitting: Variant[] = [];
  for (const variant of variants) {
    if (fitting.length > 0 && variant.changes.length > fitting[0].changes.length) break;
    try {
      await layOver(file, variant.layout);
      fitting.push(variant);
    } catch (error) {
      if (!(error instanceof InputError)) throw error;
    }
  }
  return fitting.map((variant) => variant.changes.join(' and '));
}

function variantsOf(layout: Layout): Variant[] {
  const other: ByteOrder = layout.byteOrder === 'little' ? 'big' : 'little';
  const counted =
    layout.header.some((item) => item.name === 'count') ||
    (layout.components ?? []).some(({ count }) => typeof count === 'object');
  const variants: Variant[] = [];
  for (const markers of ['none', 'fortran4', 'fortran8'] as const) {
    for (const byteOrder of [layout.byteOrder, other]) {
      // Without a count and markers no length depends on the order of bytes.
      if (byteOrder === other && !counted && markers === 'none') continue;
      for (const float of ['', 'float32', 'float64'] as const) {
        const changes: string[] = [];
        if (markers !== layout.markers) changes.push(`markers "${markers}"`);
        if (byteOrder !== layout.byteOrder) changes.push(`byteOrder "${byteOrder}"`);
        const from = float === 'float32' ? 'float64' : 'float32';
        if (float !== '') {
          if (!layout.fields.some((entry) => !isSkip(entry) && entry.type === from)) continue;
          changes.push(`${float} instead of ${from}`);
        }
        if (changes.length === 0) continue;
        const fields = layout.fields.map((entry) =>
          float !== '' && !isSkip(entry) && entry.type === from ? { ...entry, type: float } : entry,
        );
        variants.push({ layout: { ...layout, markers, byteOrder, fields }, changes });
      }
    }
  }
  return variants;
}

/** Headers of simulations are short; a longer rest is data. */
const HEADER_BYTES_AT_MOST = 65536;

/** Another header length, if a stated count says how long the bodies are. */
async function headerChange(file: OpenFile, layout: Layout): Promise<string[]> {
  if (layout.markers !== 'none') return [];
  let bodies: bigint;
  try {
    const { header } = await readHeader(file, layout);
    const components = statedComponents(file, layout, header);
    const total = statedCount(file, layout, header);
    const stated = components === null ? total : addUp(file, components, total);
    if (stated === null) return [];
    bodies = plainBytes(layout, components, stated) - BigInt(layout.headerBytes);
  } catch (error) {
    if (error instanceof InputError) return [];
    throw error;
  }
  const bytes = BigInt(file.size) - bodies;
  if (bytes < BigInt(headerItemsEnd(layout)) || bytes > BigInt(HEADER_BYTES_AT_MOST)) return [];
  return [`headerBytes ${bytes}`];
}

/** Says so if the file begins with a whole Fortran record that the layout does not know. */
async function leadingMarker(file: OpenFile, layout: Layout): Promise<string | null> {
  if (layout.markers !== 'none') return null;
  for (const wordBytes of [4, 8] as const satisfies readonly WordBytes[]) {
    if (file.size < 2 * wordBytes) continue;
    const first = new Uint8Array(wordBytes);
    await readExactly(file, first, 0, wordBytes, 0);
    if (first.every((byte) => byte === 0)) continue;
    for (const order of ['little', 'big'] as const) {
      try {
        const { bytes } = await findRecord(file, 0, wordBytes, order);
        return `The file begins with a Fortran record of ${bytes} bytes: try markers "fortran${wordBytes}" and byteOrder "${order}".`;
      } catch (error) {
        if (!(error instanceof InputError)) throw error;
      }
    }
  }
  return null;
}
