/** `settlemark convert`: a snapshot in another format or layout. */
import {
  convertSnapshot,
  EXIT,
  parseColumns,
  prepareSnapshots,
  type Conversion,
  type ExitCode,
} from '../index.ts';
import { withCrew } from './crew.ts';
import { short, wholeNumber } from './figure.ts';
import { shorten, wrap } from './layout.ts';
import { startProgress } from './progress.ts';
import { remarksText } from './remarks.ts';
import { paintFor } from './style.ts';
import { write, type Streams } from './streams.ts';

export interface ConvertCommandOptions {
  readonly layout?: string;
  readonly columns?: string;
  readonly runFile?: string | boolean;
  readonly format?: 'raw' | 'arrow';
  readonly toLayout?: string;
  readonly precision?: 'float32' | 'float64';
  readonly drop?: string;
  readonly round?: boolean;
  readonly threads?: number;
  readonly quiet?: boolean;
}

/** Converts one file and says what was written and checked. */
export async function convert(
  from: string,
  to: string,
  options: ConvertCommandOptions,
  streams: Streams,
): Promise<ExitCode> {
  const { layout, columns, runFile, drop, threads, quiet = false, ...rest } = options;
  const read = {
    ...(layout !== undefined && { layout }),
    ...(columns !== undefined && { columns: await parseColumns(columns) }),
    signal: streams.interrupt,
  };
  const survey = { read, ...(runFile !== undefined && runFile !== true && { runFile }) };
  const [prepared] = await prepareSnapshots([from], survey);
  const names = drop?.split(',').map((name) => name.trim());
  const done = await withCrew(threads, streams.interrupt, (crew) => {
    const progress = startProgress(streams.stderr, quiet, crew);
    const onProgress = (bytes: number, total: number) =>
      progress.say(`${shorten(from, 40)}: reading`, total > 0 ? bytes / total : null);
    // A run file may choose some of the bodies for measurements: a conversion is of all.
    const { layout: own, columns: named } = prepared.options.read ?? {};
    const wanted = {
      ...rest,
      read: { ...read, ...(own && { layout: own }), ...(named && { columns: named }), onProgress },
      ...(names && { drop: names.filter((name) => name !== '') }),
    };
    return convertSnapshot(from, to, wanted, crew).finally(() => progress.close());
  });
  if (!quiet) {
    const remarks = remarksText(done.remarks, paintFor(streams.stderr, streams.env));
    await write(streams.stderr, `${summary(done)}${remarks === '' ? '' : `\n${remarks}\n`}`);
  }
  return EXIT.done;
}

/** What was written and how it compares, in lines of at most 80 columns. */
function summary({ to, count, format, layout, dropped, rounded }: Conversion): string {
  const bodies = count === 1 ? '1 body' : `${wholeNumber(count)} bodies`;
  const kind = format === 'raw' ? 'raw' : 'Arrow IPC';
  const same = rounded.length === 0 ? 'read again, the same to the bit' : 'read again and compared';
  const lines = [`${to}: ${bodies}, ${kind}; ${same}`];
  if (layout !== null) lines.push(`  its layout is ${layout}`);
  if (dropped.length > 0) lines.push(wrap(`left out as allowed: ${dropped.join(', ')}`, '  '));
  for (const { column, bodies: changed, largest } of rounded) {
    const by = largest === null ? '' : `, by ${short(largest, 2)} of its value at most`;
    lines.push(wrap(`${column} rounded in ${wholeNumber(changed)} of them${by}`, '  '));
  }
  return `${lines.join('\n')}\n`;
}
