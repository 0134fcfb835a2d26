/** Colours, only where a person looks at a terminal that wants them. */
import * as util from 'node:util';
import type { OutStream, Streams } from './streams.ts';

export interface Paint {
  readonly strong: (text: string) => string;
  readonly faint: (text: string) => string;
  readonly good: (text: string) => string;
  readonly warn: (text: string) => string;
  readonly bad: (text: string) => string;
}

const plain = (text: string): string => text;
export const NO_PAINT: Paint = {
  strong: plain,
  faint: plain,
  good: plain,
  warn: plain,
  bad: plain,
};

/** The stream is looked at here, and may be another than the one Node would ask. */
const style = (format: Parameters<typeof util.styleText>[0]) => (text: string) =>
  util.styleText(format, text, { validateStream: false });

const COLOURS: Paint = {
  strong: style('bold'),
  faint: style('dim'),
  good: style('green'),
  warn: style('yellow'),
  bad: style('red'),
};

/** Colours for a stream; none unless it is a terminal, under NO_COLOR (no-color.org), or on a dumb one. */
export function paintFor(stream: OutStream, env: Streams['env']): Paint {
  const wanted = stream.isTTY === true && !env['NO_COLOR'] && env['TERM'] !== 'dumb';
  // The first releases of Node 20 have no styleText.
  return wanted && 'styleText' in util ? COLOURS : NO_PAINT;
}
