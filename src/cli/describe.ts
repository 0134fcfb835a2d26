/** `settlemark describe`: what is in a file. */
import {
  describeSnapshot,
  parseColumns,
  prepareSnapshots,
  type ExitCode,
  type SnapshotDescription,
} from '../index.ts';
import { bytesText, short, wholeNumber } from './figure.ts';
import { columns } from './columns.ts';
import { PAGE_WIDTH, printable, shorten, wrap } from './layout.ts';
import { eachPath } from './many.ts';
import { formatOf, refuseOverwriting, withOutput } from './output.ts';
import { remarksText } from './remarks.ts';
import { NO_PAINT, paintFor, type Paint } from './style.ts';
import type { Streams } from './streams.ts';

export interface DescribeOptions {
  readonly layout?: string;
  readonly columns?: string;
  readonly runFile?: string | boolean;
  readonly format?: 'table' | 'json';
  readonly out?: string;
}

/** Describes each file; one that fails is told on standard error and the rest are still described. */
export async function describe(
  files: readonly string[],
  options: DescribeOptions,
  streams: Streams,
): Promise<ExitCode> {
  const read = {
    ...(options.layout !== undefined && { layout: options.layout }),
    ...(options.columns !== undefined && { columns: await parseColumns(options.columns) }),
    signal: streams.interrupt,
  };
  const { runFile } = options;
  const survey = { read, ...(runFile !== undefined && runFile !== true && { runFile }) };
  const format = formatOf(options.format, options.out, ['table', 'json']);
  const paint = options.out === undefined ? paintFor(streams.stdout, streams.env) : NO_PAINT;
  await refuseOverwriting(options.out, files);
  return withOutput(options.out, streams, async (sink) => {
    const found: SnapshotDescription[] = [];
    const code = await eachPath(files, streams, async (file) => {
      const [prepared] = await prepareSnapshots([file], survey);
      // Another part of the same snapshot has been described.
      if (prepared.parts !== null && found.some((one) => one.file === prepared.file)) return;
      const description = await describeSnapshot(prepared.file, prepared.options.read);
      if (format === 'table') {
        await sink((found.length > 0 ? '\n' : '') + descriptionTable(description, paint));
      }
      found.push(description);
    });
    if (format !== 'table') {
      await sink(`${JSON.stringify(files.length === 1 ? found[0] : found, null, 2)}\n`);
    }
    return code;
  });
}

/** The page of a description; no line is wider than 80 columns. */
export function descriptionTable(found: SnapshotDescription, paint: Paint = NO_PAINT): string {
  const kind = found.format === 'raw' ? 'raw binary, ' : '';
  const facts = [
    `${wholeNumber(found.count)} ${found.count === 1 ? 'body' : 'bodies'}`,
    found.time === null ? 'time not stated' : `time ${short(found.time, 8)}`,
    found.units === null ? 'units not stated' : `units ${found.units}`,
    found.gravity === null ? null : `G = ${short(found.gravity, 9)}`,
    found.softening === null ? null : `softening ${short(found.softening, 6)}`,
  ].filter((fact) => fact !== null);
  const size = found.bytes === null ? '' : `; ${bytesText(found.bytes)}`;
  const components = componentsText(found.components);
  const parts = [
    `${paint.strong(shorten(found.file, PAGE_WIDTH))}\n${wrap(`${kind}${found.structure}${size}`, '  ')}\n${wrap(facts.join(', '), '  ')}${frameText(found)}${components}`,
    columnsTable(found, paint),
    remarksText(found.remarks, paint),
  ];
  return `${parts.filter((part) => part !== '').join('\n\n')}\n`;
}

/** What is said of comoving coordinates, on a line of its own; empty for physical ones. */
function frameText({ frame }: SnapshotDescription): string {
  if (frame.kind === 'physical') return '';
  const { scaleFactor, hubbleRate, boxSize, velocity } = frame;
  const box = boxSize === null ? '' : `, periodic box of edge ${short(boxSize, 6)}`;
  const text = `comoving: a = ${short(scaleFactor, 6)} (z = ${short(1 / scaleFactor - 1, 6)}), H = ${short(hubbleRate, 6)}${box}; velocities are ${velocity}`;
  return `\n${wrap(text, '  ')}`;
}

/** `components: 4,000 gas, 96,000 dark (mass 1e-6 each)`, on a line of its own; empty without any. */
function componentsText(components: SnapshotDescription['components']): string {
  if (components.length === 0) return '';
  const texts = components.map(({ name, count, mass }) => {
    const number = count === null ? '' : `${wholeNumber(count)} `;
    return `${number}${name}${mass === null ? '' : ` (mass ${short(mass, 6)} each)`}`;
  });
  return `\n${wrap(`components: ${texts.join(', ')}`, '  ')}`;
}

const NAME_WIDTH = 18;

function columnsTable(found: SnapshotDescription, paint: Paint): string {
  const hasPlace = found.columns.some((column) => column.offset !== null);
  const rows = found.columns.map((column) => [
    shorten(column.name, NAME_WIDTH),
    column.field === null ? 'not used' : column.field === column.name ? '' : column.field,
    shorten(printable(column.type) + (column.width > 1 ? ` × ${column.width}` : ''), 14),
    ...(hasPlace ? [column.offset === null ? '' : String(column.offset)] : []),
    column.smallest === null ? '' : short(column.smallest, 5),
    column.largest === null ? '' : short(column.largest, 5),
  ]);
  const head = ['column', 'read as', 'type', ...(hasPlace ? ['at byte'] : []), 'from', 'to'];
  const aligns = ['left', 'left', 'left', 'right', 'right', 'right'] as const;
  const table = columns([head, ...rows], hasPlace ? aligns : aligns.slice(1), '  ').split('\n');
  return [paint.faint(table[0]), ...table.slice(1)].join('\n');
}
